package model

import (
	"fmt"
	"strings"
)

// Text returns m on one line as plain numerator, denominator and delay, in
// descending powers of s and in seconds. General numeric packages read the
// assignments as they stand.
func (m Linear) Text() string {
	return fmt.Sprintf("num = %s; den = %s; delay = %.17g;", row(m.Num), row(m.Den), m.DeadTime)
}

func row(p []float64) string {
	words := make([]string, len(p))
	for i, v := range p {
		words[i] = fmt.Sprintf("%.17g", v)
	}
	return "[" + strings.Join(words, ", ") + "]"
}
