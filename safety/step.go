package safety

import (
	"fmt"
	"slices"
	"time"
)

// Step returns the state after e and the effects that e calls for, in the order
// in which they are to be carried out.
//
// It never returns SendDrive unless the new state is Running, and then only with
// a value of the admitted plan inside the envelope (S3, S4). It returns a stop on
// every Tick while Stopping or Tripped until the board says that its output is
// off (S1). An unknown event is a bug of the caller and panics.
func (env Envelope) Step(s State, e Event) (State, []Effect) {
	out := env.Advance(&s, e)
	return s, out
}

// Advance is Step in place: s becomes the state after e. A state is large, and
// thousands of samples a second need not copy it.
func (env *Envelope) Advance(s *State, e Event) []Effect {
	m := machine{env: env, State: s}
	m.clock(e.When())
	m.deadlines()
	m.handle(e)
	if len(m.out) > 1 {
		slices.SortStableFunc(m.out, func(a, b Effect) int { return a.rank() - b.rank() })
	}
	return m.out
}

// machine is one call of Step at work: the state being changed and the effects
// so far.
type machine struct {
	*State
	env *Envelope
	out []Effect
}

func (m *machine) do(e Effect) { m.out = append(m.out, e) }

func (m *machine) log(format string, args ...any) {
	m.do(Log{At: m.Now, Words: fmt.Sprintf(format, args...)})
}

// clock moves Now forward. A clock that goes back by more than events may be
// late makes every time stamp kept so far worthless, so they go too.
func (m *machine) clock(when time.Duration) {
	switch {
	case when < m.Now-LateEvent:
		m.Now = when
		m.forget()
		m.leased = false
		m.stoppedAt, m.stoppingAt, m.resetAt, m.disarmedAt, m.Trip.At = when, when, when, when, when
		m.trip(CodeClock, "")
	case when > m.Now+TickMax && m.Phase.ArmHeld():
		gap := when - m.Now
		m.Now = when
		m.trip(CodeLate, fmt.Sprintf("nothing happened for %d ms", gap.Milliseconds()))
	case when > m.Now:
		m.Now = when
	}
}

// deadlines compares every deadline of the state, on every event, so that a late
// tick cannot hide one.
func (m *machine) deadlines() {
	if m.Phase.ArmHeld() {
		switch {
		case !m.fresh():
			m.trip(CodeStale, m.ageWords())
		case !m.unattended && (!m.leased || m.Now-m.leasedAt > m.env.LeaseMax):
			m.trip(CodeLease, "")
		}
	}
	switch m.Phase {
	case Arming:
		if m.Now-m.arming > ArmAnswer {
			m.stopping(EndRefused, cause(CodeBoardNoAnswer, ""))
		}
	case Armed:
		if m.Now-m.ArmedAt > m.env.ArmLapse {
			m.do(SendDisarm{})
			m.stopping(EndDisarmed, cause(CodeLapsed, ""))
		}
	case CountDown:
		if m.Now-m.CountedAt >= m.env.CountDown {
			m.begin()
		}
	case Running:
		m.runDeadlines()
	case Stopping:
		m.stopDeadlines()
	}
}

func (m *machine) fresh() bool { return m.Heard && m.Now-m.HeardAt <= m.env.TelemetryAgeMax }

func (m *machine) ageWords() string {
	if !m.Heard {
		return "none at all"
	}
	return fmt.Sprintf("the newest is %d ms old", (m.Now - m.HeardAt).Milliseconds())
}

func (m *machine) handle(e Event) {
	switch e := e.(type) {
	case Tick:
		m.tick()
	case Sample:
		m.sample(&e)
	case *Sample: // the same, where thousands come a second
		m.sample(e)
	case Lease:
		m.leased, m.leasedAt = true, max(e.At, m.leasedAt)
	case Stop:
		m.stop(cause(CodeAsked, string(e.Source)), e.Source == ByStopKey)
	case Paste:
		if m.Phase.ArmHeld() || m.Phase == Stopping {
			m.stop(cause(CodePaste, ""), false)
		}
	case Key:
		m.keyStops()
	case Mark:
		if m.Phase != Running {
			m.keyStops()
		} else {
			m.log("mark at %.3f s of the run", (m.Now - m.RunAt).Seconds())
		}
	case Enough:
		if m.Phase == Running && !m.Silent && !m.Plan.plan.Inch {
			m.over("enough is known")
		}
	case LeftForecast:
		if m.Phase == Running && !m.Silent {
			m.leftForecast(e.Words)
		}
	case ArmRequest, ClearArea, Start, Disarm, Acknowledge, Reset:
		// What a person asks for before a run is an unlisted key once it goes. (S2)
		if m.listedBetweenInches(e) || !m.keyStops() {
			m.person(e)
		} else if _, asked := e.(ArmRequest); asked {
			m.do(ArmRefused{cause(CodeNotDisarmed, "")})
		}
	default:
		m.world(e)
	}
}

// person handles what somebody asks for while nothing moves.
func (m *machine) person(e Event) {
	switch e := e.(type) {
	case ArmRequest:
		m.arm(e)
	case ClearArea:
		m.clear()
	case Start:
		m.start()
	case Disarm:
		if m.Phase == Arming || m.Phase == Armed {
			m.do(SendDisarm{})
			m.stopping(EndDisarmed, cause(CodeDisarmed, ""))
		}
	case Acknowledge:
		switch {
		case m.Phase != Tripped || m.Trip.Acked:
		case m.Now-m.Trip.At < AckWait:
			m.log("not acknowledged: too soon to have read it")
		default:
			m.Trip.Acked = true
			m.log("acknowledged: %s", m.Trip.Cause)
		}
	case Reset:
		m.reset()
	}
}

// world handles what board, laptop and job report.
func (m *machine) world(e Event) {
	switch e := e.(type) {
	case Connected:
		m.connected(e)
	case LinkLost:
		m.lost(CodeLinkLost)
	case PortStalled:
		m.lost(CodePort)
	case BoardRestarted:
		m.restarted()
	case Wake:
		m.jolt(CodeWake)
	case ClockJump:
		m.jolt(CodeClock)
	case RigChanged:
		m.LimitsHeld = false
		m.Checks &= SetOf(CheckStopKey)
		m.tripIfHeld(CodeRigFile, "")
	case TapeFailed:
		m.RecordBad = true
		m.tripIfHeld(CodeTape, e.Why)
	case TapeBack:
		m.RecordBad = false
	case Panicked:
		m.trip(CodePanic, e.Why)
	case LimitsHeld:
		if !e.OK {
			m.LimitsHeld = false
			m.tripIfHeld(CodeLimits, "")
		} else if m.Phase == Disarmed {
			m.LimitsHeld = true
		}
	case CheckPassed, CheckFailed:
		m.checked(e)
	case BoardArmed, BoardRefused, PatternRefused, BoardTripped, OutputOff, Ramping:
		m.board(e)
	case GainWrite, LimitWrite, WriteDone:
		m.write(e)
	default:
		panic(fmt.Sprintf("safety: unknown event %T", e))
	}
}

// tick sends what has to be sent again and again.
func (m *machine) tick() {
	switch m.Phase {
	case Armed, CountDown: // while arming there is no token yet that a heartbeat could carry
		m.beat()
	case Running:
		m.drive()
	case Stopping:
		if m.ramp.on {
			m.beat()
		} else {
			m.do(SendStop{}) // (S1) a stop is a level
		}
	case Tripped:
		if !m.boardOff {
			m.do(SendStop{}) // (S1)
		}
	case Disarmed:
		m.clearBoardTrip()
	}
}

func (m *machine) beat() {
	if !m.Silent && m.Now-m.beatAt >= m.env.Heartbeat {
		m.beatAt = m.Now
		m.do(SendHeartbeat{})
	}
}

// clearBoardTrip asks the board to clear a trip that the operator has reset, or
// that the silence check provoked, once the shaft is at rest, and again until it
// has.
func (m *machine) clearBoardTrip() {
	if !m.resetOwed || !m.fresh() {
		return
	}
	if !m.boardTrip && m.Now-m.disarmedAt > OffSettle {
		m.resetOwed = false
		return
	}
	if m.resting && m.boardTrip && m.Now-m.resetAt >= ResetInterval {
		m.resetAt = m.Now
		m.do(SendReset{})
	}
}
