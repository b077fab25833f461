package design

import (
	"errors"
	"fmt"
	"math"
	"math/cmplx"

	"gainwright/tune/model"
)

// ErrRefused is what a rule wraps that does not apply; the text says why and
// what would help.
var ErrRefused = errors.New("design: refused")

func refuse(format string, args ...any) error {
	return fmt.Errorf("%w: %s", ErrRefused, fmt.Sprintf(format, args...))
}

// candidate is a controller on the way: kp·(1 + td·s/(1 + filter·s)) + ki/s.
type candidate struct{ kp, ki, td, filter float64 }

func (c candidate) gains(shape Gains) Gains {
	shape.Form, shape.Kp, shape.Ki, shape.Kd, shape.DerivativeFilter = FormParallel, c.kp, c.ki, c.kp*c.td, c.filter
	return shape
}

// filterRatio is td over the derivative filter time of our own PID. *Common
// practice, no source*: 5 to 10.
const filterRatio = 8

// LargestKi returns the controller with the largest integral gain whose loop
// keeps Ms ≤ msMax (1.1 to 3), on the loop as it runs: shape gives sample time,
// compute delay, discretisation and setpoint weight. With td = 0 it is a PI
// controller, with td > 0 a PID whose derivative time is td.
//
// For each frequency the pairs (kp, ki) with |1 + L| < 1/msMax fill an ellipse,
// so for one kp the largest ki is where the way up from 0 first meets one
// (Åström, Panagopoulos & Hägglund, Automatica 34 (1998) 585–601; from memory).
// The way up starts in the stable region and never crosses a frequency's
// ellipse, so it stays stable.
//
// A largest integral gain means the smallest integrated error after a load
// step, which is 1/ki.
func LargestKi(m model.Linear, shape Gains, msMax, td float64) (Gains, error) {
	s, err := newKiSearch(m, shape, msMax, td)
	if err != nil {
		return Gains{}, err
	}
	kp, ki := s.best(s.kpMax)
	return s.finish(kp, ki)
}

type kiSearch struct {
	m     model.Linear
	shape Gains
	r     float64 // 1/Ms
	td    float64
	w     []float64
	g     []complex128 // plant times the proportional and derivative part for kp = 1
	b     []complex128 // plant times the integral part for ki = 1
	bound []float64    // scratch
	kpMax float64
}

func newKiSearch(m model.Linear, shape Gains, msMax, td float64) (*kiSearch, error) {
	if !(msMax >= 1.1 && msMax <= 3) {
		return nil, fmt.Errorf("design: the bound on Ms is %g: give 1.1 to 3", msMax)
	}
	unit := candidate{kp: 1, ki: 0, td: td, filter: td / filterRatio}.gains(shape)
	l, err := newLoop(m, unit)
	if err != nil {
		return nil, err
	}
	if l.right > 0 {
		return nil, refuse("the model is unstable by itself; this rule starts from a motor at rest that stays so")
	}
	if l.zero > 1 {
		return nil, refuse("the model integrates twice; a PI speed loop cannot hold it")
	}
	s := &kiSearch{m: m, shape: shape, r: 1 / msMax, td: td}
	integral := candidate{ki: 1}.gains(shape).response()
	s.frequencies(l)
	s.g, s.b = make([]complex128, len(s.w)), make([]complex128, len(s.w))
	s.bound = make([]float64, len(s.w))
	for i, w := range s.w {
		p := l.plant(w)
		s.g[i], s.b[i] = p*l.controller(w), p*integral(w)
	}
	s.kpMax = s.largestKp()
	if math.IsInf(s.kpMax, 1) {
		return nil, refuse("nothing limits the gain of this model: give the sample time of the loop (--sample-time) or a model with its dead time")
	}
	return s, nil
}

// frequencies lays a grid from far below every corner to where the plant is too
// weak to matter for any gain that its −180° point allows.
func (s *kiSearch) frequencies(l *loop) {
	const ratio = 1.03
	w := l.lowest * 0.01
	weak := 0.0
	var before complex128
	for w < l.end && w < 1e3*l.highest {
		p := l.at(w)
		if before != 0 && weak == 0 && crossesNegative(before, p) {
			weak = cmplx.Abs(p)
		}
		s.w = append(s.w, w)
		if weak > 0 && cmplx.Abs(p) < 0.02*weak && w > 3*l.lowest {
			return
		}
		before = p
		step := w * (ratio - 1)
		if l.deadTime > 0 {
			step = math.Min(step, 0.1/l.deadTime)
		}
		for range 6 { // a resonance turns fast and needs finer steps
			if turn(p, l.at(w+step)) <= 0.15 {
				break
			}
			step /= 2
		}
		w += step
	}
	if !math.IsInf(l.end, 1) {
		s.w = append(s.w, l.end)
	}
}

// largestKp returns the smallest kp > 0 at which some frequency without
// integral comes closer than r to −1.
func (s *kiSearch) largestKp() float64 {
	kp := math.Inf(1)
	for _, g := range s.g {
		a, b, c := real(g)*real(g)+imag(g)*imag(g), real(g), 1-s.r*s.r
		if b >= 0 {
			continue
		}
		if disc := b*b - a*c; disc >= 0 {
			kp = math.Min(kp, c/(-b+math.Sqrt(disc)))
		}
	}
	return kp
}

// largestKi returns the largest ki for kp. Between grid points the bound is
// taken from the parabola through the lowest point and its neighbours.
func (s *kiSearch) largestKi(kp float64) float64 {
	best, at := math.Inf(1), -1
	for i := range s.w {
		v := s.limit(i, kp)
		s.bound[i] = v
		if v < best {
			best, at = v, i
		}
	}
	if at < 1 || at+1 >= len(s.w) || best <= 0 {
		return best
	}
	a, c := s.bound[at-1], s.bound[at+1]
	if math.IsInf(a, 1) || math.IsInf(c, 1) {
		return best
	}
	if curve := a - 2*best + c; curve > 0 {
		best -= (a - c) * (a - c) / (8 * curve)
	}
	return math.Max(best, 0)
}

// limit returns the ki at which frequency i first comes closer than r to −1; 0
// if it is too close without integral already.
func (s *kiSearch) limit(i int, kp float64) float64 {
	a := 1 + complex(kp, 0)*s.g[i]
	b := s.b[i]
	bb := real(b)*real(b) + imag(b)*imag(b)
	x := real(a)*real(b) + imag(a)*imag(b)
	c := real(a)*real(a) + imag(a)*imag(a) - s.r*s.r
	if c < 0 {
		return 0
	}
	disc := x*x - bb*c
	if disc < 0 || x >= 0 {
		return math.Inf(1)
	}
	return c / (-x + math.Sqrt(disc))
}

// best returns the kp ≤ kpMax with the largest ki, and that ki.
func (s *kiSearch) best(kpMax float64) (kp, ki float64) {
	const cells = 24
	at := 0
	for j := 0; j <= cells; j++ {
		if v := s.allowed(kpMax * float64(j) / cells); v > ki {
			ki, at = v, j
		}
	}
	lo := kpMax * math.Max(0, float64(at-1)) / cells
	hi := math.Min(kpMax, kpMax*float64(at+1)/cells)
	kp = maximumWithin(s.allowed, lo, hi, 1e-5*kpMax)
	if v := s.allowed(kp); v >= ki {
		return kp, v
	}
	return kpMax * float64(at) / cells, ki
}

// allowed is largestKi with what a PID has to keep besides: its integral time is
// at least four derivative times, without which the largest integral gain is
// bought with an ill-damped loop (Åström & Hägglund, Advanced PID Control, 2006;
// from memory).
func (s *kiSearch) allowed(kp float64) float64 {
	ki := s.largestKi(kp)
	if s.td > 0 {
		ki = math.Min(ki, kp/(4*s.td))
	}
	return ki
}

// finish judges what was found and takes ki back by the little that the grid may
// have missed.
func (s *kiSearch) finish(kp, ki float64) (Gains, error) {
	if !(ki > 0) || math.IsInf(ki, 1) {
		return Gains{}, refuse("no integral gain keeps Ms at or under %.4g here", 1/s.r)
	}
	for range 20 {
		g := candidate{kp: kp, ki: ki, td: s.td, filter: s.td / filterRatio}.gains(s.shape)
		m, err := JudgeFrequency(s.m, g)
		if err != nil {
			return Gains{}, err
		}
		over := float64(m.Ms)*s.r - 1
		if m.Stable && over <= 1e-6 {
			return g, nil
		}
		if !m.Stable {
			over = 0.05
		}
		kp *= 1 - 0.5*over
		ki *= 1 - 1.5*over - 1e-7
	}
	return Gains{}, refuse("no gains were found that keep Ms at or under %.4g", 1/s.r)
}
