package sim

import (
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/protocol/si"
	"gainwright/safety"
)

// message is one line, or one cut byte, on its way to the board.
type message struct {
	kind  msgKind
	id    int // of an arm: which one-time number it echoes
	k     int // counts drive values and heartbeats
	mode  safety.Mode
	value float64
	relay float64 // rad/s, of a pattern
}

type msgKind uint8

const (
	msgCut msgKind = iota
	msgRamp
	msgArm
	msgDrive
	msgBeat
	msgDisarm
	msgReset
	msgPattern
)

// motor is a one-pole shaft in closed form: between two looks at it the drive is
// constant and ω(t) = ω∞ + (ω − ω∞)·e^(−t/τ).
type motor struct {
	gain, tau, coast float64 // rad/s per V; s under power; s with the output off
	deadBand         float64 // V
	r, ke            float64
	speed, turns     float64 // rad/s, turns
	locked           bool
}

// advance moves the shaft by dt seconds with volts applied, or coasting.
func (m *motor) advance(dt, volts float64, powered bool) {
	if m.locked {
		m.speed = 0
		return
	}
	end, tau := 0.0, m.coast
	if powered {
		tau = m.tau
		end = m.gain * math.Copysign(math.Max(0, math.Abs(volts)-m.deadBand), volts)
	}
	decay := math.Exp(-dt / tau)
	m.turns += (end*dt + (m.speed-end)*tau*(1-decay)) / (2 * math.Pi)
	m.speed = end + (m.speed-end)*decay
	if end == 0 && math.Abs(m.speed) < 0.05 {
		m.speed = 0
	}
}

// board is the far end of the wire: it arms, drives, obeys cuts, keeps its
// timeout and tells what it sees. Faults bend it.
type board struct {
	motor
	at      time.Duration // the motor is known up to here
	born    time.Duration // board time 0 on the world's clock
	boots   uint16
	state   protocol.State
	trip    protocol.Cause
	mode    safety.Mode
	target  float64
	swing   float64 // V about target, of a pattern
	relay   float64 // rad/s at which it switches
	volts   float64
	token   int // id of the arm that is good
	used    int // newest arm id seen
	k       int
	beat    time.Duration
	timeout time.Duration
	offWhy  protocol.Cause
	since   time.Duration // last heartbeat accepted to output off, of the last stop

	counts  int64 // as reported
	sampled time.Duration
	sampleT float64
}

const countsPerTurn = 2000

func (b *board) powered() bool { return b.state.Moving() }

// advance brings the board to now. It is called at least every boardStep.
func (b *board) advance(now time.Duration, f Fault) {
	if now <= b.at {
		return
	}
	dt := (now - b.at).Seconds()
	b.motor.locked = f == Stall
	if f == Loose {
		b.motor.tau = looseTau
	} else {
		b.motor.tau = heldTau
	}
	b.motor.advance(dt, b.volts, b.powered())
	b.at = now
	armed := b.state == protocol.Armed || b.powered()
	if armed && f != NoTimeout && now-b.beat > b.timeout {
		b.off(now, protocol.CauseBeat)
		return
	}
	b.control(f)
	if b.state == protocol.Ramping && math.Abs(b.seen(f)) < 1 {
		b.off(now, protocol.CauseRamped)
	}
}

// control sets the volts for the next piece of time.
func (b *board) control(f Fault) {
	switch b.state {
	case protocol.Driving:
		b.volts = b.target
		if b.swing > 0 {
			b.volts += math.Copysign(b.swing, b.relay-b.seen(f))
		}
	case protocol.Looping, protocol.Ramping:
		want := b.target
		if b.state == protocol.Ramping && f != RampStuck {
			want = 0
		}
		u := want/b.gain + 0.15*(want-b.seen(f))
		b.volts = math.Max(-24, math.Min(24, u))
	default:
		b.volts = 0
	}
}

// seen is the speed as the encoder has it.
func (b *board) seen(f Fault) float64 {
	switch f {
	case Negated:
		return -b.speed
	case Frozen, Dead:
		return 0
	case Slip:
		return b.speed / 2
	}
	return b.speed
}

func (b *board) off(now time.Duration, why protocol.Cause) {
	b.state = protocol.Off
	if why.Trip() {
		b.state, b.trip = protocol.Tripped, why
	}
	b.volts, b.target, b.token, b.swing = 0, 0, 0, 0
	b.offWhy, b.since = why, now-b.beat
}

// receive works off one message and returns what the board answers, if anything.
func (b *board) receive(now time.Duration, m message, f Fault) (answer safety.Event) {
	switch m.kind {
	case msgCut:
		wasTripped := b.trip
		b.off(now, protocol.CauseCut)
		if wasTripped != 0 {
			b.state = protocol.Tripped
		}
		return safety.OutputOff{}
	case msgDisarm:
		if b.state == protocol.Armed || b.powered() {
			b.off(now, protocol.CauseDisarmed)
		}
		return safety.OutputOff{}
	case msgArm:
		return b.arm(now, m)
	case msgRamp:
		if b.state == protocol.Looping && f != RampDeaf {
			b.state = protocol.Ramping
			return safety.Ramping{}
		}
	case msgDrive, msgBeat:
		b.drive(now, m)
	case msgPattern:
		if b.state != protocol.Driving || m.id != b.token {
			return safety.PatternRefused{Words: "wrong state"}
		}
		b.swing, b.relay = m.value, m.relay
	case msgReset:
		if b.state == protocol.Tripped && b.speed == 0 {
			b.state, b.trip = protocol.Off, 0
		}
	}
	return nil
}

// arm echoes a one-time number: each is good once.
func (b *board) arm(now time.Duration, m message) safety.Event {
	if m.id <= b.used {
		return safety.BoardRefused{Code: protocol.RefOldNumber, Words: "old number"}
	}
	b.used = m.id
	if b.state != protocol.Off || math.Abs(b.speed) > 0.5 {
		return safety.BoardRefused{Code: protocol.RefState, Words: "wrong state"}
	}
	b.state, b.token, b.k, b.beat = protocol.Armed, m.id, 0, now
	return safety.BoardArmed{}
}

func (b *board) drive(now time.Duration, m message) {
	armed := b.state == protocol.Armed || b.powered()
	if !armed || m.id != b.token || m.k <= b.k {
		return
	}
	b.k, b.beat = m.k, now
	if m.kind == msgBeat || b.state == protocol.Ramping {
		return
	}
	b.mode, b.target = m.mode, m.value
	b.state = protocol.Driving
	if m.mode == safety.ModeSpeed {
		b.state = protocol.Looping
	}
}

// sample is what the board sees now, bent by the fault.
func (b *board) sample(now time.Duration, f Fault) protocol.Sample {
	s := protocol.Sample{
		BoardUS: uint64((now - b.born).Microseconds()), State: b.state, TripHeld: b.trip != 0,
		Volts: si.Volts(b.volts), Has: protocol.HasCurrent | protocol.HasBus | protocol.HasCounts | protocol.HasInputs,
		Bus: 24, Slow: protocol.Slow{Seen: true, Inputs: 1, Trip: b.trip, Boots: b.boots},
	}
	turns := b.turns - b.sampleT
	b.sampleT = b.turns
	switch f {
	case Negated:
		turns = -turns
	case Frozen, Dead:
		turns = 0
	case Slip:
		turns /= 2
	}
	dc := int64(math.Round(turns * countsPerTurn))
	b.counts += dc
	s.Counts = b.counts
	if dt := (now - b.sampled).Seconds(); dt > 0 && b.sampled > 0 {
		s.Speed = si.RadPerSec(float64(dc) / countsPerTurn * 2 * math.Pi / dt)
	}
	b.sampled = now
	if b.powered() {
		s.Current = si.Amps((b.volts - b.ke*b.speed) / b.r)
	}
	switch f {
	case NaN:
		s.Speed = si.RadPerSec(math.NaN())
	case Sag:
		s.Bus = 9
	case Surge:
		s.Bus = 40
	case Guard:
		s.Slow.Inputs = 0
	case Short:
		s.Current = 90
	}
	return s
}

// restart is a dip of the board's supply.
func (b *board) restart(now time.Duration) {
	b.state, b.trip = protocol.Off, 0
	b.volts, b.target, b.token, b.k, b.swing = 0, 0, 0, 0, 0
	b.boots++
	b.born = now
}
