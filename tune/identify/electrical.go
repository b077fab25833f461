package identify

import (
	"fmt"
	"math"

	"gainwright/tune/trace"
)

// Electrical is what a record with current tells of the winding.
type Electrical struct {
	Resistance, ResistanceSD float64 // ohm, winding and driver together
	Ke, KeSD                 float64 // V·s/rad
	Drop                     float64 // V, constant part: brushes, driver, offset of the measurement
	N                        int
}

// FitElectrical fits voltage = R·current + Ke·speed + drop to the used samples of
// a trace with current, the inductance left out: it is for records sampled slower
// than L/R. The voltage of a sample is the one that acts at its time stamp. The
// error wraps ErrData, also where current and speed do not vary apart from each
// other, so that R and Ke cannot be told from one another.
func FitElectrical(tr *trace.Trace) (Electrical, error) {
	if err := tr.Validate(); err != nil {
		return Electrical{}, err
	}
	if tr.Current == nil {
		return Electrical{}, fmt.Errorf("%w: no current was recorded: R, Ke, Kt and J cannot be told apart, only gain, time constants and friction in volts", ErrData)
	}
	var a, rhs []float64
	for i := range tr.Time {
		if tr.At(i) == trace.Used {
			a = append(a, tr.Current[i], tr.Speed[i], 1)
			rhs = append(rhs, tr.Voltage[i])
		}
	}
	n := len(rhs)
	if n < 10 {
		return Electrical{}, fmt.Errorf("%w: %d usable samples, at least 10 are needed", ErrData, n)
	}
	pt, b := NewPoint(3), make([]float64, 3)
	Compress(a, 3, rhs, pt)
	if pt.dependent() || !backSubstitute(pt.R, 3, 3, pt.Qtr, b) {
		return Electrical{}, fmt.Errorf("%w: current and speed do not vary apart: add steps, or a locked-rotor test", ErrData)
	}
	rest := pt.Cost
	for _, q := range pt.Qtr {
		rest -= q * q
	}
	cov, s2 := pt.Covariance(), math.Max(rest, 0)/float64(n-3)
	return Electrical{
		Resistance: b[0], ResistanceSD: math.Sqrt(cov[0] * s2),
		Ke: b[1], KeSD: math.Sqrt(cov[4] * s2), Drop: b[2], N: n,
	}, nil
}
