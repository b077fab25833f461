package design

import (
	"math"
	"sort"

	"gainwright/tune/model"
)

// facts is what the published rules ask about a plant. Its dead time holds all
// of the loop's: that of the model, the compute delay, and half a sample for
// the hold, as the rules for continuous controllers want it.
type facts struct {
	gain        float64 // K in rad/s per V; 0 for an integrating plant
	velocity    float64 // Kv in rad/s² per V of an integrating plant, else 0
	lags        []float64
	dead        float64 // s, before any reduction
	complex     bool    // poles that are not real
	zeros       bool    // zeros in the left half plane, which the half rule does not take
	den         []float64
	num         float64
	tangentDead float64 // s, of the tangent at the steepest point of the step
	tangentTau  float64 // s, gain over the steepest slope
	tau63       float64 // s, time to 63 % less tangentDead
	ku, pu      float64 // V per rad/s and s; ku 0 where there is no ultimate point
}

// newFacts derives the facts of m under a loop of the given sample time and
// compute delay. m has a positive gain.
func newFacts(m model.Linear, sampleTime, computeDelay float64) (facts, error) {
	f := facts{dead: m.DeadTime + computeDelay + sampleTime/2, den: m.Den, num: m.Num[len(m.Num)-1]}
	poles := m.Poles()
	right, zero := model.RightHalfPlane(poles)
	if right > 0 {
		return f, refuse("the model is unstable by itself; no published rule here is made for that")
	}
	if zero > 1 {
		return f, refuse("the model integrates twice; no rule here holds it without a position loop")
	}
	for _, p := range poles {
		switch {
		case p == 0:
		case math.Abs(imag(p)) > 0.05*math.Abs(real(p)):
			f.complex = true
		default: // the roots of a multiple pole come out slightly apart
			f.lags = append(f.lags, -real(p)/(real(p)*real(p)+imag(p)*imag(p)))
		}
	}
	sort.Sort(sort.Reverse(sort.Float64Slice(f.lags)))
	for _, z := range m.Zeros() {
		if real(z) > 0 {
			f.dead += 1 / real(z) // Skogestad: a right-half-plane zero counts as dead time
		} else {
			f.zeros = true
		}
	}
	if zero == 1 {
		f.velocity = m.Num[len(m.Num)-1] / m.Den[len(m.Den)-2]
	} else {
		f.gain = m.DCGain()
		f.tangent(m, computeDelay+sampleTime/2)
	}
	if ku, pu, ok := m.Ultimate(computeDelay + sampleTime/2); ok {
		f.ku, f.pu = ku, pu
	}
	return f, nil
}

// tangent reads the step response as one would from paper, but exactly.
func (f *facts) tangent(m model.Linear, extra float64) {
	ss := m.StateSpace()
	n := ss.N
	if n == 0 {
		return
	}
	at := func(t float64) (y, slope float64) {
		e, g := ss.Hold(t)
		y = ss.D
		for i := range n {
			y += ss.C[i] * g[i]
			rate := ss.B[i]
			for j := range n {
				rate += e[i*n+j] * ss.B[j]
			}
			slope += ss.C[i] * rate
		}
		return y, slope
	}
	lo, hi := m.Corners()
	first, ratio := 1e-3/hi, 1.1
	steepest, when := math.Inf(-1), 0.0
	rose := math.NaN()
	goal := f.gain * -math.Expm1(-1)
	before := 0.0
	for t := first; t < 50/lo; t *= ratio {
		y, slope := at(t)
		if slope > steepest {
			steepest, when = slope, t
		}
		if math.IsNaN(rose) && y >= goal {
			rose = root(func(t float64) float64 { y, _ := at(t); return y - goal }, before, t)
		}
		before = t
	}
	if _, s0 := at(0); s0 >= steepest {
		when = 0
	} else {
		slope := func(t float64) float64 { _, s := at(t); return s }
		when = maximum(slope, when/ratio, when*ratio)
	}
	y, slope := at(when)
	dead := m.DeadTime + extra
	f.tangentDead = dead + when - y/slope
	f.tangentTau = f.gain / slope
	f.tau63 = dead + rose - f.tangentDead
}

// first reduces the plant to one lag and a dead time by the half rule
// (Skogestad, J. Process Control 13 (2003) 291–309; formulas from memory): the
// largest neglected lag is shared between the kept one and the dead time.
func (f facts) first() (tau, dead float64, err error) {
	if err := f.reducible(); err != nil {
		return 0, 0, err
	}
	tau, dead = halfRule(f.lags, f.dead)
	return tau, dead, nil
}

func (f facts) reducible() error {
	if f.complex {
		return refuse("the model has complex poles, which the half rule does not reduce")
	}
	if f.zeros {
		return refuse("the model has a zero in the left half plane, which the half rule here does not take")
	}
	if len(f.lags) == 0 && f.velocity == 0 {
		return refuse("the model has no lag to tune for")
	}
	return nil
}

// halfRule returns the kept lag and the dead time of lags in falling order.
func halfRule(lags []float64, dead float64) (tau, total float64) {
	if len(lags) == 0 {
		return 0, dead
	}
	tau, total = lags[0], dead
	if len(lags) > 1 {
		tau += lags[1] / 2
		total += lags[1] / 2
		for _, t := range lags[2:] {
			total += t
		}
	}
	return tau, total
}

// second reduces the plant to two lags and a dead time by the half rule; tau2 is
// 0 for a plant of first order.
func (f facts) second() (tau1, tau2, dead float64, err error) {
	if err := f.reducible(); err != nil {
		return 0, 0, 0, err
	}
	if len(f.lags) == 0 {
		return 0, 0, f.dead, nil
	}
	tau2, dead = halfRule(f.lags[1:], f.dead)
	return f.lags[0], tau2, dead, nil
}

// integrating reduces an integrating plant: the integrator counts as the
// largest lag, so half of the largest lag goes to the dead time.
func (f facts) integrating() (velocity, dead float64, err error) {
	if err := f.reducible(); err != nil {
		return 0, 0, err
	}
	dead = f.dead
	for i, t := range f.lags {
		if i == 0 {
			t /= 2
		}
		dead += t
	}
	return f.velocity, dead, nil
}
