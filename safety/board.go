package safety

import (
	"fmt"
	"time"

	"gainwright/protocol"
)

// connected starts again from disarmed, whatever was going on. Checks seen on
// another board, or before a restart, count no more. (S8)
func (m *machine) connected(e Connected) {
	if m.Phase != Disarmed && m.Phase != Tripped {
		m.trip(CodeReconnected, "")
	}
	if !m.Connected && m.Board == "" || e.Board != m.Board || e.BootCount != m.BootCount {
		m.Checks = 0
	}
	m.forget()
	m.Connected, m.LookOnly, m.Simulated, m.Patterns = true, e.LookOnly, e.Simulated, e.Patterns
	m.Board, m.BootCount = e.Board, e.BootCount
	m.LimitsHeld, m.Writing = false, false
	m.boardOff, m.boardTrip, m.resetOwed, m.silenceOpen = false, false, false, false
	m.log("connected: board %q, start %d", e.Board, e.BootCount)
}

// lost ends the link.
func (m *machine) lost(code Code) {
	m.tripIfHeld(code, "")
	m.Connected, m.LimitsHeld = false, false
	m.forget()
}

// restarted voids everything that the board held. (S8)
func (m *machine) restarted() {
	m.tripIfHeld(CodeRestarted, "")
	m.Checks = 0
	m.LimitsHeld, m.Writing = false, false
	m.boardTrip, m.resetOwed = false, false
}

// jolt is a sleep of the laptop or a step of its clock: no time stamp from
// before it is worth anything.
func (m *machine) jolt(code Code) {
	m.tripIfHeld(code, "")
	m.LimitsHeld, m.leased = false, false
	m.forget()
}

// forget drops what telemetry has told.
func (m *machine) forget() {
	m.Heard, m.arrived, m.resting, m.moved = false, false, false, false
	m.Last = protocol.Sample{}
	m.judge = judgeState{}
}

// board handles answers and reports that are not telemetry.
func (m *machine) board(e Event) {
	switch e := e.(type) {
	case BoardArmed:
		m.boardArmed()
	case BoardRefused:
		if m.Phase == Arming {
			m.stopping(EndRefused, cause(CodeBoardRefused, fmt.Sprintf("%s (%s)", e.Words, e.Code)))
		}
	case PatternRefused:
		m.patternRefused(e.Words)
	case BoardTripped:
		m.boardTripped(e.Cause)
	case OutputOff:
		m.off(e.At)
		if e.SinceBeat > 0 {
			m.judgeSilence(e)
		}
	case Ramping:
		m.ramp.answered = m.ramp.on
	}
}

// boardArmed is welcome only while it is waited for; an arm that comes after a
// stop is taken back at once. (S5)
func (m *machine) boardArmed() {
	switch m.Phase {
	case Arming:
		m.Phase = Armed
		m.ArmedAt = m.Now
		m.log("armed")
	case Disarmed, Stopping, Tripped:
		m.log("an arm that nobody waits for: taken back")
		m.cut()
		m.do(SendDisarm{})
		m.boardOff = false
	}
}

// boardTripped takes the board's word that it latched a trip. In the silence
// check its timeout is what was asked for, not a trip.
func (m *machine) boardTripped(c protocol.Cause) {
	words := ""
	if c.Trip() {
		words = c.String()
	}
	switch {
	case m.Phase == Running && m.Silent && (c == protocol.CauseBeat || !c.Trip()):
		m.boardTrip = true
		m.silenceEnds()
	case m.Phase.ArmHeld() && m.env.Enabling.Listed && (c == protocol.CauseInterlock || !c.Trip()):
		m.inputTripped()
	case m.boardTrip:
		if m.Phase == Tripped && words != "" && m.Trip.Cause == cause(CodeBoardTripped, "") {
			m.Trip.Cause = cause(CodeBoardTripped, words) // the same trip, now with its name
			m.log("%s", m.Trip.Cause)
		}
	default:
		m.boardTrip = true
		if m.Phase == Tripped {
			m.log("the board tripped too: %s", words)
			return
		}
		m.trip(CodeBoardTripped, words)
	}
}

func (m *machine) silenceEnds() {
	m.silenceOpen = true
	m.stopping(EndSilence, Cause{})
	m.resetOwed = true
	m.resetAt = m.Now - ResetInterval
}

// SilenceBounds is what passes the silence check, on the board's clock from the
// last heartbeat accepted to output off: 0.8 to 1.0 times the timeout, and 20 ms.
func (env Envelope) SilenceBounds() (lo, hi time.Duration) {
	return env.BoardTimeout * 8 / 10, env.BoardTimeout + 20*time.Millisecond
}

// judgeSilence passes or fails the silence check. A board that fails may be
// looked at and not driven. (S7)
func (m *machine) judgeSilence(e OutputOff) {
	if !m.silenceOpen || m.Phase == Running {
		return
	}
	m.silenceOpen = false
	m.SilenceTook = e.SinceBeat
	lo, hi := m.env.SilenceBounds()
	j := CheckJudged{Check: CheckSilence, SinceBeat: e.SinceBeat}
	j.Passed = e.SinceBeat >= lo && e.SinceBeat <= hi && e.Cause == protocol.CauseBeat
	ms := float64(e.SinceBeat.Microseconds()) / 1000
	j.Words = fmt.Sprintf("output off %.1f ms after the last heartbeat (%s), %d to %d ms passes",
		ms, e.Cause, lo.Milliseconds(), hi.Milliseconds())
	if j.Passed {
		m.Checks = m.Checks.With(CheckSilence)
	} else {
		m.Checks = m.Checks.Without(CheckSilence)
		m.LookOnly = true
	}
	m.do(j)
	m.log("silence check: %s", j.Words)
}
