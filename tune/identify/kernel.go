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
	x, s   []float64 // state and its derivative by ln T at the knots
	before float64
}

func (k *firstOrder) shapes() int { return 1 }
func (k *firstOrder) frees() int  { return 1 }

func (k *firstOrder) prepare(d *drive, shape []float64, _ bool) {
	n := len(d.t)
	if len(k.x) != n {
		k.x, k.s = make([]float64, n), make([]float64, n)
	}
	k.tau = math.Exp(shape[0])
	k.before = d.before
	x, s := d.before, 0.0
	xs, ss, u := k.x, k.s[:n], d.u[:n]
	rate := d.h / k.tau
	e := math.Exp(-rate)
	de := e * rate
	for j := range xs {
		xs[j], ss[j] = x, s
		if !d.even && j+1 < n {
			rate = (d.t[j+1] - d.t[j]) / k.tau
			e = math.Exp(-rate)
			de = e * rate
		}
		dev := x - u[j]
		s = s*e + dev*de
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
	if d.even && !integral && byTau != nil {
		k.fast(d, q.shift, e, rate, value, byTau, byTime)
		return
	}
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
				rate = a / k.tau
				e = math.Exp(-rate)
			}
			dev := (k.x[j] - d.u[j]) * e
			z = d.u[j] + dev
			dz = k.s[j]*e + dev*rate
			zt = -dev / k.tau
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

// fast is response on even sampling, values with derivatives: no exponential
// and no branch inside the loop.
func (k *firstOrder) fast(d *drive, shift int, e, rate float64, value, byTau, byTime []float64) {
	lead := min(max(shift, 0), len(value))
	for i := 0; i < lead; i++ {
		value[i], byTau[i], byTime[i] = k.before, 0, 0
	}
	n := len(value) - lead
	x, s, u := k.x[lead-shift:][:n], k.s[lead-shift:][:n], d.u[lead-shift:][:n]
	v, bt, bd := value[lead:][:n], byTau[lead:][:n], byTime[lead:][:n]
	inv := -1 / k.tau
	for i := range v {
		dev := (x[i] - u[i]) * e
		v[i] = u[i] + dev
		bt[i] = s[i]*e + dev*rate
		bd[i] = dev * inv
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
