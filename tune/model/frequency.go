package model

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// At returns G(jω) for ω in rad/s, dead time exact. It is infinite at a pole on
// the imaginary axis.
func (m Linear) At(w float64) complex128 {
	s := complex(0, w)
	g := Horner(m.Num, s) / Horner(m.Den, s)
	if m.DeadTime == 0 {
		return g
	}
	sin, cos := math.Sincos(w * m.DeadTime)
	return g * complex(cos, -sin)
}

// Horner evaluates the polynomial p, in descending powers, at s.
func Horner(p []float64, s complex128) complex128 {
	var v complex128
	for _, c := range p {
		v = v*s + complex(c, 0)
	}
	return v
}

// Poles returns the roots of the denominator in rad/s, in no special order.
func (m Linear) Poles() []complex128 { return Roots(m.Den) }

// Zeros returns the roots of the numerator in rad/s.
func (m Linear) Zeros() []complex128 { return Roots(m.Num) }

// Roots returns the roots of the polynomial p, in descending powers: closed
// forms up to the second degree, eigenvalues of the companion matrix beyond.
// Roots at 0 come out exactly 0.
func Roots(p []float64) []complex128 {
	p = trimZeros(p)
	var roots []complex128
	for len(p) > 1 && p[len(p)-1] == 0 {
		roots = append(roots, 0)
		p = p[:len(p)-1]
	}
	switch n := len(p) - 1; {
	case n <= 0:
		return roots
	case n == 1:
		return append(roots, complex(-p[1]/p[0], 0))
	case n == 2:
		return append(roots, quadraticRoots(p)...)
	default:
		return append(roots, companionRoots(p)...)
	}
}

// quadraticRoots avoids the cancellation of the textbook formula by taking the
// smaller root from the product of the two.
func quadraticRoots(p []float64) []complex128 {
	a, b, c := p[0], p[1]/2, p[2]
	disc := b*b - a*c
	if disc < 0 {
		im := math.Sqrt(-disc) / a
		return []complex128{complex(-b/a, im), complex(-b/a, -im)}
	}
	q := -(b + math.Copysign(math.Sqrt(disc), b))
	return []complex128{complex(q/a, 0), complex(c/q, 0)}
}

func companionRoots(p []float64) []complex128 {
	n := len(p) - 1
	alpha := timeScale(p)
	a := mat.NewDense(n, n, nil)
	for i := range n {
		a.Set(0, i, -p[i+1]/p[0]*math.Pow(alpha, -float64(i+1)))
	}
	for i := 1; i < n; i++ {
		a.Set(i, i-1, 1)
	}
	var eig mat.Eigen
	if !eig.Factorize(a, mat.EigenNone) {
		panic("model: eigenvalues of a companion matrix did not converge")
	}
	roots := eig.Values(nil)
	for i := range roots {
		roots[i] *= complex(alpha, 0)
	}
	return roots
}

// timeScale returns the geometric mean of the magnitudes of the roots of p that
// are not 0; in that unit of time the coefficients of p lie closest together.
func timeScale(p []float64) float64 {
	for k := len(p) - 1; k > 0; k-- {
		if p[k] != 0 {
			return math.Pow(math.Abs(p[k]/p[0]), 1/float64(k))
		}
	}
	return 1
}

// RightHalfPlane counts the roots with a positive real part, and the roots at
// 0. A root counts as in the right half plane from a real part of 1e-9 of the
// largest root on.
func RightHalfPlane(roots []complex128) (right, zero int) {
	var big float64
	for _, r := range roots {
		big = math.Max(big, cmplx.Abs(r))
	}
	for _, r := range roots {
		switch {
		case r == 0:
			zero++
		case real(r) > 1e-9*big:
			right++
		}
	}
	return right, zero
}

// Ultimate returns the ultimate gain Ku (input unit per rad/s) and the ultimate
// period Pu (s): the first frequency at which the continuous phase of G has
// fallen by 180° below that of a positive gain, and 1/|G| there. ok is false if
// the phase never falls so far, as for a first order without dead time.
// extraDelay in s is added to the dead time (hold, compute delay).
func (m Linear) Ultimate(extraDelay float64) (ku, pu float64, ok bool) {
	m.DeadTime += extraDelay
	lo, hi := m.Corners()
	at := func(w float64) complex128 { return -m.At(w) }
	// Up to the first crossing the dead time turns the phase by π at most, so
	// that steps of 2 % keep each turn far below a right angle.
	w := lo * 1e-4
	prev := at(w)
	for w < hi*1e5 {
		next := w * 1.02
		g := at(next)
		if real(prev) > 0 && real(g) > 0 && imag(prev) > 0 != (imag(g) > 0) {
			w = bisect(func(w float64) float64 { return imag(at(w)) }, w, next)
			return 1 / cmplx.Abs(at(w)), 2 * math.Pi / w, true
		}
		w, prev = next, g
	}
	return 0, 0, false
}

// Corners returns the lowest and the highest corner frequency in rad/s of the
// poles, zeros and dead time of m, 1 and 1 where it has none.
func (m Linear) Corners() (lo, hi float64) {
	lo, hi = math.Inf(1), 0
	add := func(w float64) {
		if w > 0 {
			lo, hi = math.Min(lo, w), math.Max(hi, w)
		}
	}
	for _, r := range m.Poles() {
		add(cmplx.Abs(r))
	}
	for _, r := range m.Zeros() {
		add(cmplx.Abs(r))
	}
	if m.DeadTime > 0 {
		add(1 / m.DeadTime)
	}
	if hi == 0 {
		return 1, 1
	}
	return lo, hi
}

// bisect returns a root of f between a and b, where f changes sign, to the last
// digit: 200 halvings would be enough for any bracket.
func bisect(f func(float64) float64, a, b float64) float64 {
	fa := f(a)
	for range 200 {
		mid := a + (b-a)/2
		if mid == a || mid == b {
			return mid
		}
		fm := f(mid)
		if (fm > 0) == (fa > 0) {
			a, fa = mid, fm
		} else {
			b = mid
		}
	}
	return a + (b-a)/2
}
