package forecast

import (
	"math"

	"gainwright/safety"
	"gainwright/tune/model"
)

// Bounds of the simulation.
const (
	stepLongest = 1e-3  // s
	stepsMost   = 20000 // for the whole plan; a longer one takes longer steps
	linePoints  = 2000  // of the line that is kept
)

// course is what one simulation found.
type course struct {
	top, far           float64 // rad/s, rad
	peak, energy, heat float64 // A, J, J; for the resistance known
	back               float64 // J, the most that the bus holds of what braking gave back
	last               float64 // rad/s at the end
	line               Line
}

// runner is one simulation under way.
type runner struct {
	s      *system
	ss     model.StateSpace
	x, dx  []float64
	free   bool // no friction, and no segment ends early
	c      course
	angle  float64
	now    float64
	speed  float64
	keep   float64 // s between points of the line
	rested float64 // s at rest so far
	bank   float64 // J given back and not drawn again
}

// run simulates the plan. free leaves out friction and early ends.
func (s *system) run(p safety.Plan, free bool) course {
	total := p.Duration().Seconds()
	r := &runner{s: s, ss: s.m.StateSpace(), free: free, keep: total / linePoints}
	r.x, r.dx = make([]float64, r.ss.N), make([]float64, r.ss.N)
	longest := math.Max(stepLongest, total/stepsMost)
	r.note(0)
	for _, seg := range p.Segments {
		n := int(math.Ceil(seg.Duration.Seconds()/longest - 1e-9))
		h := seg.Duration.Seconds() / float64(n)
		if seg.Mode == safety.ModeSpeed {
			r.closedLoop(seg, n, h)
		} else {
			r.openLoop(seg, n, h)
		}
	}
	r.c.last = r.speed
	return r.c
}

// note records the state at the present instant under a drive in V.
func (r *runner) note(drive float64) {
	r.c.top = math.Max(r.c.top, math.Abs(r.speed))
	r.c.far = math.Max(r.c.far, math.Abs(r.angle))
	l := &r.c.line
	seen := r.now + r.s.m.DeadTime
	if n := len(l.Time); n == 0 || seen-l.Time[n-1] >= r.keep*(1-1e-9) {
		l.Time, l.Speed, l.Drive = append(l.Time, seen), append(l.Speed, r.speed), append(l.Drive, drive)
	}
}

// power adds the step h under a drive, from the speed before it.
func (r *runner) power(drive, before, h float64) {
	ohm := r.s.k.Resistance
	if ohm <= 0 {
		return
	}
	winding := math.Copysign(math.Max(0, math.Abs(drive)-r.s.k.DeadBand), drive)
	current := (winding - r.s.ke*before) / ohm
	if !r.s.tauKnown && !r.s.locked {
		// Without the time constant the course of the speed is not known either:
		// a stalled start, or a reversal at full back-EMF, is the bound.
		current = drive / ohm
		if drive*before < 0 {
			current = (drive - r.s.ke*before) / ohm
		}
	}
	r.c.peak = math.Max(r.c.peak, math.Abs(current))
	r.c.heat += current * current * ohm * h
	r.c.energy += math.Max(0, drive*current) * h
	r.bank = math.Max(0, r.bank-drive*current*h)
	r.c.back = math.Max(r.c.back, r.bank)
}

func (r *runner) openLoop(seg safety.Segment, n int, h float64) {
	e, g := r.ss.Hold(h)
	from := r.angle
	r.rested = 0
	more := r.pattern(seg, h)
	for i := range n {
		drive := seg.From + (seg.To-seg.From)*(float64(i)+0.5)/float64(n) + more(i)
		before := r.speed
		r.advance(e, g, drive)
		r.power(drive, before, h)
		r.angle += (before + r.speed) / 2 * h
		r.now += h
		r.note(drive)
		if !r.free && r.over(seg, from, h) {
			return
		}
	}
}

// advance moves the motor by one step under a drive.
func (r *runner) advance(e, g []float64, drive float64) {
	if r.s.locked {
		return
	}
	v, held := r.net(drive)
	if held {
		clear(r.x)
		r.speed = 0
		return
	}
	n := r.ss.N
	for i := range n {
		d := g[i] * v
		for j := range n {
			d += e[i*n+j] * r.x[j]
		}
		r.dx[i] = d
	}
	y := r.ss.D * v
	for i := range n {
		r.x[i] += r.dx[i]
		y += r.ss.C[i] * r.x[i]
	}
	if !r.free && r.speed*y < 0 { // friction stops a shaft, it does not turn it round
		clear(r.x)
		y = 0
	}
	r.speed = y
}

// net returns the drive less dry friction, and whether friction holds the shaft.
func (r *runner) net(drive float64) (float64, bool) {
	k := r.s.k
	switch {
	case r.free:
		return drive, false
	case r.speed > 0:
		return drive - k.CoulombForward, false
	case r.speed < 0:
		return drive + k.CoulombReverse, false
	case drive > math.Max(k.BreakawayForward, k.CoulombForward):
		return drive - k.CoulombForward, false
	case drive < -math.Max(k.BreakawayReverse, k.CoulombReverse):
		return drive + k.CoulombReverse, false
	}
	return 0, true
}

// over tells whether the segment's own condition ends it.
func (r *runner) over(seg safety.Segment, from, h float64) bool {
	switch seg.Until.Kind {
	case safety.UntilMotion:
		count := r.s.k.RadPerCount
		return count > 0 && math.Abs(r.angle-from) >= float64(seg.Until.Counts)*count
	case safety.UntilRest:
		if math.Abs(r.speed) > 1e-3*r.c.top {
			r.rested = 0
			return false
		}
		r.rested += h
		return r.rested >= safety.RestHold.Seconds()
	}
	return false
}

// closedLoop lets the speed follow the setpoint with the lag of the board's loop
// and finds the drive that this takes.
func (r *runner) closedLoop(seg safety.Segment, n int, h float64) {
	follow := 1.0
	if tau := r.s.k.LoopTau; tau > 0 {
		follow = -math.Expm1(-h / tau)
	}
	from := r.angle
	r.rested = 0
	for i := range n {
		r0 := seg.From + (seg.To-seg.From)*float64(i+1)/float64(n)
		before := r.speed
		r.speed += follow * (r0 - r.speed)
		if r.s.locked {
			r.speed = 0
		}
		drive := r.s.driveFor(r.speed, (r.speed-before)/h)
		r.power(drive, before, h)
		r.angle += (before + r.speed) / 2 * h
		r.now += h
		r.note(drive)
		r.c.top = math.Max(r.c.top, math.Max(math.Abs(seg.From), math.Abs(r0))*(1+r.s.k.LoopOvershoot))
		if !r.free && r.over(seg, from, h) {
			return
		}
	}
}

// driveFor returns the drive in V for a speed and an acceleration in rad/s².
func (s *system) driveFor(speed, acceleration float64) float64 {
	v := 0.0
	switch {
	case speed > 0:
		v = s.k.CoulombForward
	case speed < 0:
		v = -s.k.CoulombReverse
	}
	if s.gain == 0 {
		return v + acceleration/s.slope
	}
	tau := 0.0
	if s.tauKnown {
		tau = s.tau
	}
	return v + (speed+tau*acceleration)/s.gain
}
