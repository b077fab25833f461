// Package tui is the console on screen. It decides what a View of the job looks
// like in a given number of rows and columns and which intent a key stands for;
// it knows no port, no drive and no clock of its own.
//
// A Screen is a value: Update takes a key and returns the next Screen and the
// intents it means, Draw takes a View and a size and returns the text. Both are
// pure. Root is the only part that touches a terminal: it asks a Session for
// the newest View some thirty times a second and draws it. Nothing is ever sent
// to it, and a stop never comes through here: the stop key is taken from the
// input ahead of this package.
//
// Four questions rule the layout: is it live, is it moving, is the link fresh,
// what does the stop key do now. Their answers are the top two rows, whatever
// the size and whatever the page. Below them stand the path of the job, one
// page, what comes next, and the keys that do something now.
package tui
