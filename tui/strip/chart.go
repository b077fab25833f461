package strip

import "math"

// Glyphs says which characters a chart may use.
type Glyphs uint8

// The sets of glyphs, the finest first.
const (
	Braille Glyphs = iota // 2×4 dots in a cell
	Block                 // 1×2 dots in a cell, for consoles without braille
	ASCII                 // one dot in a cell
)

// Kind says what a cell shows.
type Kind uint8

// The kinds of cells.
const (
	Blank Kind = iota
	Label
	Axis
	Band
	Limit
	Forecast
	Setpoint
	Second // a curve beside the main one
	Mark
	Data
)

// Cell is one character of a chart.
type Cell struct {
	Rune rune
	Kind Kind
}

// Axes gives the ranges of a chart and its words. A range that is empty or not
// finite is opened to a width of one.
type Axes struct {
	X0, X1 float64 // in the unit of the horizontal axis
	Y0, Y1 float64 // in the unit of the vertical axis
	Title  string  // first row: quantity and unit of the vertical axis
	XUnit  string  // written behind the last horizontal label
	Gutter int     // least width of the column of labels, so that charts below each other line up
	Bare   bool    // no labels at all
	Powers bool    // the horizontal axis is in powers of ten: its labels are what they come to
}

// Point is a pair of co-ordinates. The functions that draw take slices of any
// type that is built like it, so that nothing has to be copied.
type Point struct{ T, V float64 }

// Chart is a grid of cells with a plot area inside. The zero value is ready for
// Reset, which may be called again and again.
type Chart struct {
	w, h   int
	cells  []Cell
	mask   []uint8 // dots set in the cells of the plot area
	glyphs Glyphs
	ax     Axes

	px, py, pw, ph int     // plot area within the grid
	dx, dy         int     // dots in a cell
	kx, ky         float64 // dots per unit
	lo, hi         []float64
	num            [32]byte
}

// Reset empties the chart and sets its size in cells, its glyphs and its axes.
func (c *Chart) Reset(w, h int, g Glyphs, ax Axes) {
	c.w, c.h, c.glyphs = max(w, 0), max(h, 0), g
	n := c.w * c.h
	if cap(c.cells) < n {
		c.cells, c.mask = make([]Cell, n), make([]uint8, n)
	}
	c.cells, c.mask = c.cells[:n], c.mask[:n]
	for i := range c.cells {
		c.cells[i] = Cell{' ', Blank}
	}
	clear(c.mask)
	ax.X0, ax.X1 = open(ax.X0, ax.X1)
	ax.Y0, ax.Y1 = open(ax.Y0, ax.Y1)
	c.ax = ax
	switch g {
	case Braille:
		c.dx, c.dy = 2, 4
	case Block:
		c.dx, c.dy = 1, 2
	default:
		c.dx, c.dy = 1, 1
	}
	c.frame()
	dots := c.pw * c.dx
	if cap(c.lo) < dots {
		c.lo, c.hi = make([]float64, dots), make([]float64, dots)
	}
	c.lo, c.hi = c.lo[:dots], c.hi[:dots]
	c.kx = float64(dots-1) / (ax.X1 - ax.X0)
	c.ky = float64(c.ph*c.dy-1) / (ax.Y1 - ax.Y0)
}

// open returns a range with lo < hi, both finite and not so large that their
// difference overflows.
func open(lo, hi float64) (float64, float64) {
	const most = 1e150
	if math.IsNaN(lo) || math.IsNaN(hi) {
		lo, hi = 0, 1
	}
	lo, hi = min(max(lo, -most), most), min(max(hi, -most), most)
	if lo > hi {
		lo, hi = hi, lo
	}
	if hi-lo <= 1e-12*math.Max(math.Abs(lo), math.Abs(hi)) || hi == lo {
		half := math.Max(0.5, math.Abs(lo)*1e-6)
		lo, hi = lo-half, hi+half
	}
	return lo, hi
}

// Size returns the size of the grid in cells.
func (c *Chart) Size() (w, h int) { return c.w, c.h }

// Row returns the cells of row y; it is valid until the next Reset.
func (c *Chart) Row(y int) []Cell {
	if y < 0 || y >= c.h {
		return nil
	}
	return c.cells[y*c.w : (y+1)*c.w]
}

// Line draws pts as a connected line, with values multiplied by scale. The
// times are meant to rise; a value or time that is not finite is a gap.
func Line[P ~struct{ T, V float64 }](c *Chart, k Kind, pts []P, scale float64) {
	if c.pw <= 0 || c.ph <= 0 || len(pts) == 0 {
		return
	}
	for i := range c.lo {
		c.lo[i], c.hi[i] = math.Inf(1), math.Inf(-1)
	}
	last := float64(len(c.lo) - 1)
	var px, py float64
	have, col := false, -1 // col: the column of the point before, if it lies inside
	for i := range pts {
		p := Point(pts[i])
		x, y := (p.T-c.ax.X0)*c.kx, p.V*scale
		if x-x != 0 || y-y != 0 { // NaN or infinite
			have, col = false, -1
			continue
		}
		if col >= 0 && x >= 0 && x <= last && int(x+0.5) == col {
			c.extend(col, y) // most points share their column with the one before
			px, py = x, y
			continue
		}
		switch {
		case have && !(x < 0 && px < 0) && !(x > last && px > last):
			c.segment(px, py, x, y)
		case x >= 0 && x <= last:
			c.extend(int(x+0.5), y)
		}
		px, py, have, col = x, y, true, -1
		if x >= 0 && x <= last {
			col = int(x + 0.5)
		}
	}
	c.emit(k)
}

// segment widens every column between two neighbouring points by the part of
// the straight line that crosses it.
func (c *Chart) segment(x0, y0, x1, y1 float64) {
	if x1 < x0 {
		x0, y0, x1, y1 = x1, y1, x0, y0
	}
	n := float64(len(c.lo) - 1)
	a := int(math.Floor(max(x0, -1) + 0.5))
	b := int(math.Floor(min(x1, n+1) + 0.5))
	if x0 >= 0 {
		c.extend(a, y0)
	}
	if x1 <= n {
		c.extend(b, y1)
	}
	if a == b || x1 == x0 {
		return
	}
	slope := (y1 - y0) / (x1 - x0)
	for col := a; col < b; col++ {
		edge := y0 + (float64(col)+0.5-x0)*slope
		c.extend(col, edge)
		c.extend(col+1, edge)
	}
}

func (c *Chart) extend(col int, y float64) {
	if col < 0 || col >= len(c.lo) {
		return
	}
	if y < c.lo[col] {
		c.lo[col] = y
	}
	if y > c.hi[col] {
		c.hi[col] = y
	}
}

// emit turns the columns that were gathered into dots.
func (c *Chart) emit(k Kind) {
	for col := range c.lo {
		if c.lo[col] > c.hi[col] || !c.pattern(k, col) {
			continue
		}
		c.upright(k, col, c.dotRow(c.hi[col]), c.dotRow(c.lo[col]))
	}
}

// upright sets the dots of a column from row top to row bottom, cell by cell.
func (c *Chart) upright(k Kind, col, top, bottom int) {
	x := col / c.dx
	for y := top / c.dy; y <= bottom/c.dy; y++ {
		var m uint8
		for row := max(top-y*c.dy, 0); row <= min(bottom-y*c.dy, c.dy-1); row++ {
			m |= bit(c.glyphs, col%c.dx, row)
		}
		i := (c.py+y)*c.w + c.px + x
		c.mask[i] |= m
		c.cells[i] = Cell{glyph(c.glyphs, c.mask[i], k), k}
	}
}

// pattern thins the lines that are not measured, so that they differ from the
// measured one without any colour.
func (c *Chart) pattern(k Kind, col int) bool {
	switch {
	case k == Forecast && c.glyphs == Braille:
		return col%3 == 0
	case k == Forecast:
		return col%2 == 0
	case k == Setpoint && c.glyphs == Braille:
		return col%6 < 4
	}
	return true
}

// dotRow returns the row of dots of a value, counted from the top; values
// outside of the axis are pinned to its ends.
func (c *Chart) dotRow(y float64) int {
	top := float64(c.ph*c.dy - 1)
	r := (c.ax.Y1 - min(max(y, c.ax.Y0), c.ax.Y1)) * c.ky
	return int(min(max(r, 0), top) + 0.5)
}

// Points draws every finite point by itself, with a sign that stands out from
// a line. xs and ys multiply the co-ordinates.
func Points[P ~struct{ T, V float64 }](c *Chart, k Kind, pts []P, xs, ys float64) {
	if c.pw <= 0 || c.ph <= 0 {
		return
	}
	sign := 'o'
	if c.glyphs != ASCII {
		sign = '•'
	}
	for i := range pts {
		p := Point(pts[i])
		x, y := (p.T*xs-c.ax.X0)*c.kx, p.V*ys
		if x-x != 0 || y-y != 0 || x < 0 || x > float64(len(c.lo)-1) {
			continue
		}
		c.put(int(x+0.5)/c.dx, c.dotRow(y)/c.dy, Cell{sign, k})
	}
}

// Shade fills the room between two curves that share their times, multiplied
// by scale. It is meant to be drawn before the lines.
func Shade[P ~struct{ T, V float64 }](c *Chart, low, high []P, scale float64) {
	sign := ':'
	if c.glyphs != ASCII {
		sign = '░'
	}
	n := min(len(low), len(high))
	for x := 0; x < c.pw && n > 0; x++ {
		t := c.ax.X0 + (float64(x*c.dx)+float64(c.dx-1)/2)/c.kx
		lo, hi := at(low[:n], t)*scale, at(high[:n], t)*scale
		if lo-lo != 0 || hi-hi != 0 || hi < c.ax.Y0 || lo > c.ax.Y1 {
			continue
		}
		for y := c.dotRow(hi) / c.dy; y <= c.dotRow(lo)/c.dy; y++ {
			c.put(x, y, Cell{sign, Band})
		}
	}
}

// at returns the value of a curve at t by straight lines between its points,
// or NaN outside of it.
func at[P ~struct{ T, V float64 }](pts []P, t float64) float64 {
	lo, hi := 0, len(pts)-1
	if hi < 0 || !(t >= Point(pts[0]).T && t <= Point(pts[hi]).T) {
		return math.NaN()
	}
	for hi-lo > 1 {
		mid := (lo + hi) / 2
		if Point(pts[mid]).T <= t {
			lo = mid
		} else {
			hi = mid
		}
	}
	a, b := Point(pts[lo]), Point(pts[hi])
	if b.T <= a.T {
		return a.V
	}
	return a.V + (b.V-a.V)*(t-a.T)/(b.T-a.T)
}

// Level draws a limit line at height y, with words at its right end. A level
// outside of the axis is not drawn.
func (c *Chart) Level(y float64, words string) {
	if !(y >= c.ax.Y0 && y <= c.ax.Y1) || c.ph <= 0 {
		return
	}
	sign := '-'
	if c.glyphs != ASCII {
		sign = '╌'
	}
	row := c.dotRow(y) / c.dy
	for x := 0; x < c.pw; x++ {
		c.put(x, row, Cell{sign, Limit})
	}
	c.text(c.px+c.pw-len(words)-1, c.py+row, c.px, words, Limit)
}

// Upright draws a thin line from top to bottom at x, for a mark.
func (c *Chart) Upright(x float64) {
	if !(x >= c.ax.X0 && x <= c.ax.X1) || c.pw <= 0 {
		return
	}
	sign := '|'
	if c.glyphs != ASCII {
		sign = '╎'
	}
	col := int((x-c.ax.X0)*c.kx+0.5) / c.dx
	for y := 0; y < c.ph; y++ {
		c.put(col, y, Cell{sign, Mark})
	}
}

// put writes a cell of the plot area.
func (c *Chart) put(x, y int, cell Cell) {
	if x < 0 || y < 0 || x >= c.pw || y >= c.ph {
		return
	}
	i := (c.py+y)*c.w + c.px + x
	c.cells[i], c.mask[i] = cell, 0
}

// Values widens the range lo..hi by the finite values of pts times scale. Begin
// with lo = +Inf and hi = -Inf.
func Values[P ~struct{ T, V float64 }](lo, hi float64, pts []P, scale float64) (float64, float64) {
	for i := range pts {
		if v := Point(pts[i]).V * scale; v-v == 0 {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	return lo, hi
}

// Times widens the range lo..hi by the finite times of pts.
func Times[P ~struct{ T, V float64 }](lo, hi float64, pts []P) (float64, float64) {
	for i := range pts {
		if t := Point(pts[i]).T; t-t == 0 {
			lo, hi = min(lo, t), max(hi, t)
		}
	}
	return lo, hi
}
