package model

import (
	"fmt"
	"math"

	"gainwright/protocol/si"
)

// StateSpace is ẋ = A·x + B·u, y = C·x + D·u with A in rows: A[i*N+j]. Time is
// in s. It leaves out the dead time.
type StateSpace struct {
	N       int
	A, B, C []float64
	D       float64
}

// StateSpace returns a realisation of Num/Den. It is the companion form in a
// unit of time in which the coefficients lie close together, so that a motor
// with time constants of 40 µs and 1 s stays well conditioned.
func (m Linear) StateSpace() StateSpace {
	n := m.Order()
	alpha := timeScale(m.Den)
	scaled := make([]float64, n+1) // monic denominator in s/alpha
	for i, d := range m.Den {
		scaled[i] = d / m.Den[0] * math.Pow(alpha, -float64(i))
	}
	num := make([]float64, n+1)
	trimmed := trimZeros(m.Num)
	offset := n + 1 - len(trimmed)
	for i, v := range trimmed {
		num[offset+i] = v / m.Den[0] * math.Pow(alpha, -float64(offset+i))
	}
	ss := StateSpace{N: n, A: make([]float64, n*n), B: make([]float64, n), C: make([]float64, n), D: num[0]}
	for j := range n {
		ss.A[j] = -alpha * scaled[j+1]
		ss.C[j] = num[j+1] - num[0]*scaled[j+1]
		if j > 0 {
			ss.A[j*n+j-1] = alpha
		}
	}
	if n > 0 {
		ss.B[0] = alpha
	}
	return ss
}

// Hold returns E = e^(A·t) − I (in rows) and G = ∫₀ᵗ e^(A·s)·B ds: what the state
// does in a time t under a constant input, x ← x + E·x + G·u. t is in s.
func (ss StateSpace) Hold(t float64) (e, g []float64) {
	n := ss.N
	aug := make([]float64, (n+1)*(n+1))
	for i := range n {
		for j := range n {
			aug[i*(n+1)+j] = ss.A[i*n+j] * t
		}
		aug[i*(n+1)+n] = ss.B[i] * t
	}
	x := Expm1(aug, n+1)
	e, g = make([]float64, n*n), make([]float64, n)
	for i := range n {
		copy(e[i*n:(i+1)*n], x[i*(n+1):i*(n+1)+n])
		g[i] = x[i*(n+1)+n]
	}
	return e, g
}

// Expm1 returns e^X − I for the n×n matrix x in rows, by its power series on
// X/2^k and (I+E)² − I = 2E + E² on the way back. Keeping the identity out of
// the sum keeps the small entries exact when the sampling is fast.
func Expm1(x []float64, n int) []float64 {
	var norm float64
	for i := range n {
		var row float64
		for j := range n {
			row += math.Abs(x[i*n+j])
		}
		norm = math.Max(norm, row)
	}
	k := 0
	for norm > 0.125 && k < 1100 { // beyond any finite norm
		norm /= 2
		k++
	}
	scale := math.Ldexp(1, -k)
	buf := make([]float64, 4*n*n)
	a, term, e, next := buf[:n*n], buf[n*n:2*n*n], buf[2*n*n:3*n*n], buf[3*n*n:]
	for i, v := range x {
		a[i] = v * scale
		term[i] = a[i]
		e[i] = a[i]
	}
	for q := 2; q <= 11; q++ { // 0.125¹²/12! is below one part in 10¹⁹
		mul(next, term, a, n)
		for i := range next {
			next[i] /= float64(q)
			e[i] += next[i]
		}
		term, next = next, term
	}
	for range k {
		mul(next, e, e, n)
		for i := range e {
			next[i] += 2 * e[i]
		}
		e, next = next, e
	}
	return e
}

func mul(dst, a, b []float64, n int) {
	for i := range n {
		row := dst[i*n : (i+1)*n]
		clear(row)
		for k := range n {
			v := a[i*n+k]
			if v == 0 {
				continue
			}
			for j, w := range b[k*n : (k+1)*n] {
				row[j] += v * w
			}
		}
	}
}

// Sampled is a model under a zero-order hold of period H, its dead time split
// as Whole·H + Rest with 0 ≤ Rest < H:
//
//	x[k+1] = x[k] + E·x[k] + G0·u[k−Whole] + G1·u[k−Whole−1]
//	y[k]   = C·x[k] + D·u[k−Whole−1]
//
// after Åström & Wittenmark, Computer-Controlled Systems (zero-order hold of a
// system with dead time; from memory). The speed is latched just before the
// drive changes, hence the last term.
type Sampled struct {
	H         float64 // s
	N         int
	E, G0, G1 []float64
	C         []float64
	D         float64
	Whole     int     // whole periods of dead time
	Rest      float64 // s, the rest of it
}

// Sample returns the exact sampled form of m for a period h > 0 in s, with
// extraDelay ≥ 0 in s (the compute delay) added to the dead time.
func (m Linear) Sample(h, extraDelay float64) (Sampled, error) {
	if !si.Finite(h) || h <= 0 {
		return Sampled{}, fmt.Errorf("%w: sample time is %g s: it must be above 0", ErrModel, h)
	}
	if !si.Finite(extraDelay) || extraDelay < 0 {
		return Sampled{}, fmt.Errorf("%w: compute delay is %g s: it must be 0 or more", ErrModel, extraDelay)
	}
	whole, rest := SplitDelay(m.DeadTime+extraDelay, h)
	if whole > 100_000 {
		return Sampled{}, fmt.Errorf("%w: dead time of %g s is more than 100 000 periods of %g s", ErrModel, m.DeadTime+extraDelay, h)
	}
	ss := m.StateSpace()
	n := ss.N
	d := Sampled{H: h, N: n, C: ss.C, D: ss.D, Whole: whole, Rest: rest, G1: make([]float64, n)}
	if rest == 0 {
		d.E, d.G0 = ss.Hold(h)
		return d, nil
	}
	d.E, _ = ss.Hold(h)
	late, g0 := ss.Hold(h - rest)
	_, early := ss.Hold(rest)
	d.G0 = g0
	for i := range n {
		d.G1[i] = early[i]
		for j := range n {
			d.G1[i] += late[i*n+j] * early[j]
		}
	}
	return d, nil
}

// SplitDelay splits delay into whole periods of h and a rest in [0, h). A rest
// within 1e-9 of a period of either end is taken as that end: the decimal
// numbers of a file mean whole periods when they are that close.
func SplitDelay(delay, h float64) (whole int, rest float64) {
	q := delay / h
	f := math.Floor(q)
	switch frac := q - f; {
	case frac < 1e-9:
		return int(f), 0
	case frac > 1-1e-9:
		return int(f) + 1, 0
	default:
		return int(f), delay - f*h
	}
}

// Pulse is the pulse transfer function of a Sampled model in δ = (z − 1)/H:
//
//	G(z) = (Num0(δ) + Num1(δ)/z) / Den(δ) · z^(−Whole)
//
// The delta form keeps its digits when the sampling is fast, where polynomials
// in z lose them.
type Pulse struct {
	H               float64
	Num0, Num1, Den []float64 // descending powers of δ
	Whole           int
	Late            bool // Num1 is not zero
}

// Pulse returns the pulse transfer function of d, by the recursion of
// Leverrier and Faddeev (from memory).
func (d Sampled) Pulse() Pulse {
	n := d.N
	p := Pulse{H: d.H, Den: make([]float64, n+1), Num0: make([]float64, n), Num1: make([]float64, n+1), Whole: d.Whole}
	p.Den[0] = 1
	a := make([]float64, n*n)
	for i, v := range d.E {
		a[i] = v / d.H
	}
	adj, next := make([]float64, n*n), make([]float64, n*n)
	for i := range n {
		adj[i*n+i] = 1
	}
	for k := range n {
		for i := range n {
			for j := range n {
				p.Num0[k] += d.C[i] * adj[i*n+j] * d.G0[j] / d.H
				p.Num1[k+1] += d.C[i] * adj[i*n+j] * d.G1[j] / d.H
			}
		}
		mul(next, a, adj, n)
		var trace float64
		for i := range n {
			trace += next[i*n+i]
		}
		p.Den[k+1] = -trace / float64(k+1)
		for i := range n {
			next[i*n+i] += p.Den[k+1]
		}
		adj, next = next, adj
	}
	for i, v := range p.Den {
		p.Num1[i] += d.D * v
	}
	p.Late = d.Rest != 0 || d.D != 0
	return p
}

// At returns G(e^(jωH)) for 0 < ω ≤ π/H in rad/s.
func (p Pulse) At(w float64) complex128 {
	// δ·H = e^(jφ) − 1 = 2j·sin(φ/2)·e^(jφ/2), without cancellation.
	sin, cos := math.Sincos(w * p.H / 2)
	half := complex(cos, sin)
	delta := complex(0, 2*sin/p.H) * half
	num := Horner(p.Num0, delta)
	if p.Late {
		num += Horner(p.Num1, delta) / (half * half)
	}
	g := num / Horner(p.Den, delta)
	if p.Whole > 0 {
		s, c := math.Sincos(w * p.H * float64(p.Whole))
		g *= complex(c, -s)
	}
	return g
}

// Step returns the response of m to a unit step of the input at time 0, at the
// n instants 0, h, 2h …, exact, dead time included.
func (m Linear) Step(h float64, n int) ([]float64, error) {
	d, err := m.Sample(h, 0)
	if err != nil {
		return nil, err
	}
	y := make([]float64, n)
	x, dx := make([]float64, d.N), make([]float64, d.N)
	on := func(k int) float64 { // the input that was switched on in period 0
		if k >= 0 {
			return 1
		}
		return 0
	}
	for k := range y {
		y[k] = d.D * on(k-d.Whole-1)
		for i, c := range d.C {
			y[k] += c * x[i]
		}
		d.Advance(x, dx, on(k-d.Whole), on(k-d.Whole-1))
	}
	return y, nil
}

// Advance moves the state x by one period under u0 = u[k−Whole] and
// u1 = u[k−Whole−1]; scratch has the length of x.
func (d Sampled) Advance(x, scratch []float64, u0, u1 float64) {
	n := d.N
	for i := range n {
		v := d.G0[i]*u0 + d.G1[i]*u1
		for j, e := range d.E[i*n : (i+1)*n] {
			v += e * x[j]
		}
		scratch[i] = v
	}
	for i := range x {
		x[i] += scratch[i]
	}
}
