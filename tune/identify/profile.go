package identify

import "math"

// profileDeadTime returns the 95 % interval of the dead time from the profile of
// the sum of squares: where the best fit with the dead time held there is worse
// by more than chance allows. The response has a kink at the dead time, and the
// interval from the curvature at the best fit alone is too narrow when few
// samples lie near it. widening is the ratio of the corrected to the white
// variance of the dead time.
//
// Reference: D. M. Bates, D. G. Watts, Nonlinear Regression Analysis and Its
// Applications, Wiley 1988, chapter 6 (from memory).
func (e *estimate) profileDeadTime(set Settings, widening float64) (ci [2]float64, ok bool) {
	k := len(e.params) - 1
	best := e.params[k]
	variance := e.cost / float64(max(e.dof, 1)) * widening
	if !(variance > 0) {
		return ci, false
	}
	goal := quantile95(e.effectiveDOF())
	base, ok := e.costAt(best, set)
	if !ok {
		return ci, false
	}
	sd := math.Sqrt(e.cov[len(e.cov)-1])
	if !(sd > 0) {
		h, _ := e.proj.extent()
		sd = h / 2
	}
	// distance is the signed root of the worsening in standard deviations, nearly
	// a straight line in the dead time.
	distance := func(dead float64) (float64, bool) {
		c, ok := e.costAt(dead, set)
		return math.Sqrt(math.Max(c-base, 0) / variance), ok
	}
	for side, sign := range []float64{-1, 1} {
		edge, found := profileEdge(distance, best, sign, sd*goal, goal, set.Lower[k], set.Upper[k])
		if !found {
			return ci, false
		}
		ci[side] = edge
	}
	return ci, true
}

// profileEdge finds where distance reaches goal on one side of best: first a
// bracket, then false position.
func profileEdge(distance func(float64) (float64, bool), best, sign, reach, goal, low, high float64) (float64, bool) {
	clamp := func(v float64) float64 { return math.Min(math.Max(v, low), high) }
	in, inD := best, 0.0
	out, outD := clamp(best+sign*reach), 0.0
	for n := 0; ; n++ {
		d, ok := distance(out)
		if !ok || n > 30 {
			return 0, false
		}
		outD = d
		if d >= goal {
			break
		}
		if out == low || out == high {
			return out, true
		}
		in, inD = out, d
		step := reach
		if d > 0.2*goal { // aim a little beyond where the line through the origin meets the goal
			step = math.Min(1.1*math.Abs(out-best)*(goal/d-1)+0.05*reach, 2*reach)
		}
		out = clamp(out + sign*step)
	}
	for n := 0; n < 12 && outD-goal > 0.01*goal && math.Abs(out-in) > 0.01*math.Abs(out-best); n++ {
		mid := in + (out-in)*(goal-inD)/(outD-inD)
		d, ok := distance(mid)
		if !ok {
			return 0, false
		}
		if d < goal {
			if goal-d <= 0.01*goal {
				return mid, true
			}
			in, inD = mid, d
		} else {
			out, outD = mid, d
		}
	}
	return in + (out-in)*(goal-inD)/(outD-inD), true
}

// costAt is the least sum of squares with the dead time held.
func (e *estimate) costAt(dead float64, set Settings) (float64, bool) {
	k := len(e.params) - 1
	held := set
	held.Lower = append([]float64(nil), set.Lower...)
	held.Upper = append([]float64(nil), set.Upper...)
	held.Lower[k], held.Upper[k] = dead, dead
	held.StepMax, held.CostTol, held.ParamTol = 15, 1e-6, 1e-5
	x := append([]float64(nil), e.params...)
	x[k] = dead
	sol, err := Solve(e.proj, x, held)
	if err != nil {
		return 0, false
	}
	return sol.Point.Cost, true
}
