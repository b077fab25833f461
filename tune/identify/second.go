package identify

import "math"

// secondOrder is 1/(a2·s² + a1·s + 1) with the shape parameters ln a1 and ln a2:
// two real poles or a complex pair, smooth where they meet.
type secondOrder struct {
	a1, a2 float64
	before float64
	knots  []state2
	of     *drive
	done   bool // the knots are those of the last preparation
}

// state2 is the deviation-free state (value and slope) and its derivatives by
// the two shape parameters.
type state2 struct {
	x, v   float64
	xa, va float64 // by ln a1
	xb, vb float64 // by ln a2
}

// transition is the matrix exponential of the deviation from rest over a time h,
// f, and its derivatives by ln a1 (a) and ln a2 (b), each as 11, 12, 21, 22.
type transition struct{ f, a, b [4]float64 }

func (k *secondOrder) shapes() int { return 2 }
func (k *secondOrder) frees() int  { return 2 }

// over computes the transition over h ≥ 0. With σ = a1/2a2 and D = σ² − 1/a2 it is
// e^(−σh)·(cosh(√D·h)·I + sinh(√D·h)/√D·(A + σI)).
func (k *secondOrder) over(h float64) transition {
	sigma, inv := k.a1/(2*k.a2), 1/k.a2
	disc := sigma*sigma - inv
	var ec, es, g float64 // e^(−σh) times cosh, sinh/√D, and d(sinh/√D)/dD
	z := disc * h * h
	switch {
	case math.Abs(z) < 1e-3:
		e := math.Exp(-sigma * h)
		ec = e * (1 + z/2*(1+z/12*(1+z/30)))
		es = e * h * (1 + z/6*(1+z/20*(1+z/42)))
		g = e * h * h * h / 6 * (1 + z/10*(1+z/28*(1+z/54)))
	case disc > 0:
		w := math.Sqrt(disc)
		slow, fast := math.Exp(-h*inv/(sigma+w)), math.Exp(-h*(sigma+w))
		ec, es = (slow+fast)/2, (slow-fast)/(2*w)
		g = (h*ec - es) / (2 * disc)
	default:
		w := math.Sqrt(-disc)
		e := math.Exp(-sigma * h)
		sin, cos := math.Sincos(w * h)
		ec, es = e*cos, e*sin/w
		g = (h*ec - es) / (2 * disc)
	}
	var tr transition
	tr.f = [4]float64{ec + sigma*es, es, -es * inv, ec - sigma*es}
	ds, dd := sigma, 2*sigma*sigma // by ln a1
	dec, des := -h*ec*ds+h*es/2*dd, -h*es*ds+g*dd
	tr.a = [4]float64{dec + ds*es + sigma*des, des, -des * inv, dec - ds*es - sigma*des}
	ds, dd = -sigma, -2*sigma*sigma+inv // by ln a2
	dec, des = -h*ec*ds+h*es/2*dd, -h*es*ds+g*dd
	tr.b = [4]float64{dec + ds*es + sigma*des, des, (es - des) * inv, dec - ds*es - sigma*des}
	return tr
}

// advance moves s under the constant input u.
func (tr *transition) advance(s *state2, u float64) state2 {
	x, v := s.x-u, s.v
	return state2{
		x:  u + tr.f[0]*x + tr.f[1]*v,
		v:  tr.f[2]*x + tr.f[3]*v,
		xa: tr.f[0]*s.xa + tr.f[1]*s.va + tr.a[0]*x + tr.a[1]*v,
		va: tr.f[2]*s.xa + tr.f[3]*s.va + tr.a[2]*x + tr.a[3]*v,
		xb: tr.f[0]*s.xb + tr.f[1]*s.vb + tr.b[0]*x + tr.b[1]*v,
		vb: tr.f[2]*s.xb + tr.f[3]*s.vb + tr.b[2]*x + tr.b[3]*v,
	}
}

func (k *secondOrder) prepare(d *drive, shape []float64, _ bool) {
	a1, a2 := math.Exp(shape[0]), math.Exp(shape[1])
	k.done = k.done && k.of == d && k.a1 == a1 && k.a2 == a2 // another dead time needs no new simulation
	k.a1, k.a2, k.of, k.before = a1, a2, d, d.before
}

// simulate fills the states at the knots, once for each preparation.
func (k *secondOrder) simulate(d *drive) {
	if k.done {
		return
	}
	k.done = true
	if len(k.knots) != len(d.t) {
		k.knots = make([]state2, len(d.t))
	}
	s := state2{x: d.before}
	tr := k.over(d.h)
	last := d.h
	for j := range k.knots {
		k.knots[j] = s
		if !d.even && j+1 < len(d.t) {
			if h := d.t[j+1] - d.t[j]; h != last {
				tr, last = k.over(h), h
			}
		}
		s = tr.advance(&s, d.u[j])
	}
}

// fast is response on even sampling, values with derivatives: simulation and
// queries in one pass, the state in registers.
func (k *secondOrder) fast(d *drive, q *queries, value, by1, by2, byTime []float64) {
	step, ask := k.over(d.h), k.over(q.off)
	f, fa, fb := step.f, step.a, step.b
	g, ga, gb := ask.f, ask.a, ask.b
	n := len(value)
	lead := min(max(q.shift, 0), n)
	for i := 0; i < lead; i++ {
		value[i], by1[i], by2[i], byTime[i] = k.before, 0, 0, 0
	}
	u := d.u[lead-q.shift:][:n-lead]
	value, by1, by2, byTime = value[lead:][:len(u)], by1[lead:][:len(u)], by2[lead:][:len(u)], byTime[lead:][:len(u)]
	s := state2{x: k.before}
	for j := 0; j < lead-q.shift; j++ { // a negative shift skips knots
		s = step.advance(&s, d.u[j])
	}
	x, v, xa, va, xb, vb := s.x, s.v, s.xa, s.va, s.xb, s.vb
	for i, in := range u {
		e := x - in
		value[i] = in + g[0]*e + g[1]*v
		byTime[i] = g[2]*e + g[3]*v
		by1[i] = g[0]*xa + g[1]*va + ga[0]*e + ga[1]*v
		by2[i] = g[0]*xb + g[1]*vb + gb[0]*e + gb[1]*v
		xa, va = f[0]*xa+f[1]*va+fa[0]*e+fa[1]*v, f[2]*xa+f[3]*va+fa[2]*e+fa[3]*v
		xb, vb = f[0]*xb+f[1]*vb+fb[0]*e+fb[1]*v, f[2]*xb+f[3]*vb+fb[2]*e+fb[3]*v
		x, v = in+f[0]*e+f[1]*v, f[2]*e+f[3]*v
	}
}

// plain is fast without derivatives.
func (k *secondOrder) plain(d *drive, q *queries, value []float64) {
	f, g := k.over(d.h).f, k.over(q.off).f
	n := len(value)
	lead := min(max(q.shift, 0), n)
	for i := 0; i < lead; i++ {
		value[i] = k.before
	}
	x, v := k.before, 0.0
	for j := 0; j < lead-q.shift; j++ {
		e := x - d.u[j]
		x, v = d.u[j]+f[0]*e+f[1]*v, f[2]*e+f[3]*v
	}
	u := d.u[lead-q.shift:][:n-lead]
	value = value[lead:][:len(u)]
	for i, in := range u {
		e := x - in
		value[i] = in + g[0]*e + g[1]*v
		x, v = in+f[0]*e+f[1]*v, f[2]*e+f[3]*v
	}
}

func (k *secondOrder) response(d *drive, q *queries, integral bool, value []float64, byShape [][]float64, byTime []float64) {
	if d.even && !integral && byShape == nil && byTime == nil {
		k.plain(d, q, value)
		return
	}
	if d.even && !integral && byShape != nil && byTime != nil {
		k.fast(d, q, value, byShape[0], byShape[1], byTime)
		return
	}
	k.simulate(d)
	var tr transition
	last := math.NaN()
	if d.even {
		tr = k.over(q.off)
	}
	for i := range value {
		j, a := 0, q.off
		if d.even {
			if j = i - q.shift; j < 0 {
				a += float64(j) * d.h
			}
		} else {
			j, a = int(q.index[i]), q.offset[i]
		}
		s, iu := state2{x: k.before}, 0.0
		if j >= 0 {
			if !d.even && a != last {
				tr, last = k.over(a), a
			}
			s = tr.advance(&k.knots[j], d.u[j])
			iu = d.iu[j] + d.u[j]*a
		} else {
			iu = d.before * a
		}
		slope := s.v
		if integral {
			slope = s.x
			s = k.integrate(s, iu)
		}
		value[i] = s.x
		if byShape != nil {
			byShape[0][i], byShape[1][i] = s.xa, s.xb
		}
		if byTime != nil {
			byTime[i] = slope
		}
	}
}

// integrate turns a state into the integral of the response and its derivatives:
// ∫x = ∫u − a1·x − a2·v, up to a constant.
func (k *secondOrder) integrate(s state2, iu float64) state2 {
	return state2{
		x:  iu - k.a1*s.x - k.a2*s.v,
		xa: -k.a1*(s.x+s.xa) - k.a2*s.va,
		xb: -k.a1*s.xb - k.a2*(s.v+s.vb),
	}
}

func (k *secondOrder) free(c int, tau []float64, integral bool, value []float64, byShape [][]float64) {
	for i, at := range tau {
		tr := k.over(at)
		s := state2{x: tr.f[c], v: tr.f[2+c], xa: tr.a[c], va: tr.a[2+c], xb: tr.b[c], vb: tr.b[2+c]}
		if integral {
			s = k.integrate(s, 0)
		}
		value[i] = s.x
		if byShape != nil {
			byShape[0][i], byShape[1][i] = s.xa, s.xb
		}
	}
}
