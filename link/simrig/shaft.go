package simrig

import "math"

// shaft is the state of winding and rotor. dir is the sign of the speed while it
// turns and 0 while static friction holds it.
type shaft struct {
	m      *motor
	i, w   float64 // A, rad/s
	th     float64 // rad since power-on
	dir    int
	locked bool    // a jammed shaft: nothing turns it
	twist  float64 // N·m that an elastic coupling takes off the rotor
	free   bool    // load and gravity act beyond that coupling
}

// pair holds the propagators of both directions for one step length, and the
// bus's for that length and half of it.
type pair struct {
	h          float64
	fwd, rev   propagator
	full, half span
}

func (m *motor) pair(h float64) pair {
	return pair{h: h, fwd: m.propagate(h, 1), rev: m.propagate(h, -1)}
}

// step carries the shaft over p.h seconds under the voltage v, or with the
// winding open (current zero). Within one direction of rotation it is exact but
// for the curvature of the Stribeck excess and of gravity, which are taken to
// second order; a step in which the shaft stops, starts or turns round is split
// at that instant.
func (s *shaft) step(p *pair, v float64, open bool) {
	if s.dir != 0 {
		pr := &p.fwd
		if s.dir < 0 {
			pr = &p.rev
		}
		if i, w := s.glide(pr, v, open); w*float64(s.dir) > 0 {
			s.th += p.h / 2 * (s.w + w)
			s.i, s.w = i, w
			return
		}
	}
	s.split(p.h, v, open)
}

// torque is what acts on the turning rotor beside K·i and viscous friction, in
// N·m, at speed w and angle th while it turns in direction s.dir.
func (s *shaft) torque(w, th float64) float64 {
	d := float64(s.dir)
	f := s.m.side(s.dir)
	return -d*(f.coulomb+f.excess(math.Abs(w))) - s.pull(th)
}

// pull is the active torque against the rotor, in N·m.
func (s *shaft) pull(th float64) float64 {
	if s.free {
		return s.twist
	}
	return s.m.pull(th)
}

// glide returns current and speed after pr.h seconds of uninterrupted rotation:
// the linear part exactly, the rest by the second-order exponential scheme of
// Cox and Matthews (J. Comput. Phys. 176, 2002, ETD2RK; from memory).
func (s *shaft) glide(pr *propagator, v float64, open bool) (i, w float64) {
	g0 := s.torque(s.w, s.th) / s.m.j
	if open {
		w = pr.coast*s.w + pr.coastP*g0
	} else {
		gv := v / s.m.l
		i = pr.e11*s.i + pr.e12*s.w + pr.p11*gv + pr.p12*g0
		w = pr.e21*s.i + pr.e22*s.w + pr.p21*gv + pr.p22*g0
	}
	if w*float64(s.dir) < 0 {
		return i, w // the caller splits the step anyway
	}
	if reach := 7 * s.m.side(s.dir).stribeck; s.m.gravity == 0 && math.Abs(w) > reach && math.Abs(s.w) > reach {
		return i, w // the torque is the same at both ends
	}
	dg := s.torque(w, s.th+pr.h/2*(s.w+w))/s.m.j - g0
	if dg == 0 {
		return i, w
	}
	if open {
		return 0, w + pr.coastQ*dg
	}
	return i + pr.q12*dg, w + pr.q22*dg
}

// split carries the shaft over h seconds in pieces that end where it stops,
// breaks away or turns round.
func (s *shaft) split(h, v float64, open bool) {
	if open {
		s.i = 0
	}
	for range 16 { // a hover at the edge of breakaway would go on for ever
		if h <= 0 {
			return
		}
		if s.dir == 0 {
			h -= s.stick(h, v, open)
			continue
		}
		pr := s.m.propagate(h, s.dir)
		i, w := s.glide(&pr, v, open)
		if w*float64(s.dir) > 0 {
			s.th += h / 2 * (s.w + w)
			s.i, s.w = i, w
			return
		}
		t := s.crossing(h, v, open)
		pr = s.m.propagate(t, s.dir)
		i, _ = s.glide(&pr, v, open)
		s.th += t / 2 * s.w
		s.i, s.w = i, 0
		h -= t
		s.dir = s.release()
		if t == 0 {
			break
		}
	}
	s.w, s.dir = 0, 0
	if h > 0 && !open {
		rest := v / s.m.r
		s.i = rest + (s.i-rest)*math.Exp(-h*s.m.r/s.m.l)
	}
}

// crossing finds the instant in (0, h] at which a shaft that turns now has come
// to rest, by bisection on the exact step.
func (s *shaft) crossing(h, v float64, open bool) float64 {
	lo, hi := 0.0, h
	for hi-lo > 1e-12 {
		mid := (lo + hi) / 2
		pr := s.m.propagate(mid, s.dir)
		if _, w := s.glide(&pr, v, open); w*float64(s.dir) > 0 {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo
}

// release says in which direction the shaft at rest is driven away, 0 if static
// friction holds it.
func (s *shaft) release() int {
	net := s.m.k*s.i - s.pull(s.th)
	switch {
	case s.locked:
		return 0
	case net > s.m.fwd.static:
		return 1
	case net < -s.m.rev.static:
		return -1
	}
	return 0
}

// stick carries a held shaft over at most h seconds and returns how long it was
// held. The current settles exactly; where the torque passes static friction on
// the way, the instant follows in closed form.
func (s *shaft) stick(h, v float64, open bool) float64 {
	s.w = 0
	if s.dir = s.release(); s.dir != 0 {
		return 0
	}
	if open {
		s.i = 0
		s.dir = s.release()
		if s.dir != 0 {
			return 0
		}
		return h
	}
	rest, from := v/s.m.r, s.i
	s.i = rest + (from-rest)*math.Exp(-h*s.m.r/s.m.l)
	dir := s.release()
	if dir == 0 {
		return h
	}
	edge := (s.m.fwd.static + s.pull(s.th)) / s.m.k
	if dir < 0 {
		edge = (-s.m.rev.static + s.pull(s.th)) / s.m.k
	}
	s.dir, s.i = dir, edge
	t := -s.m.l / s.m.r * math.Log((edge-rest)/(from-rest))
	return min(max(t, 0), h)
}

// still reports whether nothing would change however long it is left under v.
func (s *shaft) still(v float64, open bool) bool {
	return s.dir == 0 && s.i == 0 && (open || v == 0) && s.release() == 0
}
