// Package trace holds columns of samples of one recorded run: what was applied
// to the motor, what it did, and which samples are left out of a fit and why.
// It reads and writes them as CSV. It knows nothing of models.
//
// All columns are SI: seconds, volts, rad/s at the motor shaft, amperes, degrees
// Celsius. A column that was not recorded is nil, never a column of zeros.
//
// # File format
//
// Comma-separated values: the first row names the columns, the second gives
// their units, one row per sample follows. Lines that begin with '#' are
// comments; a comment of the form "# key = value" with a key this package
// writes itself (name, hold, window_s, rad_per_count) is read back.
//
//	# hold = since
//	time,voltage,speed
//	s,V,rad/s
//	0,0,0
//	0.001,6,0.4
package trace

import (
	"errors"
	"fmt"
	"math"
	"sort"
)

// Hold says over which interval a row's voltage was applied.
type Hold int

const (
	// Since means Voltage[i] was applied from Time[i-1] to Time[i].
	Since Hold = iota
	// From means Voltage[i] was applied from Time[i] on.
	From
)

// String returns the word used in files and on the command line.
func (h Hold) String() string {
	if h == From {
		return "from"
	}
	return "since"
}

// ParseHold reads the word that String writes.
func ParseHold(word string) (Hold, error) {
	switch word {
	case "since":
		return Since, nil
	case "from":
		return From, nil
	}
	return Since, fmt.Errorf("trace: hold %q: want since or from", word)
}

// Trace is one record. Time is strictly rising; every column that is not nil has
// as many entries as Time.
type Trace struct {
	Name string

	Time    []float64 // s, the instant at which the counts were latched
	Voltage []float64 // V, applied to the motor, see Hold
	Speed   []float64 // rad/s, mean over the Window that ends at Time

	Current     []float64 // A, nil where not recorded
	Bus         []float64 // V, nil where not recorded
	Temperature []float64 // degC, nil where not recorded
	Setpoint    []float64 // rad/s, nil where not recorded
	Counts      []float64 // accumulated encoder counts at Time, nil where not recorded

	Mask []Mask // nil or one per sample; Used (0) takes part in a fit

	Hold        Hold
	Window      float64 // s; 0 means Speed is an instantaneous sample
	RadPerCount float64 // rad at the motor shaft; 0 where not known

	Other []Column // columns of a file that this package does not know, kept as text
}

// Column is a column that is kept for writing back but not understood.
type Column struct {
	Name, Unit string
	Text       []string
}

// ErrInvalid is wrapped by every error of Validate and of ReadCSV.
var ErrInvalid = errors.New("invalid trace")

// Len returns the number of samples.
func (tr *Trace) Len() int { return len(tr.Time) }

// Duration returns the time in seconds from the first sample to the last.
func (tr *Trace) Duration() float64 {
	if len(tr.Time) < 2 {
		return 0
	}
	return tr.Time[len(tr.Time)-1] - tr.Time[0]
}

// Validate checks lengths, finiteness and the order of time. The error names the
// column and the sample (counted from 0) and wraps ErrInvalid.
func (tr *Trace) Validate() error {
	n := len(tr.Time)
	for _, c := range tr.columns() {
		if c.required && c.values == nil && n > 0 {
			return fmt.Errorf("%w: no column %s", ErrInvalid, c.name)
		}
		if c.values != nil && len(c.values) != n {
			return fmt.Errorf("%w: column %s has %d samples, time has %d", ErrInvalid, c.name, len(c.values), n)
		}
		for i, v := range c.values {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return fmt.Errorf("%w: column %s, sample %d: %v is not a number to work with", ErrInvalid, c.name, i, v)
			}
		}
	}
	if tr.Mask != nil && len(tr.Mask) != n {
		return fmt.Errorf("%w: mask has %d entries, time has %d", ErrInvalid, len(tr.Mask), n)
	}
	for i := 1; i < n; i++ {
		if tr.Time[i] <= tr.Time[i-1] {
			return fmt.Errorf("%w: time, sample %d: %g s is not after %g s", ErrInvalid, i, tr.Time[i], tr.Time[i-1])
		}
	}
	if !(tr.Window >= 0) || math.IsInf(tr.Window, 0) {
		return fmt.Errorf("%w: window %g s", ErrInvalid, tr.Window)
	}
	if !(tr.RadPerCount >= 0) || math.IsInf(tr.RadPerCount, 0) {
		return fmt.Errorf("%w: %g rad per count", ErrInvalid, tr.RadPerCount)
	}
	return nil
}

type namedColumn struct {
	name     string
	unit     string
	required bool
	values   []float64
}

// columns lists the numeric columns in the order in which files carry them.
func (tr *Trace) columns() []namedColumn {
	return []namedColumn{
		{"time", "s", true, tr.Time},
		{"voltage", "V", true, tr.Voltage},
		{"speed", "rad/s", true, tr.Speed},
		{"current", "A", false, tr.Current},
		{"bus", "V", false, tr.Bus},
		{"temperature", "degC", false, tr.Temperature},
		{"setpoint", "rad/s", false, tr.Setpoint},
		{"counts", "1", false, tr.Counts},
	}
}

// Slice returns samples from (inclusive) to (exclusive) as a trace that shares
// the underlying arrays. It panics if the range is out of bounds.
func (tr *Trace) Slice(from, to int) *Trace {
	cut := func(v []float64) []float64 {
		if v == nil {
			return nil
		}
		return v[from:to:to]
	}
	out := *tr
	out.Time, out.Voltage, out.Speed = cut(tr.Time), cut(tr.Voltage), cut(tr.Speed)
	out.Current, out.Bus, out.Temperature = cut(tr.Current), cut(tr.Bus), cut(tr.Temperature)
	out.Setpoint, out.Counts = cut(tr.Setpoint), cut(tr.Counts)
	if tr.Mask != nil {
		out.Mask = tr.Mask[from:to:to]
	}
	out.Other = nil
	for _, c := range tr.Other {
		out.Other = append(out.Other, Column{c.Name, c.Unit, c.Text[from:to:to]})
	}
	return &out
}

// SplitFraction cuts the trace in two so that the second part holds the given
// share (0 to 1) of the samples.
func (tr *Trace) SplitFraction(second float64) (first, rest *Trace) {
	n := tr.Len()
	cut := n - int(math.Round(second*float64(n)))
	cut = min(max(cut, 0), n)
	return tr.Slice(0, cut), tr.Slice(cut, n)
}

// Period returns the median sampling interval in seconds, 0 for fewer than two
// samples.
func (tr *Trace) Period() float64 {
	n := len(tr.Time)
	if n < 2 {
		return 0
	}
	d := make([]float64, n-1)
	for i := range d {
		d[i] = tr.Time[i+1] - tr.Time[i]
	}
	sort.Float64s(d)
	if len(d)%2 == 1 {
		return d[len(d)/2]
	}
	return (d[len(d)/2-1] + d[len(d)/2]) / 2
}
