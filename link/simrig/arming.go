package simrig

import "gainwright/protocol"

// arming is the one-time number, the token and the heartbeats of an arm.
type arming struct {
	number   uint32
	numberAt int64
	fresh    bool
	given    []uint32 // every number given out; only the faulty board looks
	token    uint16
	armed    bool
	k        uint16
	beatAt   int64 // ns of the last heartbeat accepted
	driveAt  int64 // ns of the last drive line accepted, or of the arm
}

// numberLife is how long a one-time number is good; lapse how long an arm holds
// without a drive line. In ns.
const (
	numberLife = int64(2e9)
	lapse      = int64(60e9)
)

// void ends an arm with its token and any one-time number.
func (a *arming) void() { a.armed, a.fresh, a.token = false, false, 0 }

func (r *Rig) doNonce(args []string, a *answer) {
	if len(args) != 0 {
		a.no(protocol.RefArgument)
		return
	}
	m := &r.board.arm
	m.number, m.numberAt, m.fresh = r.random.Uint32(), r.now, true
	if r.wrong[FaultOldNumber] {
		m.given = append(m.given, m.number)
	}
	a.ok(hex32(m.number))
}

// doArm: arm <one-time number> <crc of the limits> → <token>. A number is used
// up by the attempt, whatever comes of it.
func (r *Rig) doArm(args []string, a *answer) {
	b := &r.board
	m := &b.arm
	number, ok1 := protocol.ParseHex32([]byte(argument(args, 0)))
	crc, ok2 := protocol.ParseHex16([]byte(argument(args, 1)))
	good := m.fresh && number == m.number && r.now-m.numberAt <= numberLife
	if r.wrong[FaultOldNumber] {
		for _, n := range m.given {
			good = good || n == number
		}
	}
	m.fresh = false
	switch {
	case !ok1 || !ok2 || len(args) != 2:
		a.no(protocol.RefArgument)
	case b.trip != protocol.CauseNone:
		a.no(protocol.RefTripped)
	case b.state != protocol.Off:
		a.no(protocol.RefState)
	case !good:
		a.no(protocol.RefOldNumber)
	case !b.limits.inUse || crc != b.limits.crc():
		a.no(protocol.RefLimits)
	case r.interlock() != protocol.CauseNone:
		a.no(protocol.RefInterlock)
	case !r.atRest():
		a.no(protocol.RefMoving)
	default:
		m.token = uint16(1 + r.random.IntN(65535))
		m.armed, m.k = true, 0
		m.beatAt, m.driveAt = r.now, r.now
		b.state = protocol.Armed
		a.ok(hex16(m.token))
	}
}

func (r *Rig) doDisarm(args []string, a *answer) {
	if len(args) != 0 {
		a.no(protocol.RefArgument)
		return
	}
	r.halt(protocol.CauseDisarmed, r.now)
	a.ok()
}

func (r *Rig) doRamp(args []string, a *answer) {
	b := &r.board
	token, ok := protocol.ParseHex16([]byte(argument(args, 0)))
	switch {
	case !r.cfg.Board.Ramp:
		a.no(protocol.RefNotHere)
	case !ok || len(args) != 1:
		a.no(protocol.RefArgument)
	case !b.state.Moving():
		a.no(protocol.RefState)
	case !b.arm.armed || token != b.arm.token:
		a.no(protocol.RefToken)
	default:
		if b.state != protocol.Ramping {
			m := ramp{from: r.now, still: r.now, loop: b.state == protocol.Looping, value: b.run.drive}
			if m.loop {
				m.value = b.run.setpoint
			}
			b.run.ramp, b.run.exper, b.state = m, exper{}, protocol.Ramping
		}
		a.ok("ramping")
	}
}

// doReset clears a latched trip once its cause is gone.
func (r *Rig) doReset(args []string, a *answer) {
	b := &r.board
	switch {
	case len(args) != 0:
		a.no(protocol.RefArgument)
	case b.state == protocol.Armed || b.state.Moving():
		a.no(protocol.RefState)
	case b.trip != protocol.CauseNone && r.causeStands():
		a.no(protocol.RefInterlock)
	case b.trip != protocol.CauseNone && !r.atRest():
		a.no(protocol.RefMoving)
	default:
		b.trip, b.state = protocol.CauseNone, protocol.Off
		a.ok()
	}
}

// causeStands reports whether the latched trip would come again at once.
func (r *Rig) causeStands() bool {
	b := &r.board
	switch b.trip {
	case protocol.CauseInterlock, protocol.CauseEStop:
		return r.interlock() != protocol.CauseNone
	case protocol.CauseBusHigh:
		return b.busV > float64(b.limits.value(limBusMax))
	case protocol.CauseBusLow:
		return b.busV < float64(b.limits.value(limBusMin))
	case protocol.CauseTemp:
		return r.plant.winding.celsius > r.cfg.Motor.CelsMax
	case protocol.CauseHeat:
		return b.heat > float64(b.limits.value(limHeat))
	}
	return false
}

// drive works off a line of motion: dv, ds or hb. It has no answer.
func (r *Rig) drive(c protocol.Command) {
	b := &r.board
	m := &b.arm
	if len(c.Args) < 1 || !m.armed {
		return
	}
	token, ok := protocol.ParseHex16(c.Args[0])
	if !ok || token != m.token || !protocol.Newer(c.N, m.k) {
		return
	}
	if c.Verb == protocol.VerbBeat {
		if len(c.Args) == 1 {
			r.beat(c.N)
		}
		return
	}
	if len(c.Args) != 2 {
		return
	}
	value, ok := protocol.ParseInt(c.Args[1])
	if !ok {
		return
	}
	closed := c.Verb == protocol.VerbSpeed
	if b.state == protocol.Looping && !closed || b.state == protocol.Driving && closed {
		return
	}
	r.beat(c.N)
	m.driveAt = r.now
	r.follow(closed, float32(value)/1000)
}

func (r *Rig) beat(k uint16) {
	m := &r.board.arm
	m.k, m.beatAt = k, r.now
}

// follow takes a new drive value, and begins the run with the first.
func (r *Rig) follow(closed bool, value float32) {
	b := &r.board
	slot, cause := limVolts, protocol.CauseVolts
	if closed {
		slot, cause = limSpeed, protocol.CauseSpeed
	}
	around := float32(0) // what an experiment adds and takes away
	if !closed {
		around = b.run.exper.amp
	}
	if limit := b.limits.value(slot); value+around > limit || value-around < -limit ||
		around > 0 && r.cfg.Driver.Quadrants != 4 && value < around {
		r.halt(cause, r.now)
		return
	}
	if b.state == protocol.Armed {
		b.run = run{from: r.now, counts: b.counts}
		b.run.judge.counts = b.counts
		b.law = b.gains.law(&r.cfg)
		b.state = protocol.Driving
		if closed {
			b.state = protocol.Looping
		}
		b.cap.trigger()
	}
	if closed {
		b.run.setpoint = value
	} else {
		b.run.target = value
	}
}
