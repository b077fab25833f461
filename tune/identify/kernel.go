package identify

import "math"

// A kernel is the unit-gain response of one model structure to a drive, together
// with its exact derivatives. shape holds the structure's own nonlinear
// parameters; the dead time is not among them, since it only moves the point at
// which the response is looked at.
type kernel interface {
	// shapes is the number of nonlinear parameters without the dead time.
	shapes() int
	// frees is the number of columns that a free initial state adds.
	frees() int
	// prepare simulates the drive with the given shape, to be queried afterwards.
	prepare(d *drive, shape []float64, derivatives bool)
	// response fills value, its derivative by each shape parameter, and its time
	// derivative (nil where not wanted), at the queries; integral asks for the
	// integral of the response over time instead.
	response(d *drive, q *queries, integral bool, value []float64, byShape [][]float64, byTime []float64)
	// free fills the decay of the initial state k at times tau ≥ 0, and its
	// derivatives; integral asks for the integral over time.
	free(k int, tau []float64, integral bool, value []float64, byShape [][]float64)
}

// firstOrder is 1/(T·s + 1) with the one shape parameter ln T.
type firstOrder struct {
	tau    float64
	before float64
	x, s   []float64 // state and its derivative by ln T at the knots
	of     *drive
	done   bool // the knots are those of the last preparation
}

func (k *firstOrder) shapes() int { return 1 }
func (k *firstOrder) frees() int  { return 1 }

func (k *firstOrder) prepare(d *drive, shape []float64, _ bool) {
	tau := math.Exp(shape[0])
	k.done = k.done && k.of == d && k.tau == tau // another dead time needs no new simulation
	k.tau, k.of, k.before = tau, d, d.before
}

// simulate fills state and derivative at the knots, once for each preparation.
func (k *firstOrder) simulate(d *drive) {
	if k.done {
		return
	}
	k.done = true
	n := len(d.t)
	if len(k.x) != n {
		k.x, k.s = make([]float64, n), make([]float64, n)
	}
	x, s := d.before, 0.0
	xs, ss, u := k.x, k.s[:n], d.u[:n]
	rate := d.h / k.tau
	e := math.Exp(-rate)
	near := decay{rate, e}
	inv := 1 / k.tau
	for j := range xs {
		xs[j], ss[j] = x, s
		if !d.even && j+1 < len(d.t) {
			rate = (d.t[j+1] - d.t[j]) * inv
			e = near.at(rate)
		}
		dev := x - u[j]
		s = (s + dev*rate) * e
		x = u[j] + dev*e
	}
}

func (k *firstOrder) response(d *drive, q *queries, integral bool, value []float64, byShape [][]float64, byTime []float64) {
	var byTau []float64
	if byShape != nil {
		byTau = byShape[0]
	}
	rate := q.off / k.tau
	e := math.Exp(-rate)
	if d.even && !integral && byTau == nil && byTime == nil {
		k.plain(d, q.shift, e, value)
		return
	}
	if d.even && !integral && byTau != nil && byTime != nil {
		k.fast(d, q.shift, e, rate, value, byTau, byTime)
		return
	}
	k.simulate(d)
	near := decay{rate, e}
	inv := 1 / k.tau
	j, a := 0, q.off
	for i := range value {
		if d.even {
			j = i - q.shift
		} else {
			j, a = int(q.index[i]), q.offset[i]
		}
		z, zt, dz, iu := k.before, 0.0, 0.0, 0.0
		if j >= 0 {
			if !d.even {
				rate = a * inv
				e = near.at(rate)
			}
			dev := (k.x[j] - d.u[j]) * e
			z = d.u[j] + dev
			dz = k.s[j]*e + dev*rate
			zt = -dev * inv
			iu = d.iu[j] + d.u[j]*a
		} else {
			if d.even {
				a = float64(j)*d.h + q.off
				iu, a = d.before*a, q.off
			} else {
				iu = d.before * a
			}
		}
		if integral {
			value[i] = iu - k.tau*z
			dz = -k.tau * (z + dz)
			zt = z
		} else {
			value[i] = z
		}
		if byTau != nil {
			byTau[i] = dz
		}
		if byTime != nil {
			byTime[i] = zt
		}
	}
}

// decay computes e^−rate for rates that lie close together, from the last one
// that was computed in full.
type decay struct{ rate, value float64 }

// at returns e^−rate, by five terms of the series (error under 1e-12) where rate
// is near enough.
func (k *decay) at(rate float64) float64 {
	d := k.rate - rate
	if d > 0.01 || d < -0.01 {
		k.rate, k.value = rate, math.Exp(-rate)
		return k.value
	}
	return k.value * (1 + d*(1+d*(0.5+d*(1.0/6+d*(1.0/24)))))
}

// fast is response on even sampling, values with derivatives: simulation and
// queries in one pass, without an exponential or a branch inside the loop.
func (k *firstOrder) fast(d *drive, shift int, ask, askRate float64, value, byTau, byTime []float64) {
	n := len(value)
	lead := min(max(shift, 0), n)
	for i := 0; i < lead; i++ {
		value[i], byTau[i], byTime[i] = k.before, 0, 0
	}
	rate := d.h / k.tau
	e := math.Exp(-rate)
	x, s := k.before, 0.0
	for j := 0; j < lead-shift; j++ { // a negative shift skips knots
		dev := x - d.u[j]
		x, s = d.u[j]+dev*e, (s+dev*rate)*e
	}
	u := d.u[lead-shift:][:n-lead]
	value, byTau, byTime = value[lead:][:len(u)], byTau[lead:][:len(u)], byTime[lead:][:len(u)]
	inv := -1 / k.tau
	for i, in := range u {
		dev := x - in
		at := dev * ask
		value[i] = in + at
		byTau[i] = s*ask + at*askRate
		byTime[i] = at * inv
		s = (s + dev*rate) * e
		x = in + dev*e
	}
}

// plain is fast without derivatives.
func (k *firstOrder) plain(d *drive, shift int, ask float64, value []float64) {
	n := len(value)
	lead := min(max(shift, 0), n)
	for i := 0; i < lead; i++ {
		value[i] = k.before
	}
	e := math.Exp(-d.h / k.tau)
	x := k.before
	for j := 0; j < lead-shift; j++ {
		x = d.u[j] + (x-d.u[j])*e
	}
	u := d.u[lead-shift:][:n-lead]
	value = value[lead:][:len(u)]
	for i, in := range u {
		dev := x - in
		value[i] = in + dev*ask
		x = in + dev*e
	}
}

func (k *firstOrder) free(_ int, tau []float64, integral bool, value []float64, byShape [][]float64) {
	for i, at := range tau {
		rate := at / k.tau
		g := math.Exp(-rate)
		dg := g * rate
		if integral {
			g, dg = -k.tau*g, -g*(k.tau+at)
		}
		value[i] = g
		if byShape != nil {
			byShape[0][i] = dg
		}
	}
}

// integrating is 1/s without shape parameters. The free initial state is a
// constant.
type integrating struct{}

func (integrating) shapes() int { return 0 }
func (integrating) frees() int  { return 1 }

func (integrating) prepare(*drive, []float64, bool) {}

func (integrating) response(d *drive, q *queries, integral bool, value []float64, _ [][]float64, byTime []float64) {
	for i := range value {
		j, a := 0, q.off
		if d.even {
			if j = i - q.shift; j < 0 {
				a += float64(j) * d.h
			}
		} else {
			j, a = int(q.index[i]), q.offset[i]
		}
		u, iu, iiu := d.before, 0.0, 0.0
		if j >= 0 {
			u, iu, iiu = d.u[j], d.iu[j], d.iiu[j]
		}
		z := iu + u*a
		if integral {
			value[i] = iiu + a*(iu+0.5*u*a)
			u = z
		} else {
			value[i] = z
		}
		if byTime != nil {
			byTime[i] = u
		}
	}
}

func (integrating) free(_ int, tau []float64, integral bool, value []float64, _ [][]float64) {
	for i, at := range tau {
		value[i] = 1
		if integral {
			value[i] = at
		}
	}
}
