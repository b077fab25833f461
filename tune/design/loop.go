package design

import (
	"fmt"
	"math"
	"math/cmplx"

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
	l.right, l.zero = model.RightHalfPlane(m.Poles())
	if g.Ki != 0 {
		l.zero++
	}
	l.corners(m, g)
	return l, nil
}

func (l *loop) corners(m model.Linear, g Gains) {
	l.lowest, l.highest = m.Corners()
	add := func(w float64) {
		if w > 0 && !math.IsInf(w, 0) {
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
	crossedHigh := false
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
		for i := n; i < len(pts); i++ {
			if pts[i].w > 3*l.highest && crossesNegative(pts[i-1].l, pts[i].l) && cmplx.Abs(pts[i].l) < 1 {
				crossedHigh = true
			}
		}
		if math.IsInf(l.end, 1) && l.finished(pts[len(pts)-1], crossedHigh) {
			return pts, nil
		}
	}
	return nil, fmt.Errorf("design: the loop turns too fast to be judged: more than %d frequencies are needed", scanPoints)
}

// finished tells whether a continuous loop only shrinks from p on.
func (l *loop) finished(p point, crossedHigh bool) bool {
	a := cmplx.Abs(p.l)
	if l.deadTime > 0 && crossedHigh && a < 0.9 {
		return true
	}
	return p.w > 1e4*l.highest
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
	want := math.Pi*float64(l.right) + math.Pi/2*float64(l.zero)
	return math.Abs(total-want) < math.Pi/4
}
