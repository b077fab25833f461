package design

import "math"

// root returns a root of f between a and b, where f changes sign, to the last
// digits: inverse quadratic and secant steps with bisection to fall back on
// (Brent, Algorithms for Minimization without Derivatives, 1973; from memory).
func root(f func(float64) float64, a, b float64) float64 {
	fa, fb := f(a), f(b)
	if fa == 0 {
		return a
	}
	c, fc := a, fa
	d := b - a
	e := d
	for range 200 {
		if fb > 0 == (fc > 0) {
			c, fc = a, fa
			d = b - a
			e = d
		}
		if math.Abs(fc) < math.Abs(fb) {
			a, b, c = b, c, b
			fa, fb, fc = fb, fc, fb
		}
		tol := 4 * 2.2e-16 * math.Abs(b)
		half := (c - b) / 2
		if math.Abs(half) <= tol || fb == 0 {
			return b
		}
		if math.Abs(e) < tol || math.Abs(fa) <= math.Abs(fb) {
			d = half
			e = d
		} else {
			d, e = brentStep(a, b, c, fa, fb, fc, half, tol, d, e)
		}
		a, fa = b, fb
		if math.Abs(d) > tol {
			b += d
		} else {
			b += math.Copysign(tol, half)
		}
		fb = f(b)
	}
	return b
}

func brentStep(a, b, c, fa, fb, fc, half, tol, d, e float64) (step, before float64) {
	var p, q float64
	s := fb / fa
	if a == c {
		p, q = 2*half*s, 1-s
	} else {
		q, r := fa/fc, fb/fc
		p = s * (2*half*q*(q-r) - (b-a)*(r-1))
		return brentAccept(p, (q-1)*(r-1)*(s-1), half, tol, d, e)
	}
	return brentAccept(p, q, half, tol, d, e)
}

func brentAccept(p, q, half, tol, d, e float64) (step, before float64) {
	if p > 0 {
		q = -q
	} else {
		p = -p
	}
	if 2*p < math.Min(3*half*q-math.Abs(tol*q), math.Abs(e*q)) {
		return p / q, d
	}
	return half, half
}

// maximum returns where f, with one maximum between a and b, is largest, to
// about nine digits of the argument. The value there is exact to rounding,
// because a maximum is flat.
func maximum(f func(float64) float64, a, b float64) float64 {
	return maximumWithin(f, a, b, 1e-9*math.Abs(b))
}

// maximumWithin is maximum with an absolute tolerance of the argument, by
// golden section.
func maximumWithin(f func(float64) float64, a, b, tol float64) float64 {
	const golden = 0.6180339887498949
	x1, x2 := b-golden*(b-a), a+golden*(b-a)
	f1, f2 := f(x1), f(x2)
	for i := 0; i < 80 && b-a > tol; i++ {
		if f1 > f2 {
			b, x2, f2 = x2, x1, f1
			x1 = b - golden*(b-a)
			f1 = f(x1)
		} else {
			a, x1, f1 = x1, x2, f2
			x2 = a + golden*(b-a)
			f2 = f(x2)
		}
	}
	return (a + b) / 2
}
