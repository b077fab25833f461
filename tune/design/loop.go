package design

import (
	"fmt"
	"math"
	"math/cmplx"
	"sort"

	"gainwright/tune/model"
)

// loop is the open loop L = G·C of a model and gains, as a frequency response.
type loop struct {
	plant      func(w float64) complex128 // with hold, compute delay and dead time
	controller func(w float64) complex128
	lowest     float64 // rad/s, lowest corner of plant and controller
	highest    float64 // rad/s, highest corner
	end        float64 // rad/s, π/h of a sampled loop; +Inf of a continuous one
	deadTime   float64 // s, all of it: bounds the turn of the phase per rad/s
	right      int     // open-loop poles that are unstable
	zero       int     // open-loop poles at the origin (z = 1)
	resonances []float64
}

func (l *loop) at(w float64) complex128 { return l.plant(w) * l.controller(w) }

// newLoop checks m and g and builds their loop; g may be in any form.
func newLoop(m model.Linear, g Gains) (*loop, error) {
	if err := m.Validate(); err != nil {
		return nil, err
	}
	if err := g.Validate(); err != nil {
		return nil, err
	}
	if m.Num[len(m.Num)-1] == 0 {
		return nil, fmt.Errorf("%w: num ends in 0: the speed does not follow a steady drive, so no speed loop can hold it", model.ErrModel)
	}
	g = g.Parallel()
	if g.Kp == 0 && g.Ki == 0 && g.Kd == 0 {
		return nil, badGains("kp, ki and kd are all 0: there is no loop to judge")
	}
	l := &loop{controller: g.response(), end: math.Inf(1), deadTime: m.DeadTime + g.ComputeDelay}
	if g.SampleTime > 0 {
		d, err := m.Sample(g.SampleTime, g.ComputeDelay)
		if err != nil {
			return nil, err
		}
		pulse := d.Pulse()
		l.plant, l.end = pulse.At, math.Pi/g.SampleTime
	} else {
		p := m
		p.DeadTime = l.deadTime
		l.plant = p.At
	}
	poles := m.Poles()
	l.right, l.zero = model.RightHalfPlane(poles)
	for _, p := range poles {
		if imag(p) > 0 {
			l.resonances = append(l.resonances, cmplx.Abs(p))
		}
	}
	if g.Ki != 0 {
		l.zero++
	}
	l.corners(m, g)
	return l, nil
}

func (l *loop) corners(m model.Linear, g Gains) {
	m.DeadTime = 0 // the whole of it counts, below
	l.lowest, l.highest = m.Corners()
	// A corner a million times above the motor's own matters to no margin: a
	// loop that could reach it would have a gain margin as large.
	ceiling := 1e6 * l.highest
	add := func(w float64) {
		if w = math.Min(w, ceiling); w > 0 {
			l.lowest, l.highest = math.Min(l.lowest, w), math.Max(l.highest, w)
		}
	}
	if l.deadTime > 0 {
		add(1 / l.deadTime)
	}
	if g.Kp != 0 {
		add(math.Abs(g.Ki / g.Kp))
		if g.Kd != 0 {
			add(math.Abs(g.Kp / g.Kd))
		}
	}
	if g.Kd != 0 {
		add(math.Sqrt(math.Abs(g.Ki / g.Kd)))
		if g.DerivativeFilter > 0 {
			add(1 / g.DerivativeFilter)
		}
	}
	l.lowest = math.Min(l.lowest, l.end)
	l.highest = math.Min(l.highest, l.end)
}

// response returns C(jω), or C(e^(jωh)) of the sampled law; g is parallel.
func (g Gains) response() func(w float64) complex128 {
	kp, ki, kd := complex(g.Kp, 0), complex(g.Ki, 0), complex(g.Kd, 0)
	h, tf := g.SampleTime, g.DerivativeFilter
	if h == 0 {
		return func(w float64) complex128 {
			c := kp + complex(0, -g.Ki/w)
			if kd != 0 {
				s := complex(0, w)
				c += kd * s / (1 + complex(tf, 0)*s)
			}
			return c
		}
	}
	ch, ctf := complex(h, 0), complex(tf, 0)
	return func(w float64) complex128 {
		// back = 1 − z⁻¹ without cancellation, shift = z⁻¹.
		sin, cos := math.Sincos(w * h / 2)
		half := complex(cos, -sin)
		back := complex(0, 2*sin) * half
		shift := half * half
		c := kp
		switch g.Discretisation {
		case ForwardEuler:
			c += ki * ch * shift / back
			if kd != 0 {
				c += kd * back / (ctf*back + ch*shift)
			}
		case Tustin:
			c += ki * ch / 2 * (1 + shift) / back
			if kd != 0 {
				c += 2 * kd * back / (2*ctf*back + ch*(1+shift))
			}
		default: // backward Euler; the incremental law is the same filter
			c += ki * ch / back
			if kd != 0 {
				c += kd * back / (ctf*back + ch)
			}
		}
		return c
	}
}

// point is one frequency of a scan.
type point struct {
	w float64
	l complex128
}

// Limits of a scan. The steps keep the turn between neighbours well under a
// right angle, so that no crossing and no encirclement is missed.
const (
	scanRatio    = 1.05   // largest ratio of neighbouring frequencies
	scanTurn     = 0.35   // rad, largest turn of L and of 1 + L between neighbours
	scanPoints   = 200000 // a loop that needs more is given up as not judged
	scanDepth    = 24     // halvings of one step
	startTurnTol = 0.02   // rad, from the limit ω → 0
)

// scan returns the loop at rising frequencies, from where its low-frequency
// asymptote holds to where nothing more can happen.
func (l *loop) scan() ([]point, error) {
	w := l.start()
	pts := make([]point, 0, 1024)
	pts = append(pts, point{w, l.at(w)})
	tail := l.tail()
	for len(pts) < scanPoints {
		prev := pts[len(pts)-1]
		if prev.w >= l.end {
			return pts, nil
		}
		next := prev.w * scanRatio
		if l.deadTime > 0 {
			next = math.Min(next, prev.w+scanTurn/l.deadTime)
		}
		if next > l.end*(1-1e-9) {
			next = l.end
		}
		n := len(pts)
		pts = l.refine(pts, prev, point{next, l.at(next)}, scanDepth)
		if tail != nil && tail.over(pts, n) {
			return pts, nil
		}
	}
	return nil, fmt.Errorf("design: the loop turns too fast to be judged: more than %d frequencies are needed", scanPoints)
}

// tail knows how large a continuous loop can still become.
type tail struct {
	w, top  []float64 // top[i] is the largest |L| from w[i] on
	deadEnd bool      // the loop has dead time and crosses the real axis for ever
	at      int
	crossed float64 // largest |L| below 1 at which the scan crossed the negative axis
	nearest float64 // least |1 + L| so far
}

// tail returns nil for a sampled loop, which ends at π/h.
func (l *loop) tail() *tail {
	if !math.IsInf(l.end, 1) {
		return nil
	}
	t := &tail{deadEnd: l.deadTime > 0, nearest: math.Inf(1)}
	for w := l.lowest * 0.1; w < 2e4*l.highest; w *= 1.15 {
		t.w = append(t.w, w)
	}
	t.w = append(t.w, l.resonances...)
	sort.Float64s(t.w)
	t.top = make([]float64, len(t.w))
	top := 0.0
	for i := len(t.w) - 1; i >= 0; i-- {
		top = math.Max(top, cmplx.Abs(l.at(t.w[i])))
		t.top[i] = top
	}
	return t
}

// over takes in the points from n on and tells whether nothing that follows can
// change a margin: the rest of |L| is below 1, below what set the gain margin, and
// too small to come closer to −1. Without dead time the phase has settled at the
// end of the tail.
func (t *tail) over(pts []point, n int) bool {
	for i := n; i < len(pts); i++ {
		p := pts[i]
		t.nearest = math.Min(t.nearest, cmplx.Abs(1+p.l))
		if a := cmplx.Abs(p.l); a < 1 && crossesNegative(pts[i-1].l, p.l) {
			t.crossed = math.Max(t.crossed, a)
		}
	}
	w := pts[len(pts)-1].w
	for t.at < len(t.w) && t.w[t.at] <= w {
		t.at++
	}
	if t.at == len(t.w) {
		return true
	}
	rest := t.top[max(0, t.at-1)]
	return t.deadEnd && rest < 0.95*t.crossed && rest < math.Max(0.98*(1-t.nearest), 1e-9)
}

// refine appends the points after a up to b, halving until each turn is small.
func (l *loop) refine(pts []point, a, b point, depth int) []point {
	if depth > 0 && (turn(a.l, b.l) > scanTurn || turn(1+a.l, 1+b.l) > scanTurn) {
		mid := a.w + (b.w-a.w)/2
		if mid > a.w && mid < b.w {
			m := point{mid, l.at(mid)}
			pts = l.refine(pts, a, m, depth-1)
			return l.refine(pts, m, b, depth-1)
		}
	}
	return append(pts, b)
}

// start returns a frequency below every corner at which the phase of 1 + L has
// come to its limit.
func (l *loop) start() float64 {
	w := l.lowest * 0.01
	for range 60 {
		phase := cmplx.Phase(1 + l.at(w))
		if math.Abs(math.Remainder(phase, math.Pi/2)) < startTurnTol {
			break
		}
		w /= 4
	}
	return w
}

// turn returns the magnitude of the angle from a to b in rad.
func turn(a, b complex128) float64 { return math.Abs(cmplx.Phase(b * cmplx.Conj(a))) }

func crossesNegative(a, b complex128) bool {
	return real(a) < 0 && real(b) < 0 && imag(a) > 0 != (imag(b) > 0)
}

// stable applies the principle of the argument: with L strictly decreasing at
// the end of the scan, the closed loop has no unstable pole exactly when 1 + L
// turns by π for each unstable open-loop pole and by π/2 for each at the
// origin, from ω → 0 to the end (Nyquist; the form for dead time is that of
// Mikhailov, from memory). The sampled loop obeys the same count on the upper
// half of the unit circle.
func (l *loop) stable(pts []point) bool {
	last := pts[len(pts)-1].l
	if math.IsInf(l.end, 1) && cmplx.Abs(last) >= 1 {
		return false
	}
	var total float64
	for i := 1; i < len(pts); i++ {
		total += cmplx.Phase((1 + pts[i].l) * cmplx.Conj(1+pts[i-1].l))
	}
	if math.IsInf(l.end, 1) {
		total -= cmplx.Phase(1 + last) // |L| stays below 1, so this is all that is left to L = 0
	}
	want := math.Pi*float64(l.right) + math.Pi/2*float64(l.zero)
	return math.Abs(total-want) < math.Pi/4
}
