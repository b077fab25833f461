// Package strip draws charts in character cells: strips of a quantity against
// time, and curves of one quantity against another. It decides where a value
// lands in a grid of cells and which glyph stands there. It knows no colours,
// no terminal and nothing of what the curves mean; a cell carries the Kind of
// what it shows and the caller chooses the look.
//
// A chart is reduced to the lowest and the highest value of each column of
// dots, so that a spike of one sample stays visible however many samples share
// a column. A value that is not finite is a gap: the line stops before it and
// begins again after it. Any size is taken, 1×1 and less included, and a Chart
// that is used again for the next frame allocates nothing.
package strip
