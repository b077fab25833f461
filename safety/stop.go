package safety

import (
	"math"
	"time"
)

// stop answers a stop that somebody or something asked for. It counts, so that
// whatever was asked before it is void. (S1, S5)
func (m *machine) stop(c Cause, mayRamp bool) {
	m.Stops++
	m.stopped, m.stoppedAt = true, m.Now
	switch m.Phase {
	case Disarmed:
		m.log("stop asked for while disarmed: %s", c)
		m.do(SendStop{})
	case Tripped:
		m.do(SendStop{})
	case Stopping:
		m.cut() // the second press of a ramp and cut is a cut
	case Running:
		if mayRamp && m.mayRamp() {
			m.rampStop(c)
			return
		}
		m.stopping(EndStopped, c)
	default:
		m.stopping(EndStopped, c)
	}
}

// keyStops stops when the motor moves, is about to or waits for the next inch,
// and says so. (S2)
func (m *machine) keyStops() bool {
	moving := m.Phase == CountDown || m.Phase == Running || m.Phase == Stopping && m.ramp.on || m.betweenInches()
	if moving {
		m.stop(cause(CodeOtherKey, ""), false)
	}
	return moving
}

// stopping leaves an armed phase: stops go out until the board says off.
func (m *machine) stopping(why EndReason, c Cause) {
	m.Phase = Stopping
	m.Silent = false
	m.stoppingAt = m.Now
	m.boardOff = false
	m.ramp = rampState{}
	m.end = ending{due: true, reason: why, cause: c, at: m.Now}
	m.do(SendStop{})
}

// cut turns a ramp into a cut, or repeats the cut at once.
func (m *machine) cut() {
	if m.ramp.on {
		m.ramp = rampState{}
		m.stoppingAt = m.Now
	}
	m.do(SendStop{})
}

// mayRamp allows a ramp and cut only in a closed loop whose checks were made.
func (m *machine) mayRamp() bool {
	p := m.Plan.plan
	return m.env.Stop == StopRamp && m.driven && !m.Silent && p.Check == CheckNone &&
		p.Segments[0].Mode == ModeSpeed && m.fresh()
}

func (m *machine) rampStop(c Cause) {
	m.stopping(EndStopped, c)
	m.out = m.out[:len(m.out)-1] // the ramp stands in for the cut
	m.ramp = rampState{on: true, at: m.Now, lookAt: m.Now, speed: math.Abs(float64(m.Last.Speed))}
	m.do(SendRampStop{})
}

// stopDeadlines turns a ramp that is not answered, or too long, into a cut, and a
// board that does not confirm a cut into a trip.
func (m *machine) stopDeadlines() {
	if !m.ramp.on {
		if m.Now-m.stoppingAt > StopAnswer {
			m.trip(CodeNoStopAnswer, "")
		}
		return
	}
	switch {
	case !m.fresh():
		m.trip(CodeStale, m.ageWords())
	case !m.ramp.answered && m.Now-m.ramp.at > RampAnswer:
		m.log("no answer to the ramp: cut")
		m.cut()
	case m.Now-m.ramp.at > RampMax:
		m.log("the ramp takes too long: cut")
		m.cut()
	}
}

// rampLook cuts when the speed does not fall.
func (m *machine) rampLook() {
	now := math.Abs(float64(m.Last.Speed))
	if now > float64(m.env.SpeedMax) {
		m.cut()
		return
	}
	if m.Now-m.ramp.lookAt < RampCheck {
		return
	}
	if now > float64(m.env.RestSpeed) && now > 0.95*m.ramp.speed {
		m.log("the speed does not fall: cut")
		m.cut()
		return
	}
	m.ramp.lookAt, m.ramp.speed = m.Now, now
}

// trip stops and latches. The first cause stays. (S10)
func (m *machine) trip(code Code, detail string) {
	m.Stops++
	m.stopped, m.stoppedAt = true, m.Now
	c := cause(code, detail)
	m.do(SendStop{})
	if m.Phase == Tripped {
		m.Trip.Later++
		m.boardOff = false
		m.log("while tripped: %s", c)
		return
	}
	if m.Phase.ArmHeld() || m.Phase == Stopping {
		m.end = ending{due: true, reason: EndTripped, cause: c, at: m.Now}
		m.report()
	}
	m.log("TRIPPED %s", c)
	m.still()
	m.Phase = Tripped
	m.Trip = Trip{At: m.Now, Cause: c}
	m.do(TripLatched{At: m.Now, Cause: c})
}

// tripIfHeld trips when the board may be armed or moving, and only notes the
// cause when nothing is going on.
func (m *machine) tripIfHeld(code Code, detail string) {
	if m.Phase == Disarmed {
		m.log("%s", cause(code, detail))
		return
	}
	m.trip(code, detail)
}

// still puts away everything that belongs to an arm or a run.
func (m *machine) still() {
	m.Plan = Admitted{}
	m.Clear, m.Silent, m.driven, m.unattended, m.patterned = false, false, false, false, false
	m.Value = 0
	m.ramp = rampState{}
	m.end = ending{}
	m.whichInput = false
	m.boardOff = false
	m.stoppingAt = m.Now
}

// off takes the board's word, of instant at, that its output is off.
func (m *machine) off(at time.Duration) {
	switch m.Phase {
	case Stopping:
		if at < m.stoppingAt || m.whichInput {
			return
		}
		m.report()
		m.still()
		m.Phase = Disarmed
		m.disarmedAt = m.Now
		m.boardOff = true
	case Tripped:
		if at >= m.stoppingAt {
			m.boardOff = true
		}
	case Disarmed:
		m.boardOff = true
	}
}

// report says once how the run in hand came to its end.
func (m *machine) report() {
	if !m.end.due {
		return
	}
	p, e := m.Plan.plan, m.end
	m.end.due = false
	r := RunEnded{At: m.Now, Name: p.Name, Check: p.Check, Reason: e.reason, Cause: e.cause, Started: m.driven || m.Inches > 0}
	if r.Started {
		r.Lasted = e.at - m.RunAt
	}
	m.do(r)
}

// reset clears an acknowledged trip once the board is off. It never arms, and it
// never starts a run again. (S8, S10)
func (m *machine) reset() {
	switch {
	case m.Phase != Tripped:
	case !m.Trip.Acked:
		m.log("not reset: acknowledge first")
	case !m.boardOff:
		m.log("not reset: the board has not said that its output is off")
	default:
		m.log("reset: %s", m.Trip.Cause)
		m.Phase = Disarmed
		m.disarmedAt = m.Now
		m.resetOwed = m.boardTrip
		m.resetAt = m.Now - ResetInterval
	}
}
