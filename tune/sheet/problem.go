package sheet

import (
	"fmt"

	"gainwright/tune/sheet/plain"
)

// ProblemKind says what is wrong with a sheet.
type ProblemKind string

// The kinds of problem.
const (
	Changed    ProblemKind = "changed"    // content is not what was entered
	Cut        ProblemKind = "cut"        // the end of a file or of the index is missing
	Reordered  ProblemKind = "re-ordered" // an entry stands where it was not made
	Added      ProblemKind = "added"      // something that was never entered
	Removed    ProblemKind = "removed"    // an entry, or the file of one, is gone
	Unfinished ProblemKind = "unfinished" // never closed: a kill, or the end was cut off
	Unreadable ProblemKind = "unreadable" // the disk or the form refuses
)

// Problem is one finding with its place.
type Problem struct {
	Kind  ProblemKind `json:"kind"`
	Entry int         `json:"entry,omitempty"` // 0 where it is none's
	File  string      `json:"file,omitempty"`
	Line  int         `json:"line,omitempty"` // of the index, from 1
	Text  string      `json:"text"`
}

func (p Problem) String() string {
	place := ""
	if p.File != "" {
		place = plain.Visible(p.File, 80)
	}
	if p.Line > 0 {
		place += fmt.Sprintf(":%d", p.Line)
	}
	if p.Entry > 0 {
		place += fmt.Sprintf(" (entry %d)", p.Entry)
	}
	return fmt.Sprintf("%s: %s: %s", place, p.Kind, p.Text)
}
