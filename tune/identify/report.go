package identify

import (
	"math"

	"gainwright/tune/model"
)

// report turns an estimate into the numbers that people read: gain, time
// constants (or natural frequency and damping), dead time, offset, with their
// covariance by the delta method.
func (e *estimate) report() Fit {
	rows, params := e.readable()
	n, dim := len(params), e.dim()
	cov := make([][]float64, n)
	for i := range cov {
		cov[i] = make([]float64, n)
		for j := range cov[i] {
			for a := 0; a < dim; a++ {
				for b := 0; b < dim; b++ {
					cov[i][j] += rows[i][a] * e.cov[a*dim+b] * rows[j][b]
				}
			}
		}
	}
	for i := range params {
		params[i].SD = math.Sqrt(math.Max(cov[i][i], 0))
	}
	f := Fit{
		Params: params, Cov: cov, Inflation: e.inflated, Used: e.proj.samples, DeadTimeBound: e.fixed,
		HoldoutNRMSE: math.NaN(), HoldoutRMSE: math.NaN(), Offset: math.NaN(), InputP: e.inputP, Noise: e.noise, Findings: e.findings,
	}
	f.Model = e.linearModel()
	f.Model.CI95 = e.intervals(params)
	at := 1
	if e.proj.offset == offsetShared {
		f.Offset = e.linear[at]
		at++
	} else if e.proj.offset == offsetNone {
		f.Offset = 0
	}
	if e.proj.drift {
		f.Drift = e.linear[at]
	}
	e.quality(&f)
	if e.measured != nil {
		e.speedQuality(&f)
	}
	return f
}

// readable returns the parameters to report and their derivatives by
// [linear…, params…].
func (e *estimate) readable() (rows [][]float64, params []Param) {
	g, dim := len(e.linear), e.dim()
	add := func(name, unit string, value float64, by map[int]float64) {
		row := make([]float64, dim)
		for i, v := range by {
			row[i] = v
		}
		rows = append(rows, row)
		params = append(params, Param{Name: name, Unit: unit, Value: value})
	}
	shapes := e.proj.kern.shapes()
	dead := e.params[shapes]
	switch shapes {
	case 0:
		add("slope", "rad/s²/V", e.linear[0], map[int]float64{0: 1})
	case 1:
		tau := math.Exp(e.params[0])
		add("gain", "rad/s/V", e.linear[0], map[int]float64{0: 1})
		add("tau", "s", tau, map[int]float64{g: tau})
	case 2:
		a1, a2 := math.Exp(e.params[0]), math.Exp(e.params[1])
		add("gain", "rad/s/V", e.linear[0], map[int]float64{0: 1})
		if disc := a1*a1 - 4*a2; disc > 0 {
			// T = (a1 ± w)/2 with w = √(a1² − 4·a2): dT/d ln a1 = ±a1·T/w and
			// dT/d ln a2 = ∓a2/w.
			w := math.Sqrt(disc)
			slow := (a1 + w) / 2
			fast := a2 / slow
			add("tau", "s", slow, map[int]float64{g: a1 * slow / w, g + 1: -a2 / w})
			add("tau2", "s", fast, map[int]float64{g: -a1 * fast / w, g + 1: a2 / w})
		} else {
			wn := 1 / math.Sqrt(a2)
			zeta := a1 * wn / 2
			add("natural_frequency", "rad/s", wn, map[int]float64{g + 1: -wn / 2})
			add("damping", "1", zeta, map[int]float64{g: zeta, g + 1: -zeta / 2})
		}
	}
	add("dead_time", "s", dead, map[int]float64{g + shapes: 1})
	at := 1
	unit := "rad/s"
	if shapes == 0 {
		unit = "rad/s²"
	}
	if e.proj.offset == offsetShared {
		add("offset", unit, e.linear[at], map[int]float64{at: 1})
		at++
	}
	if e.proj.drift {
		add("drift", unit+"/s", e.linear[at], map[int]float64{at: 1})
	}
	return rows, params
}

func (e *estimate) linearModel() model.Linear {
	shapes := e.proj.kern.shapes()
	m := model.Linear{Kind: e.kind, Num: []float64{e.linear[0]}, DeadTime: e.params[shapes], InputUnit: model.InputVolts}
	switch shapes {
	case 0:
		m.Den = []float64{1, 0}
	case 1:
		m.Den = []float64{math.Exp(e.params[0]), 1}
	case 2:
		m.Den = []float64{math.Exp(e.params[1]), math.Exp(e.params[0]), 1}
	}
	lo, hi := math.Inf(1), 0.0
	for _, s := range e.proj.pieces {
		if s.obs == position {
			continue
		}
		for _, sp := range s.spans {
			for _, v := range s.y[sp.from:sp.to] {
				lo, hi = math.Min(lo, v), math.Max(hi, v)
			}
		}
	}
	if finite(lo) {
		m.SpeedMin, m.SpeedMax = lo, hi
	}
	return m
}

// intervals returns the 95 % intervals. Times are positive, so theirs are taken
// on the logarithm; a dead time may reach down to zero.
func (e *estimate) intervals(params []Param) map[string][2]float64 {
	t := quantile95(e.effectiveDOF())
	out := map[string][2]float64{}
	for _, p := range params {
		half := t * p.SD
		ci := [2]float64{p.Value - half, p.Value + half}
		switch p.Name {
		case "tau", "tau2", "natural_frequency", "damping":
			if p.Value > 0 {
				f := math.Exp(math.Min(half/p.Value, 50))
				ci = [2]float64{p.Value / f, p.Value * f}
			}
		case "dead_time":
			ci[0] = math.Max(ci[0], 0)
			if e.dead != nil {
				ci = *e.dead
			}
		}
		if finite(ci[0]) && finite(ci[1]) {
			out[p.Name] = ci
		}
	}
	return out
}

// quality fills the measures of fit over the used samples.
func (e *estimate) quality(f *Fit) {
	n := len(e.residual)
	var y []float64
	for _, s := range e.proj.pieces {
		for _, sp := range s.spans {
			y = append(y, pick(s.y[sp.from:sp.to], sp)...)
		}
	}
	f.RMSE = math.Sqrt(e.cost / float64(n))
	spread, bias := deviation(y), deviation(e.residual)
	f.NRMSE = math.Sqrt(e.cost) / spread
	f.VAF = 1 - bias*bias/(spread*spread)
	k := float64(n - e.dof + 1) // parameters, the variance among them
	f.AICc = float64(n)*math.Log(e.cost/float64(n)) + 2*k + 2*k*(k+1)/math.Max(float64(n)-k-1, 1)
	f.WhitenessP = ljungBox(e.residual, 0)
}

// deviation returns ‖v − mean v‖.
func deviation(v []float64) float64 {
	mean := 0.0
	for _, x := range v {
		mean += x
	}
	mean /= float64(max(len(v), 1))
	s := 0.0
	for _, x := range v {
		s += (x - mean) * (x - mean)
	}
	return math.Sqrt(s)
}
