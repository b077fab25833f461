package identify

import (
	"math"

	"gainwright/tune/trace"
)

// prediction pairs measured and simulated speeds at used samples of a trace.
type prediction struct {
	index  []int // samples of the trace
	y, sim []float64
}

// from returns the part at samples index ≥ first.
func (p prediction) from(first int) prediction {
	k := 0
	for k < len(p.index) && p.index[k] < first {
		k++
	}
	return prediction{p.index[k:], p.y[k:], p.sim[k:]}
}

// nrmse returns ‖y − sim‖/‖y − mean y‖ and the RMSE; NaN without samples.
func (p prediction) nrmse() (nrmse, rmse float64) {
	n := float64(len(p.y))
	s := 0.0
	for i := range p.y {
		d := p.y[i] - p.sim[i]
		s += d * d
	}
	return math.Sqrt(s) / deviation(p.y), math.Sqrt(s / n)
}

// speeds simulates the model on a whole trace. Initial states are estimated from
// samples before split only, for runs of samples that begin before it; the gain
// and, unless ownOffset, the offset are the fitted ones.
func (e *estimate) speeds(tr *trace.Trace, steady bool, split int, ownOffset bool) prediction {
	off, linear := e.proj.offset, e.linear
	if ownOffset {
		off, linear = offsetOwn, e.linear[:1]
	} else if off == offsetOwn {
		linear = e.linear[:1]
	}
	drift := e.proj.drift && !ownOffset // only kept with the fitted offset
	if split <= 0 || split > tr.Len() {
		split = tr.Len()
	}
	kern, _ := newKernel(e.kind)
	before := newProjection(kern, stretches(tr.Slice(0, split), 0, windowMean, steady), off, drift)
	whole := newProjection(kern, stretches(tr, 0, windowMean, steady), off, drift)
	type key struct{ first, from int }
	known := map[key][]float64{}
	solve := func(p *projection, keep func(*stretch, span, []float64)) {
		if len(p.grams) == 0 {
			return
		}
		p.inner(e.params, false)
		at := 0
		for _, s := range p.pieces {
			for _, sp := range s.spans {
				p.grams[at].solveLocals(linear)
				keep(s, sp, p.grams[at].local)
				at++
			}
		}
	}
	solve(before, func(s *stretch, sp span, local []float64) {
		known[key{s.first, sp.from}] = append([]float64(nil), local...)
	})
	solve(whole, func(s *stretch, sp span, local []float64) {
		if k, ok := known[key{s.first, sp.from}]; ok {
			copy(local, k)
		}
	})
	var out prediction
	whole.each(e.params, false, func(gm *spanGram, s *stretch, sp span, cols [][]float64) {
		sim := combine(gm.lay, cols, linear, gm.local)
		skip := 0
		for i := sp.from; i < sp.to; i++ {
			if skip < len(sp.skip) && sp.skip[skip] == i {
				skip++
				continue
			}
			out.index = append(out.index, s.first+i)
			out.y = append(out.y, s.y[i])
			out.sim = append(out.sim, sim[i-sp.from])
		}
	})
	return out
}
