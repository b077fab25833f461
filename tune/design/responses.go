package design

import (
	"math"
	"math/cmplx"

	"gainwright/tune/model"
)

// Ends of a simulation: it stops when over the second half of it the error
// stayed below this part of its largest value.
const (
	tailSampled    = 1e-10
	tailContinuous = 1e-7
	settlingBand   = 0.02
)

// responses simulates the unit setpoint step and the unit load step of a stable
// loop; g is parallel.
func responses(m model.Linear, g Gains) (Step, LoadStep, error) {
	switch {
	case g.SampleTime > 0:
		return sampledResponses(m, g)
	case m.DeadTime+g.ComputeDelay > 0:
		return delayedResponses(m, g)
	default:
		return rationalResponses(m, g)
	}
}

// segment is a piece of a response between two instants, with the slopes at its
// ends; between them the response is the cubic through these.
type segment struct {
	t, h           float64 // s
	y0, y1, d0, d1 float64
}

// cubic returns the polynomial of the segment in x = (t − s.t)/s.h, ascending.
func (s segment) cubic() [4]float64 {
	a, b := s.d0*s.h, s.d1*s.h
	return [4]float64{s.y0, a, 3*(s.y1-s.y0) - 2*a - b, 2*(s.y0-s.y1) + a + b}
}

func eval(c [4]float64, x float64) float64 { return c[0] + x*(c[1]+x*(c[2]+x*c[3])) }

// meter measures a response while it is being made.
type meter struct {
	target      float64 // what y should come to
	t10, t90    float64
	top         float64 // largest y
	size        float64 // largest |y − target| so far
	recent      float64 // the same since the last call of restart
	iae         float64
	lastOutside float64
}

func newMeter(target float64) *meter {
	return &meter{target: target, t10: math.NaN(), t90: math.NaN(), top: math.Inf(-1)}
}

func (m *meter) add(s segment) {
	c := s.cubic()
	// The instants at which the cubic turns split the segment into rising and
	// falling pieces, which the rest relies on.
	knots := [4]float64{0, 1, 1, 1}
	n := 1
	for _, x := range turningPoints(c) {
		knots[n] = x
		n++
	}
	knots[n] = 1
	for i := range n {
		m.piece(s, c, knots[i], knots[i+1])
	}
}

// piece takes a part of s between x0 and x1 in which the cubic c is monotonous.
func (m *meter) piece(s segment, c [4]float64, x0, x1 float64) {
	y0, y1 := eval(c, x0), eval(c, x1)
	m.top = math.Max(m.top, math.Max(y0, y1))
	e0, e1 := y0-m.target, y1-m.target
	e := math.Max(math.Abs(e0), math.Abs(e1))
	m.size, m.recent = math.Max(m.size, e), math.Max(m.recent, e)
	if math.IsNaN(m.t10) && y1 >= 0.1*m.target {
		m.t10 = s.t + s.h*cross(c, x0, x1, 0.1*m.target)
	}
	if math.IsNaN(m.t90) && y1 >= 0.9*m.target {
		m.t90 = s.t + s.h*cross(c, x0, x1, 0.9*m.target)
	}
	if math.Abs(e1) > settlingBand {
		m.lastOutside = s.t + s.h*x1
	} else if math.Abs(e0) > settlingBand {
		m.lastOutside = s.t + s.h*cross(c, x0, x1, m.target+math.Copysign(settlingBand, e0))
	}
	primitive := func(x float64) float64 {
		return x * (c[0] - m.target + x*(c[1]/2+x*(c[2]/3+x*c[3]/4)))
	}
	if e0*e1 < 0 {
		mid := cross(c, x0, x1, m.target)
		m.iae += s.h * (math.Abs(primitive(mid)-primitive(x0)) + math.Abs(primitive(x1)-primitive(mid)))
	} else {
		m.iae += s.h * math.Abs(primitive(x1)-primitive(x0))
	}
}

// turningPoints returns the x in (0, 1), rising, at which the cubic c turns.
func turningPoints(c [4]float64) []float64 {
	qa, qb, qc := 3*c[3], 2*c[2], c[1]
	var out []float64
	keep := func(x float64) {
		if x > 0 && x < 1 {
			out = append(out, x)
		}
	}
	disc := qb*qb - 4*qa*qc
	if disc <= 0 {
		return nil
	}
	q := -(qb + math.Copysign(math.Sqrt(disc), qb)) / 2
	a, b := math.NaN(), math.NaN()
	if qa != 0 {
		a = q / qa
	}
	if q != 0 {
		b = qc / q
	}
	if a > b {
		a, b = b, a
	}
	keep(a)
	keep(b)
	return out
}

// cross returns the x between x0 and x1 at which the monotonous cubic is y.
func cross(c [4]float64, x0, x1, y float64) float64 {
	f := func(x float64) float64 { return eval(c, x) - y }
	f0, f1 := f(x0), f(x1)
	switch {
	case f1 == 0 && f0 != 0:
		return x1
	case f0 == 0 || f0 > 0 == (f1 > 0):
		return x0
	}
	return root(f, x0, x1)
}

func (m *meter) step() Step {
	s := Step{RiseTime: Value(m.t90 - m.t10), Overshoot: Value(100 * math.Max(0, m.top/m.target-1)), SettlingTime: Value(m.lastOutside), IAE: Value(m.iae)}
	if math.IsInf(m.recent, 1) {
		s.Overshoot = Unknown // given up before the end
	}
	if m.recent > settlingBand {
		s.SettlingTime, s.IAE = Unknown, Unknown // it does not come to the setpoint
	}
	return s
}

func (m *meter) load() LoadStep {
	out := LoadStep{IAE: Value(m.iae), Peak: Value(m.size)}
	if m.recent > 1e-3*m.size {
		out.IAE = Unknown // the load leaves a lasting error
	}
	return out
}

// rationalResponses serves the continuous loop without dead time: exact at the
// grid, which follows the closed-loop poles that are still alive.
func rationalResponses(m model.Linear, g Gains) (Step, LoadStep, error) {
	f := []float64{g.DerivativeFilter, 1}
	if g.Kd == 0 || g.DerivativeFilter == 0 {
		f = []float64{1}
	}
	integral := []float64{1, 0}
	fromError := g.Kd
	if g.DerivativeOn != OnError {
		fromError = 0
	}
	feedback := polyAdd(polyMul([]float64{g.Kp, g.Ki}, f), []float64{g.Kd, 0, 0})
	setpoint := polyAdd(polyMul([]float64{g.SetpointWeight * g.Kp, g.Ki}, f), []float64{fromError, 0, 0})
	if g.Ki == 0 { // drop the common factor s
		integral = []float64{1}
		feedback, setpoint = feedback[:len(feedback)-1], setpoint[:len(setpoint)-1]
	}
	den := polyMul(integral, f)
	char := polyAdd(polyMul(m.Den, den), polyMul(m.Num, feedback))
	y := newMeter(1)
	runRational(model.Linear{Num: polyMul(m.Num, setpoint), Den: char}, y)
	z := newMeter(0)
	runRational(model.Linear{Num: polyMul(m.Num, den), Den: char}, z)
	return y.step(), z.load(), nil
}

// runRational feeds the unit step response of t to the meter.
func runRational(t model.Linear, out *meter) {
	for t.Den[0] == 0 { // a derivative of 0 leaves a leading zero
		t.Den = t.Den[1:]
	}
	const (
		decayed  = 25.0 // a mode is over after so many of its time constants
		fine     = 0.15 // step times the magnitude of the fastest living mode
		stepsMax = 2e6  // a loop that swings longer than that has no settling time worth the name
	)
	taken := 0.0
	poles := t.Poles()
	ss := t.StateSpace()
	n := ss.N
	x, dx := make([]float64, n), make([]float64, n)
	value := func() (y, d float64) {
		y = ss.D
		for i := range n {
			y += ss.C[i] * x[i]
			rate := ss.B[i]
			for j := range n {
				rate += ss.A[i*n+j] * x[j]
			}
			d += ss.C[i] * rate
		}
		return y, d
	}
	now := 0.0
	y0, d0 := value()
	for {
		fastest, next := alive(poles, now, decayed)
		if fastest == 0 {
			return
		}
		steps := math.Max(1, math.Ceil((next-now)*fastest/fine))
		if taken += steps; taken > stepsMax {
			out.recent = math.Inf(1) // not settled, as far as is known
			return
		}
		h := (next - now) / steps
		e, gain := ss.Hold(h)
		out.recent = 0
		for range int(steps) {
			for i := range n {
				v := gain[i]
				for j := range n {
					v += e[i*n+j] * x[j]
				}
				dx[i] = v
			}
			for i := range n {
				x[i] += dx[i]
			}
			y1, d1 := value()
			out.add(segment{now, h, y0, y1, d0, d1})
			y0, d0 = y1, d1
			now += h
		}
		now = next
		out.recent = math.Abs(y0 - out.target)
	}
}

// alive returns the magnitude of the fastest mode that has not decayed at the
// time now, and when the next of them has, after so many of its time constants.
func alive(poles []complex128, now, decayed float64) (fastest, next float64) {
	next = math.Inf(1)
	for _, p := range poles {
		if life := decayed / -real(p); life > now*(1+1e-12) {
			fastest = math.Max(fastest, cmplx.Abs(p))
			next = math.Min(next, life)
		}
	}
	return fastest, next
}

func polyMul(a, b []float64) []float64 {
	out := make([]float64, len(a)+len(b)-1)
	for i, x := range a {
		for j, y := range b {
			out[i+j] += x * y
		}
	}
	return out
}

func polyAdd(a, b []float64) []float64 {
	if len(a) < len(b) {
		a, b = b, a
	}
	out := append([]float64(nil), a...)
	for i, y := range b {
		out[len(a)-len(b)+i] += y
	}
	return out
}
