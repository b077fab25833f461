package identify

import (
	"fmt"
	"math"

	"gainwright/tune/trace"
)

// Breakaway is what one slow voltage ramp tells.
type Breakaway struct {
	Volts float64 // V at the first motion, with its sign
	At    float64 // s, time stamp of the first sample that moved
	Index int     // sample
}

// FindBreakaway finds the first motion on a ramp from rest: the first sample from
// which the shaft has turned at least least radians away from where it stood and
// does not come back. Position is taken from the counts where the trace has
// them, else from the integral of the speed. The error wraps ErrData where
// nothing moved.
func FindBreakaway(tr *trace.Trace, least float64) (Breakaway, error) {
	n := tr.Len()
	if n < 2 || !(least > 0) {
		return Breakaway{}, fmt.Errorf("%w: %d samples, least motion %g rad", ErrData, n, least)
	}
	pos := make([]float64, n)
	if tr.Counts != nil && tr.RadPerCount > 0 {
		for i := range pos {
			pos[i] = (tr.Counts[i] - tr.Counts[0]) * tr.RadPerCount
		}
	} else {
		for i := 1; i < n; i++ {
			pos[i] = pos[i-1] + (tr.Time[i]-tr.Time[i-1])*tr.Speed[i]
		}
	}
	// Going backwards finds the last sample at which the shaft still stood.
	still := -1
	for i := n - 1; i >= 0; i-- {
		if math.Abs(pos[i]) < least {
			still = i
			break
		}
	}
	if still == n-1 {
		return Breakaway{}, fmt.Errorf("%w: the shaft did not turn %.3g rad up to %.3g V: raise the end of the ramp", ErrData, least, tr.Voltage[n-1])
	}
	// The motion began where the shaft last was at its standstill angle.
	first := still + 1
	for first > 1 && math.Abs(pos[first-1]) > least/4 {
		first--
	}
	return Breakaway{Volts: tr.Voltage[first], At: tr.Time[first], Index: first}, nil
}

// BreakawaySpread is the spread of several ramps in one direction.
type BreakawaySpread struct {
	Mean, SD, Min, Max float64 // V, magnitudes
	N                  int
}

// SpreadOf summarises breakaway voltages by magnitude; SD is NaN for one ramp.
func SpreadOf(ramps []Breakaway) BreakawaySpread {
	s := BreakawaySpread{N: len(ramps), Min: math.Inf(1)}
	if s.N == 0 {
		return BreakawaySpread{Mean: math.NaN(), SD: math.NaN(), Min: math.NaN(), Max: math.NaN()}
	}
	v := make([]float64, s.N)
	for i, r := range ramps {
		v[i] = math.Abs(r.Volts)
		s.Mean += v[i] / float64(s.N)
		s.Min, s.Max = math.Min(s.Min, v[i]), math.Max(s.Max, v[i])
	}
	s.SD = math.NaN()
	if s.N > 1 {
		s.SD = deviation(v) / math.Sqrt(float64(s.N-1))
	}
	return s
}
