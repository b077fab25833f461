package simrig

import (
	"math"
	"time"
)

// Truth is the rig's own physics as a linear model: what a fit should have
// found. Input: volts as the board counts them; output: rad/s at the motor
// shaft as the encoder sees it.
type Truth struct {
	// Num and Den are the plant from winding voltage to speed in descending
	// powers of s: second order, no zero,
	//
	//	K / (J·L·s² + (J·R + b·L)·s + b·R + K²)
	//
	// with b the slope of the friction torque at Speed.
	Num, Den []float64
	// DeadTime is the driver's, in s. Hold, compute delay and speed window are
	// not in it.
	DeadTime float64
	// Window is the length of the board's speed window in s; the speed that the
	// board reports is the mean over it.
	Window float64
	// ComputeDelay is the board's, in s.
	ComputeDelay float64

	Speed        float64 // rad/s at which the friction was linearised
	Gain         float64 // rad/s per V at frequency zero
	TimeConstant float64 // s, of the slowest pole
	// FirstOrderDead is the dead time in s that a first-order model with Gain and
	// TimeConstant needs: DeadTime and the time constant of the fast pole. With
	// complex poles no first-order model fits and it is DeadTime alone.
	FirstOrderDead float64
	// Resonance is the natural frequency of rotor against load in rad/s, 0 for a
	// rigid coupling. Num and Den are always those of the rigid rig.
	Resonance float64
	// OffsetVolts is the part of the drive at Speed that the linear model does
	// not explain: friction, load and dead band, in V.
	OffsetVolts float64

	// Breakaway voltages at the angle of the start, positive numbers, V. They
	// include the dead band.
	BreakawayForward, BreakawayReverse float64
}

// Truth linearises the rig at a speed in rad/s, at the present winding
// temperature. Its sign picks the direction of rotation; at 0 the direction is
// forward and the friction that of a crawl.
func (r *Rig) Truth(speed float64) Truth {
	m, d := &r.plant.motor, &r.plant.driver
	j := m.j + r.plant.joint.j
	dir := 1
	if speed < 0 {
		dir = -1
	}
	f := m.side(dir)
	w := math.Abs(speed)
	b := f.slope(w)
	scale := r.voltScale()
	if r.enc.reversed {
		scale = -scale
	}
	t := Truth{
		Num:          []float64{m.k * scale},
		Den:          []float64{j * m.l, j*m.r + b*m.l, b*m.r + m.k*m.k},
		DeadTime:     float64(d.delay) * 1e-9,
		Window:       float64(r.cfg.Board.Window) * float64(r.loop) * 1e-9,
		ComputeDelay: float64(r.cfg.Board.DelayUS) * 1e-6,
		Speed:        speed,
	}
	t.Gain = t.Num[0] / t.Den[2]
	t.TimeConstant = slowest(t.Den)
	t.FirstOrderDead, t.Resonance = t.DeadTime, resonance(&r.cfg)
	if t.Den[1]*t.Den[1] > 4*t.Den[0]*t.Den[2] {
		t.FirstOrderDead += t.Den[0] / t.Den[2] / t.TimeConstant
	}
	torque := float64(dir)*(f.coulomb+r.plant.joint.rub+f.excess(w)+f.viscous*w) + m.load
	drive := torque*m.r/m.k + m.k*speed
	t.OffsetVolts = (drive+math.Copysign(d.deadBand, drive))/math.Abs(scale) - speed/math.Abs(t.Gain)
	t.BreakawayForward = (math.Max(0, m.fwd.static+m.load)*m.r/m.k + d.deadBand) / math.Abs(scale)
	t.BreakawayReverse = (math.Max(0, m.rev.static-m.load)*m.r/m.k + d.deadBand) / math.Abs(scale)
	return t
}

// slowest is the longest time constant of the second-order polynomial
// d2·s² + d1·s + d0; for complex poles that of their envelope.
func slowest(d []float64) float64 {
	disc := d[1]*d[1] - 4*d[2]*d[0]
	if disc < 0 {
		return 2 * d[0] / d[1]
	}
	// 2·d0/(d1 + √disc) is the pole nearest to zero without cancellation.
	return (d[1] + math.Sqrt(disc)) / (2 * d[2])
}

// voltScale is how many volts the winding gets for one volt that the board
// believes it gives: a board that does not measure its bus works with the
// nominal voltage.
func (r *Rig) voltScale() float64 {
	if r.cfg.Sensors.Bus {
		return 1
	}
	return r.cfg.Supply.Volts / r.nominal()
}

// nominal is the bus voltage that the board reckons with where it measures none.
func (r *Rig) nominal() float64 { return r.cfg.Supply.Volts }

// Extremes returns what the rig has seen so far.
func (r *Rig) Extremes() Extremes {
	r.sync()
	e := r.plant.seen
	e.Turns = e.angle / (2 * math.Pi)
	e.Violations = append([]Violation(nil), e.Violations...)
	return e
}

// Speed is the true speed of the shaft in rad/s.
func (r *Rig) Speed() float64 { r.sync(); return r.plant.shaft.w }

// Angle is the true angle of the motor shaft in rad since power-on.
func (r *Rig) Angle() float64 { r.sync(); return r.plant.shaft.th }

// Powered reports whether the driver's output is on.
func (r *Rig) Powered() bool {
	r.sync()
	return r.plant.driver.now.on || len(r.plant.driver.queue) > 0
}

// Now is the console time to which the rig has been advanced.
func (r *Rig) Now() time.Duration { return time.Duration(r.now) }

// Config returns the file the rig was made from.
func (r *Rig) Config() Config { return r.cfg }
