package safety

import (
	"math"
	"time"

	"gainwright/protocol"
)

// sample takes one telemetry sample: is it fresh, what does the board say it is
// doing, and is everything inside its limits? (S6)
func (m *machine) sample(e *Sample) {
	if bad := notFinite(&e.Sample); bad != "" {
		m.tripIfArmed(CodeNotNumber, bad)
		return
	}
	dt, ok := m.freshen(e)
	if !ok {
		return
	}
	m.track(&e.Sample, dt)
	if e.Slow.Seen && m.Connected && e.Slow.Boots != m.BootCount {
		m.BootCount = e.Slow.Boots
		m.restarted()
	}
	m.boardState(&e.Sample)
	switch m.Phase {
	case Arming, Armed, CountDown:
		m.judgeStill(e.Sample)
	case Running:
		m.judgeRun(e.Sample)
		if m.Phase == Running && !m.Silent {
			m.until()
		}
	case Stopping:
		m.which(e.Sample)
		if m.Phase == Stopping && m.ramp.on {
			m.rampLook()
		}
	}
}

func (m *machine) tripIfArmed(code Code, detail string) {
	if m.Phase.ArmHeld() {
		m.trip(code, detail)
	}
}

func notFinite(s *protocol.Sample) string {
	// The difference of a number to itself is nought, of all others not a number.
	v, a, c, b, set, t := float64(s.Speed), float64(s.Volts), float64(s.Current), float64(s.Bus), float64(s.Setpoint), float64(s.Slow.Temp)
	if (v-v)+(a-a)+(c-c)+(b-b)+(set-set)+(t-t) == 0 {
		return ""
	}
	for _, v := range []struct {
		name string
		v    float64
		used bool
	}{
		{"speed", float64(s.Speed), true}, {"volts", float64(s.Volts), true},
		{"current", float64(s.Current), s.Has&protocol.HasCurrent != 0},
		{"bus", float64(s.Bus), s.Has&protocol.HasBus != 0},
		{"setpoint", float64(s.Setpoint), s.Has&protocol.HasSetpoint != 0},
		{"temperature", float64(s.Slow.Temp), s.Slow.HasTmp},
	} {
		if v.used && !finite(v.v) {
			return v.name
		}
	}
	return ""
}

// freshen judges the age of a sample by the board's own clock: one whose board
// time does not go on is a repeat and refreshes nothing, and one that sat in a
// buffer is as old as it is, not as old as its arrival. It returns the time
// since the sample before.
func (m *machine) freshen(e *Sample) (dt time.Duration, ok bool) {
	board := time.Duration(e.BoardUS) * time.Microsecond
	off := e.At - board
	if !m.arrived {
		m.offset = off
	} else {
		if e.BoardUS <= m.boardUS {
			return 0, false
		}
		dt = time.Duration(e.BoardUS-m.boardUS) * time.Microsecond
		m.offset = min(off, m.offset+time.Duration(DriftShare*float64(dt)))
	}
	m.arrived, m.boardUS, m.arrivedAt = true, e.BoardUS, e.At
	m.Last, m.Heard = e.Sample, true
	m.HeardAt = max(m.HeardAt, board+m.offset)
	if dt == 0 {
		m.HeardAt = e.At
	}
	return dt, true
}

// track keeps position and rest from one sample to the next.
func (m *machine) track(s *protocol.Sample, dt time.Duration) {
	turns := float64(s.Speed) * dt.Seconds() / (2 * math.Pi)
	moved := math.Abs(float64(s.Speed)) > float64(m.env.RestSpeed)
	if s.Has&protocol.HasCounts != 0 {
		if m.judge.counted {
			moved = moved || s.Counts-m.judge.counts > 1 || m.judge.counts-s.Counts > 1
			if m.env.RadPerCount > 0 {
				turns = float64(s.Counts-m.judge.counts) * m.env.RadPerCount / (2 * math.Pi)
			}
		}
	}
	m.pos += turns
	if moved {
		m.moved, m.restSince = true, m.HeardAt
	} else if m.restSince == 0 || dt == 0 {
		m.restSince = m.HeardAt
	}
	m.resting = !moved && m.HeardAt-m.restSince >= RestHold
	m.judge.look(s, dt)
	m.heat(s, dt)
}

// boardState compares what the board says it is doing with what it was asked.
func (m *machine) boardState(s *protocol.Sample) {
	tripped := s.TripHeld || s.State == protocol.Tripped
	off := s.State == protocol.Off || s.State == protocol.Tripped
	if m.ramp.on && s.State == protocol.Ramping {
		m.ramp.answered = true
	}
	// Telemetry from before the stop confirms nothing.
	if off && m.HeardAt >= m.stoppingAt+OffConfirm {
		m.off(m.HeardAt)
	} else if !off {
		m.boardOff = false
	}
	if !tripped {
		m.boardTrip = false
	} else if !m.boardTrip || s.Slow.Trip.Trip() {
		m.boardTripped(s.Slow.Trip)
	}
	switch m.Phase {
	case Disarmed:
		if off || m.Now-m.disarmedAt <= OffSettle {
			return
		}
		if s.State.Moving() {
			m.trip(CodeBoardUnasked, s.State.String())
			return
		}
		m.log("the board is armed and nobody asked: stopping it")
		m.stopping(EndDisarmed, cause(CodeBoardUnasked, ""))
		m.end = ending{}
	case Armed, CountDown:
		if off && m.HeardAt > m.ArmedAt {
			m.stopping(EndDisarmed, cause(CodeBoardOff, ""))
		}
	case Running:
		switch {
		case off && m.Silent:
			m.silenceEnds()
		case off:
			m.trip(CodeBoardOff, "")
		}
	}
}
