package job

import (
	"slices"

	"gainwright/safety"
)

// Numbered is what a number on the screen means and what to do about it.
type Numbered struct {
	Number    int
	Words, Do string
}

// Numbers lists the limiter's causes by their number, for the help. The job's own
// refusals, from 700 on, say cause and remedy where they stand.
func Numbers() []Numbered {
	var list []Numbered
	for code, c := range safety.Codes() {
		list = append(list, Numbered{int(code), c.Words, c.Do})
	}
	slices.SortFunc(list, func(a, b Numbered) int { return a.Number - b.Number })
	return list
}
