package simrig

import (
	"math"

	"gainwright/protocol"
)

// pins is the drive order as the board puts it out, before the driver's dead
// time; it keeps the integral for the mean that telemetry and capture report.
type pins struct {
	volts    float32
	next     float32 // under way in the compute delay
	nextAt   int64
	pending  bool
	last     int64
	integral float64 // V·ns up to last
}

// accrue integrates the order up to the instant t.
func (p *pins) accrue(t int64) {
	if p.pending && p.nextAt <= t {
		p.integral += float64(p.volts) * float64(p.nextAt-p.last)
		p.volts, p.last, p.pending = p.next, p.nextAt, false
	}
	p.integral += float64(p.volts) * float64(t-p.last)
	p.last = t
}

// set orders v volts from the instant t on, which is at most a loop period ahead.
func (p *pins) set(v float32, t int64) {
	p.next, p.nextAt, p.pending = v, t, true
}

// off orders nothing from the instant t on.
func (p *pins) off(t int64) {
	p.accrue(t)
	p.volts, p.pending = 0, false
}

// mean is a reader's place in the integral: since when it has not reported.
type mean struct {
	from     int64
	integral float64
}

// since returns the mean order since the last call.
func (m *mean) since(p *pins) float64 {
	dt := p.last - m.from
	v := float64(p.volts)
	if dt > 0 {
		v = (p.integral - m.integral) / float64(dt)
	}
	m.from, m.integral = p.last, p.integral
	return v
}

// run is what has happened since the first drive line of a run.
type run struct {
	from     int64 // ns of the first drive line
	counts   int64 // at the first drive line
	target   float32
	setpoint float32
	drive    float32 // open-loop volts after the slew limit
	asked    bool
	duty     float64
	ramp     ramp
	judge    judge
	exper    exper
}

// onTick is one loop period: latch, judge, control, report.
func (r *Rig) onTick() {
	b := &r.board
	now := r.now
	if !b.booted {
		r.enc.look(r.plant.sensed(r.enc.onLoad))
		r.wake()
		return
	}
	r.plant.noteSpan()
	r.latch()
	b.pins.accrue(now)
	if b.state == protocol.Armed || b.state.Moving() {
		r.judge()
	}
	switch b.state {
	case protocol.Driving:
		r.openLoop()
	case protocol.Looping:
		r.closedLoop(b.run.setpoint)
	case protocol.Ramping:
		r.ramping()
	}
	r.capture()
	r.report()
}

// latch takes counts and measured values.
func (r *Rig) latch() {
	b := &r.board
	r.enc.look(r.plant.sensed(r.enc.onLoad))
	b.counts = r.enc.count()
	travelled := b.window.push(b.counts)
	b.speed = float32(travelled) * float32(r.speedStep)
	if d := b.counts - b.restCount; d >= 2 || d <= -2 {
		b.restCount, b.movedAt = b.counts, r.now
	}
	if r.cfg.Sensors.Current {
		b.amps = r.current.read(r.plant.shaft.i, r.noise)
	}
	if r.cfg.Sensors.Bus {
		b.busV = r.busSensor.read(r.plant.supply.bus, r.noise)
	}
}

// reach is the most volts that the drive can be given now, for either sign.
func (r *Rig) reach() float32 { return float32(max(r.board.busV, 0)) }

// order puts u volts out: through the compute delay to the pins, and on to the
// driver. What the bus cannot give is clipped and flagged.
func (r *Rig) order(u float32) float32 {
	b := &r.board
	now := r.now
	bus := float64(r.reach())
	if bus <= 0 {
		bus = r.nominal()
	}
	duty := float64(u) / bus
	if b.run.asked && duty == b.run.duty {
		return u
	}
	got, clipped := r.plant.driver.ask(now+r.compute, duty)
	if clipped {
		b.clipped = true
	}
	b.run.asked, b.run.duty = !clipped, duty
	u = float32(got * bus)
	b.pins.set(u, now+r.compute)
	return u
}

// openLoop follows the drive value, no faster than the slew limit.
func (r *Rig) openLoop() {
	b := &r.board
	step := float32(math.Inf(1))
	if s := b.limits.value(limSlew); s > 0 {
		step = s * float32(r.loop) * 1e-9
	}
	d := b.run.exper.step(b.run.target, b.speed) - b.run.drive
	b.run.drive += min(max(d, -step), step)
	r.order(b.run.drive)
}

// closedLoop runs the control law towards the setpoint.
func (r *Rig) closedLoop(setpoint float32) {
	b := &r.board
	limit := min(b.limits.value(limVolts), r.reach())
	low := -limit
	if r.cfg.Driver.Quadrants != 4 {
		low = 0
	}
	u, clipped := b.law.step(setpoint, b.speed, low, limit)
	if clipped {
		b.clipped = true
	}
	r.order(u)
}

// ramp brings the drive to rest.
type ramp struct {
	from  int64
	value float32 // setpoint or volts at the start
	loop  bool
	still int64 // ns since which the speed is about zero
}

// Time for a ramp and cut: the setpoint falls to zero in rampNS; the shaft has
// to rest rampLimit after its start.
const (
	rampNS    = int64(500e6)
	rampLimit = int64(2e9)
	rampStill = int64(50e6)
)

func (r *Rig) ramping() {
	b := &r.board
	m := &b.run.ramp
	t := r.now - m.from
	left := float32(max(0, rampNS-t)) / float32(rampNS)
	if m.loop {
		r.closedLoop(m.value * left)
	} else {
		b.run.drive = m.value * left
		r.order(b.run.drive)
	}
	quiet := math.Abs(float64(b.speed)) <= 2*r.speedStep
	switch {
	case t < rampNS || !quiet:
		m.still = r.now
	case r.now-m.still >= rampStill:
		r.halt(protocol.CauseRamped, r.now)
		return
	}
	if t > rampLimit {
		r.halt(protocol.CauseNotAtRest, r.now)
	}
}
