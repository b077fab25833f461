package design

import (
	"fmt"
	"math"

	"gainwright/tune/model"
)

// What a PID has to bring before it is proposed instead of a PI. *Our choice*:
// a quarter more integral gain, at no more than three times the noise unless a
// bound on the noise was given, which then counts alone.
const (
	earnGain  = 1.25
	earnNoise = 3
)

// largestKi is our own rule with its optional bounds.
func (o Options) largestKi(m model.Linear, f facts) (Gains, []string, error) {
	notes := []string{fmt.Sprintf("largest integral gain with Ms ≤ %.3g on the loop as it runs", o.MsMax)}
	pi, err := o.bounded(m, 0)
	if err != nil {
		return Gains{}, notes, err
	}
	g := pi
	if o.Law == LawPID {
		var note string
		if g, note, err = o.pidIfEarned(m, f, pi); err != nil {
			return Gains{}, notes, err
		}
		notes = append(notes, note)
	}
	if o.UMax > 0 {
		var more []string
		if g, more, err = o.withinDrive(m, f, g); err != nil {
			return Gains{}, notes, err
		}
		notes = append(notes, more...)
	}
	return g, notes, nil
}

// bounded returns the gains of largest integral gain for one derivative time,
// within the noise bound if there is one. Noise grows with kp, so the bound is
// met by searching below a lower kp.
func (o Options) bounded(m model.Linear, td float64) (Gains, error) {
	return o.below(m, td, math.Inf(1), func(g Gains) (bool, error) { return o.quiet(m, g) })
}

// quiet tells whether g keeps the noise bound, if there is one.
func (o Options) quiet(m model.Linear, g Gains) (bool, error) {
	if o.Noise == 0 {
		return true, nil
	}
	noise, err := NoiseGain(m, g)
	return noise <= o.Noise, err
}

// below returns the best gains with kp ≤ kpMax that pass the test, found by
// halving the range of kp.
func (o Options) below(m model.Linear, td, kpMax float64, pass func(Gains) (bool, error)) (Gains, error) {
	s, err := newKiSearch(m, o.shape(), o.MsMax, td)
	if err != nil {
		return Gains{}, err
	}
	try := func(limit float64) (Gains, bool, error) {
		g, err := s.finish(s.best(limit))
		if err != nil {
			return g, false, err
		}
		ok, err := pass(g)
		return g, ok, err
	}
	hi := math.Min(kpMax, s.kpMax)
	g, ok, err := try(hi)
	if err != nil || ok {
		return g, err
	}
	found := false
	lo, hi := 0.0, math.Min(hi, g.Kp)
	for range 10 {
		mid := (lo + hi) / 2
		c, ok, err := try(mid)
		switch {
		case err != nil:
			return Gains{}, err
		case ok:
			g, found, lo = c, true, mid
		default:
			hi = mid
		}
	}
	if !found {
		return Gains{}, refuse("no gains keep the bounds on noise and drive together with Ms: relax one of them")
	}
	return g, nil
}

// pidIfEarned looks for the derivative time with the largest integral gain and
// returns it if it earns its noise, else the PI.
func (o Options) pidIfEarned(m model.Linear, f facts, pi Gains) (Gains, string, error) {
	scale := f.dead
	if len(f.lags) > 1 {
		scale += f.lags[1]
	} else if len(f.lags) == 1 && f.velocity != 0 {
		scale += f.lags[0]
	}
	if scale == 0 {
		return pi, "no derivative: nothing in the model gives it a time", nil
	}
	best := pi
	for _, part := range []float64{0.15, 0.25, 0.35, 0.5, 0.7, 1, 1.4} {
		g, err := o.bounded(m, part*scale)
		if err == nil && g.Ki > best.Ki {
			best = g
		}
	}
	if best.Kd == 0 {
		return pi, "no derivative: it would not allow more integral gain", nil
	}
	noisePI, err := NoiseGain(m, pi)
	if err != nil {
		return Gains{}, "", err
	}
	noise, err := NoiseGain(m, best)
	if err != nil {
		return Gains{}, "", err
	}
	gain, price := best.Ki/pi.Ki, noise/noisePI
	if gain < earnGain || o.Noise == 0 && price > earnNoise {
		return pi, fmt.Sprintf("no derivative: it would bring %.2g times the integral gain for %.2g times the noise", gain, price), nil
	}
	return best, fmt.Sprintf("the derivative brings %.2g times the integral gain for %.2g times the noise", gain, price), nil
}

// withinDrive lowers the setpoint weight, and after that kp, until a setpoint
// step keeps within UMax.
func (o Options) withinDrive(m model.Linear, f facts, g Gains) (Gains, []string, error) {
	step := o.Step
	steady := 0.0
	if f.gain > 0 {
		if step == 0 {
			step = 0.2 * o.UMax * f.gain
		}
		steady = step / f.gain
	}
	if step == 0 {
		return g, nil, refuse("the model integrates, so the size of the setpoint step has to be given with the bound on the drive")
	}
	if steady > o.UMax {
		return g, nil, refuse("the step of %.3g rad/s alone needs %.3g V, over the bound of %.3g V", step, steady, o.UMax)
	}
	fits := func(g Gains) (bool, error) {
		peak, err := PeakDrive(m, g, step)
		return peak <= o.UMax*(1+1e-9), err
	}
	if ok, err := fits(g); err != nil || ok {
		return g, nil, err
	}
	lowest := g
	lowest.SetpointWeight = 0
	if ok, err := fits(lowest); err != nil {
		return g, nil, err
	} else if !ok {
		td := 0.0
		if g.Kd != 0 {
			td = g.Kd / g.Kp
		}
		reduced, err := o.below(m, td, g.Kp, func(c Gains) (bool, error) {
			if ok, err := o.quiet(m, c); err != nil || !ok {
				return false, err
			}
			c.SetpointWeight = 0
			return fits(c)
		})
		reduced.SetpointWeight = 0
		return reduced, []string{fmt.Sprintf("setpoint weight 0 and lower gains, so that a step of %.3g rad/s stays within %.3g V", step, o.UMax)}, err
	}
	lo, hi := 0.0, g.SetpointWeight
	for range 20 {
		g.SetpointWeight = (lo + hi) / 2
		ok, err := fits(g)
		if err != nil {
			return g, nil, err
		}
		if ok {
			lo = g.SetpointWeight
		} else {
			hi = g.SetpointWeight
		}
	}
	g.SetpointWeight = math.Floor(lo*1000) / 1000
	return g, []string{fmt.Sprintf("setpoint weight %.3g, so that a step of %.3g rad/s stays within %.3g V", g.SetpointWeight, step, o.UMax)}, nil
}
