package identify

import "math"

// Running keeps the covariance of gain and time constant while a record grows: the
// normal equations of one lag, linearised about a first idea of both, with a free
// offset. Every sample costs the same. It fits nothing for good, it says how well
// what has come so far can tell.
type Running struct {
	gain, tau, dead float64

	begun        bool
	last, volts  float64 // s, V
	x, dx        float64 // response of the lag to the volts, and its derivative by tau
	line         []held  // volts on their way through the dead time
	a            [6]float64
	b            [3]float64
	n            int
	ee, lag, was float64 // of what was not foretold
	foretold     int
}

type held struct{ at, volts float64 }

// NewRunning begins with a first idea of gain in rad/s per V, tau and dead time in s.
func NewRunning(gain, tau, dead float64) *Running {
	return &Running{gain: gain, tau: tau, dead: dead}
}

// Add takes a sample: volts were applied since the sample before, and the speed is
// what came of it.
func (r *Running) Add(t, volts, speed float64) {
	if !r.begun {
		r.begun, r.last, r.x = true, t, volts
		r.volts = volts
		return
	}
	if t <= r.last {
		return
	}
	// What acts now left a dead time ago.
	r.line = append(r.line, held{t, volts})
	for len(r.line) > 0 && r.line[0].at <= t-r.dead {
		r.volts = r.line[0].volts
		r.line = r.line[1:]
	}
	h := t - r.last
	r.last = t
	e := math.Exp(-h / r.tau)
	// x' = (v − x)/τ; its derivative by τ obeys d' = −d/τ − (v − x)/τ², exactly over h.
	r.dx = e*r.dx - (r.volts-r.x)*e*h/(r.tau*r.tau)
	r.x = r.volts + (r.x-r.volts)*e
	f := [3]float64{r.x, r.gain * r.dx, 1}
	if r.n >= 8 {
		if p, ok := r.solve(r.b); ok {
			err := speed - r.gain*r.x - p[0]*f[0] - p[1]*f[1] - p[2]
			if r.foretold > 0 {
				r.lag += err * r.was
			}
			r.ee += err * err
			r.foretold++
			r.was = err
		}
	}
	y := speed - r.gain*r.x
	k := 0
	for i := range 3 {
		for j := i; j < 3; j++ {
			r.a[k] += f[i] * f[j]
			k++
		}
		r.b[i] += f[i] * y
	}
	r.n++
}

// Widths returns the standard deviations of gain and time constant, as shares of
// the first idea of each; ok is false while they cannot be told.
func (r *Running) Widths() (gain, tau float64, ok bool) {
	if r.foretold < 20 {
		return math.NaN(), math.NaN(), false
	}
	k, okK := r.solve([3]float64{1, 0, 0})
	t, okT := r.solve([3]float64{0, 1, 0})
	if !okK || !okT || !(k[0] > 0) || !(t[1] > 0) {
		return math.NaN(), math.NaN(), false
	}
	s2 := r.ee / float64(r.foretold)
	// Errors that remember tell less: a first-order memory costs (1 + ρ)/(1 − ρ).
	rho := math.Max(0, math.Min(0.95, r.lag/math.Max(r.ee, 1e-300)))
	s2 *= (1 + rho) / (1 - rho)
	return math.Sqrt(s2*k[0]) / r.gain, math.Sqrt(s2*t[1]) / r.tau, true
}

// solve solves the normal equations for a right-hand side.
func (r *Running) solve(b [3]float64) (x [3]float64, ok bool) {
	a := r.a
	m := [3][4]float64{{a[0], a[1], a[2], b[0]}, {a[1], a[3], a[4], b[1]}, {a[2], a[4], a[5], b[2]}}
	for i := range 3 {
		p := i
		for j := i + 1; j < 3; j++ {
			if math.Abs(m[j][i]) > math.Abs(m[p][i]) {
				p = j
			}
		}
		m[i], m[p] = m[p], m[i]
		if math.Abs(m[i][i]) < 1e-12*math.Abs(a[0]+a[3]+a[5]) {
			return x, false
		}
		for j := range 3 {
			if j == i {
				continue
			}
			f := m[j][i] / m[i][i]
			for k := i; k < 4; k++ {
				m[j][k] -= f * m[i][k]
			}
		}
	}
	for i := range 3 {
		x[i] = m[i][3] / m[i][i]
	}
	return x, true
}
