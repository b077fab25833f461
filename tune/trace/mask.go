package trace

import (
	"fmt"
	"math"
	"sort"
)

// Mask is the reason for which a sample is left out of a fit. Zero means used.
type Mask uint8

const (
	Used        Mask = iota
	Saturated        // the drive could not give the voltage that was asked of it
	Sag              // the bus fell: the sample measures the supply
	Stall            // driven, but not turning
	Gap              // first sample after samples that were lost
	FirstMotion      // sticking and breaking away
	Start            // before the run had begun
	Slip             // counts and shaft disagree
	Manual           // left out by a person
	maskEnd
)

var maskWords = [...]string{"used", "saturated", "sag", "stall", "gap", "first-motion", "start", "slip", "manual"}

// String returns the word used in files and on screen.
func (m Mask) String() string {
	if m < maskEnd {
		return maskWords[m]
	}
	return fmt.Sprintf("mask-%d", uint8(m))
}

// ParseMask reads the word that String writes.
func ParseMask(word string) (Mask, error) {
	for i, w := range maskWords {
		if w == word {
			return Mask(i), nil
		}
	}
	return Used, fmt.Errorf("trace: mask %q is not a known reason", word)
}

// Breaks reports whether a linear model loses the state of the motor while the
// reason holds, so that a simulation has to start afresh behind it.
func (m Mask) Breaks() bool { return m != Used && m != Manual }

// At returns the mask of sample i; a trace without masks uses every sample.
func (tr *Trace) At(i int) Mask {
	if tr.Mask == nil {
		return Used
	}
	return tr.Mask[i]
}

// Masked counts the samples that are left out, by reason.
func (tr *Trace) Masked() map[string]int {
	out := map[string]int{}
	for _, m := range tr.Mask {
		if m != Used {
			out[m.String()]++
		}
	}
	return out
}

// mark sets the reason of sample i unless it already has one.
func (tr *Trace) mark(i int, m Mask) {
	if tr.Mask == nil {
		tr.Mask = make([]Mask, tr.Len())
	}
	if tr.Mask[i] == Used {
		tr.Mask[i] = m
	}
}

// GapFactor is how many median intervals may pass between two samples before
// the second is marked as coming after a gap. Jittered stamps stay below it;
// three lost rows in a stream do not. Our choice.
const GapFactor = 3.5

// MarkGaps masks every sample that comes more than GapFactor median intervals
// after the one before, and returns how many there are.
func (tr *Trace) MarkGaps() int {
	limit := GapFactor * tr.Period()
	found := 0
	for i := 1; i < tr.Len(); i++ {
		if tr.Time[i]-tr.Time[i-1] > limit {
			tr.mark(i, Gap)
			found++
		}
	}
	return found
}

// Thresholds for MarkDrive. All are our choice.
const (
	saturatedShare = 0.985 // of the bus: above it the drive has nothing left to give
	sagShare       = 0.95  // of the bus at the start and end of the record
	stallSamples   = 20    // driven without a single count for so long
)

// MarkDrive masks samples at which the drive was saturated or the supply sagged
// (both only where the bus was recorded) and samples at which the motor stood
// still under more than half of the largest voltage.
func (tr *Trace) MarkDrive() {
	if tr.Bus != nil {
		// A record that sags nearly all the time still began at rest.
		full := math.Max(quantile(tr.Bus, 0.9), quantile(tr.Bus[:min(10, len(tr.Bus))], 0.5))
		for i := range tr.Time {
			if full > 0 && tr.Bus[i] < sagShare*full {
				tr.mark(i, Sag)
			} else if tr.Bus[i] > 0 && math.Abs(tr.Voltage[i]) > saturatedShare*tr.Bus[i] {
				tr.mark(i, Saturated)
			}
		}
	}
	tr.markStall()
}

func (tr *Trace) markStall() {
	top, fast := 0.0, 0.0
	for i := range tr.Time {
		top = math.Max(top, math.Abs(tr.Voltage[i]))
		fast = math.Max(fast, math.Abs(tr.Speed[i]))
	}
	if top == 0 || fast == 0 {
		return
	}
	run := 0
	for i := 0; i <= tr.Len(); i++ {
		if i < tr.Len() && math.Abs(tr.Voltage[i]) > 0.5*top && tr.Speed[i] == 0 {
			run++
			continue
		}
		if run >= stallSamples {
			for j := i - run; j < i; j++ {
				tr.mark(j, Stall)
			}
		}
		run = 0
	}
}

// quantile returns the q-quantile (0 to 1) of v by nearest rank.
func quantile(v []float64, q float64) float64 {
	s := append([]float64(nil), v...)
	sort.Float64s(s)
	if len(s) == 0 {
		return 0
	}
	return s[min(int(q*float64(len(s))), len(s)-1)]
}
