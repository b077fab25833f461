package identify

import (
	"fmt"
	"math"
)

// Relay is what closes the loop: High while the speed rises, until it has come to
// Upper, then Low until it has come to Lower; both switch Delay late.
type Relay struct {
	High, Low    float64 // V
	Upper, Lower float64 // rad/s
	Delay        float64 // s, of the relay itself
}

// Plant is a gain with one or two real poles and a dead time: speed is
// Gain·(volts − Offset) when settled. Tau2 is 0 for one pole.
type Plant struct {
	Gain, Tau, Tau2, Dead float64
	Offset                float64 // V, of friction
}

// Cycle is a limit cycle: how long the relay is high and low, and what the speed
// does.
type Cycle struct {
	Up, Down       float64 // s
	Max, Min, Mean float64 // rad/s
}

// Period is one whole cycle in s.
func (c Cycle) Period() float64 { return c.Up + c.Down }

// periodic is the speed in the periodic state under a drive that is High for up
// seconds and Low for down, from the instant at which the high level reaches the
// lags: each lag's state follows in closed form from being equal a period apart.
//
//	x(0) = [H·(1−a)·b + L·(1−b)]/(1−ab)  with a = e^(−up/T), b = e^(−down/T)
//
// Two real poles are T1/(T1−T2) times one lag less T2/(T1−T2) times the other.
func (p Plant) periodic(r Relay, up, down, t float64) float64 {
	period := up + down
	t -= period * math.Floor(t/period)
	one := func(tau float64) float64 {
		h, l := r.High-p.Offset, r.Low-p.Offset
		a, b := math.Exp(-up/tau), math.Exp(-down/tau)
		x0 := (h*(1-a)*b + l*(1-b)) / (1 - a*b)
		if t < up {
			return h + (x0-h)*math.Exp(-t/tau)
		}
		x1 := h + (x0-h)*a
		return l + (x1-l)*math.Exp(-(t-up)/tau)
	}
	if p.Tau2 == 0 {
		return p.Gain * one(p.Tau)
	}
	if p.Tau == p.Tau2 {
		p.Tau2 *= 1 - 1e-6
	}
	return p.Gain * (p.Tau*one(p.Tau) - p.Tau2*one(p.Tau2)) / (p.Tau - p.Tau2)
}

// LimitCycle solves the exact equations of the limit cycle: the speed passes Upper
// one total delay ahead of the end of the high part, and Lower one ahead of the end
// of the low part. Nothing is neglected, as the describing function does with all
// but the fundamental. The error wraps ErrData where the relay does not cycle.
func (p Plant) LimitCycle(r Relay) (Cycle, error) {
	delay := p.Dead + r.Delay
	top, bottom := p.Gain*(r.High-p.Offset), p.Gain*(r.Low-p.Offset)
	if !(top > r.Upper) || !(bottom < r.Lower) || r.Upper < r.Lower {
		return Cycle{}, fmt.Errorf("%w: the relay does not cycle: levels settle at %.4g and %.4g rad/s, thresholds are %.4g and %.4g", ErrData, bottom, top, r.Lower, r.Upper)
	}
	if delay == 0 && p.Tau2 == 0 && r.Upper == r.Lower {
		return Cycle{}, fmt.Errorf("%w: one lag without dead time or hysteresis switches without end", ErrData)
	}
	f := func(x [2]float64) [2]float64 {
		up, down := math.Exp(x[0]), math.Exp(x[1])
		return [2]float64{p.periodic(r, up, down, up-delay) - r.Upper, p.periodic(r, up, down, -delay) - r.Lower}
	}
	scale := (top - bottom) * 1e-12
	for _, start := range []float64{1, 3, 0.4, 10, 0.1} {
		first := math.Log(start * (delay + p.Tau2 + 0.3*p.Tau*((r.Upper-r.Lower)/(top-bottom))))
		x, ok := newton2(f, [2]float64{first, first}, scale)
		if !ok {
			continue
		}
		c := Cycle{Up: math.Exp(x[0]), Down: math.Exp(x[1])}
		// A cycle whose delay is longer than a part of it has switches outstanding
		// that the equations do not know.
		if c.Up < delay*(1-1e-9) && c.Down < delay*(1-1e-9) {
			continue
		}
		p.extremes(r, &c)
		return c, nil
	}
	return Cycle{}, fmt.Errorf("%w: the equations of the limit cycle were not solved", ErrData)
}

// extremes fills in what the speed does over a cycle.
func (p Plant) extremes(r Relay, c *Cycle) {
	const n = 2000
	c.Max, c.Min = math.Inf(-1), math.Inf(1)
	for i := range n {
		y := p.periodic(r, c.Up, c.Down, c.Period()*float64(i)/n)
		c.Max, c.Min = math.Max(c.Max, y), math.Min(c.Min, y)
	}
	for _, t := range []float64{0, c.Up} {
		y := p.periodic(r, c.Up, c.Down, t)
		c.Max, c.Min = math.Max(c.Max, y), math.Min(c.Min, y)
	}
	c.Mean = p.Gain * ((r.High*c.Up+r.Low*c.Down)/c.Period() - p.Offset)
}

// newton2 solves two equations with a damped Newton method.
func newton2(f func([2]float64) [2]float64, x [2]float64, tol float64) ([2]float64, bool) {
	size := func(v [2]float64) float64 { return math.Hypot(v[0], v[1]) }
	v := f(x)
	for range 200 {
		if size(v) <= tol {
			return x, true
		}
		const d = 1e-6
		fx, fy := f([2]float64{x[0] + d, x[1]}), f([2]float64{x[0], x[1] + d})
		a, b, c, e := (fx[0]-v[0])/d, (fy[0]-v[0])/d, (fx[1]-v[1])/d, (fy[1]-v[1])/d
		det := a*e - b*c
		if det == 0 || math.IsNaN(det) {
			return x, false
		}
		s := [2]float64{-(e*v[0] - b*v[1]) / det, -(a*v[1] - c*v[0]) / det}
		step := math.Min(1, 1/math.Max(math.Abs(s[0]), math.Abs(s[1])))
		better := false
		for range 30 {
			n := [2]float64{x[0] + step*s[0], x[1] + step*s[1]}
			if w := f(n); size(w) < size(v) {
				x, v, better = n, w, true
				break
			}
			step /= 2
		}
		if !better {
			return x, size(v) <= 1e3*tol
		}
	}
	return x, false
}
