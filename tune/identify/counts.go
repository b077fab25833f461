package identify

import (
	"math"

	"gainwright/tune/trace"
)

// countedLevel is the correlation of neighbouring speed residuals below which the
// noise counts as the rounding of an encoder: differences of rounded positions
// have −0.5, white noise has 0.
const countedLevel = -0.2

// tryCounts fits the counted position instead of the speeds made of its
// differences, where the counts are known and their rounding is most of the
// noise: the rounding is white in the position and far from white in the speed.
// It returns nil where that does not apply.
func (r *run) tryCounts(pb problem, speed *estimate) *estimate {
	if !r.decided {
		r.decided = true
		rho := autocorrelation(speed.residual, 1)
		r.counts = rho[1] < countedLevel
	}
	if !r.counts {
		return nil
	}
	counted := make([]*trace.Trace, len(pb.traces))
	for i, tr := range pb.traces {
		c := withCounts(tr)
		if c == nil {
			return nil
		}
		counted[i] = c
	}
	pb.traces, pb.counts, pb.steady = counted, true, speed.steady()
	e, err := pb.follow(speed.params)
	if err != nil || e.dof < 5 {
		return nil
	}
	e.measured = r.fit
	return e
}

// withCounts returns the trace if it holds counts, or a copy with counts summed up
// from speeds that are differences of counts over windows that join, or nil.
func withCounts(tr *trace.Trace) *trace.Trace {
	if tr.RadPerCount <= 0 {
		return nil
	}
	if tr.Counts != nil {
		return tr
	}
	if tr.Window <= 0 {
		return nil
	}
	counts := make([]float64, tr.Len())
	for i := 1; i < tr.Len(); i++ {
		step := tr.Speed[i] * tr.Window / tr.RadPerCount
		joins := math.Abs(tr.Time[i]-tr.Time[i-1]-tr.Window) < 0.01*tr.Window || tr.At(i) == trace.Gap
		if !joins || math.Abs(step-math.Round(step)) > 0.05 {
			return nil
		}
		counts[i] = counts[i-1] + math.Round(step)
	}
	out := *tr
	out.Counts = counts
	return &out
}

// speedQuality fills the measures of fit of a fit to counts from the speeds, so
// that they compare with those of other fits.
func (e *estimate) speedQuality(f *Fit) {
	var y, left []float64
	for _, tr := range e.measured {
		p := e.speeds(tr, e.steady(), 0, false)
		for i := range p.y {
			y = append(y, p.y[i])
			left = append(left, p.y[i]-p.sim[i])
		}
	}
	cost := 0.0
	for _, v := range left {
		cost += v * v
	}
	f.RMSE = math.Sqrt(cost / float64(len(left)))
	spread, bias := deviation(y), deviation(left)
	f.NRMSE = math.Sqrt(cost) / spread
	f.VAF = 1 - bias*bias/(spread*spread)
	f.FittedCounts = true
	f.Model.SpeedMin, f.Model.SpeedMax = math.Inf(1), math.Inf(-1)
	for _, v := range y {
		f.Model.SpeedMin, f.Model.SpeedMax = math.Min(f.Model.SpeedMin, v), math.Max(f.Model.SpeedMax, v)
	}
}

// addRounding keeps the covariance of a fit to counts at what independent
// rounding, 1/12 of a squared count, makes of it: residuals of a record that is
// in step with the sampling are smaller than the errors that they hide.
func (e *estimate) addRounding() {
	if e.measured == nil {
		return
	}
	quantum := e.measured[0].RadPerCount
	least, seen := quantum*quantum/12, e.cost/float64(max(e.dof, 1))
	if !(seen > 0) || seen >= least {
		return
	}
	for i := range e.cov {
		e.cov[i] *= least / seen
	}
	e.inflated = math.Max(e.inflated, math.Sqrt(least/seen))
}
