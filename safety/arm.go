package safety

import (
	"strings"
)

// arm asks the board to arm, or says why not. Every condition is looked at
// again here, whatever was true when the plan was shown. (S3, S5, S6, S7, S9)
func (m *machine) arm(e ArmRequest) {
	if c, ok := m.mayArm(e); !ok {
		m.do(ArmRefused{c})
		m.log("arm refused: %s", c)
		return
	}
	m.Phase = Arming
	m.Plan = e.Plan
	m.unattended = e.Unattended
	m.arming = m.Now
	m.beatAt = m.Now
	m.Clear, m.Silent, m.driven, m.patterned = false, false, false, false
	m.silenceOpen, m.whichInput = false, false
	m.Inches = 0
	m.resetOwed = false
	m.boardOff = false
	m.do(SendArm{})
	m.log("arming for %q", e.Plan.plan.Name)
}

func (m *machine) mayArm(e ArmRequest) (c Cause, ok bool) {
	no := func(code Code, detail string) (Cause, bool) { return cause(code, detail), false }
	switch {
	case m.Phase == Tripped:
		return no(CodeTripHeld, m.Trip.Cause.Words)
	case m.Phase != Disarmed:
		return no(CodeNotDisarmed, "")
	case !e.Plan.valid:
		return no(CodeNoPlan, "")
	case e.Stops != m.Stops:
		return no(CodeVoided, "")
	case m.stopped && m.Now-m.stoppedAt < HoldOff:
		return no(CodeHoldOff, "")
	}
	// The envelope may be another than the one that admitted the plan.
	if _, err := m.env.Admit(e.Plan.plan); err != nil {
		return no(CodeOverEnvelope, err.Error())
	}
	switch {
	case !m.Connected:
		return no(CodeNotConnected, "")
	case m.LookOnly:
		return no(CodeLookOnly, "")
	case e.Unattended && !m.Simulated:
		return no(CodeUnattended, "")
	case !e.Unattended && (!m.leased || m.Now-m.leasedAt > m.env.LeaseMax):
		return no(CodeNoLease, "")
	case m.RecordBad:
		return no(CodeTape, "")
	case m.Writing:
		return no(CodeWriting, "")
	case m.boardTrip:
		return no(CodeTripHeld, "on the board")
	case !m.fresh():
		return no(CodeStale, m.ageWords())
	case e.Plan.plan.HasPattern() && !m.Patterns:
		return no(CodePatternHere, "")
	case !m.LimitsHeld:
		return no(CodeLimits, "")
	case !m.standstill():
		return no(CodeMoving, "")
	case m.Heat >= m.env.heatMax():
		return no(CodeHeat, "")
	}
	if missing := m.missing(e.Plan.plan); missing != "" {
		return no(CodeChecks, missing)
	}
	if in := m.openInput(); in != "" {
		return no(CodeInterlock, in)
	}
	if p, not := m.notEnabled(); not {
		return no(CodeEnabling, p.String())
	}
	return Cause{}, true
}

// standstill is a fresh word of the board that its output is off and that the
// shaft has not turned for RestHold.
func (m *machine) standstill() bool { return m.fresh() && m.boardOff && m.resting }

// needs is what has to have been seen working this session before plan p may
// move. Each check needs those before it; the sign ramp is the first thing that
// moves, and only the stop key comes before it. (S7)
func (env *Envelope) needs(p Plan) Checks {
	ticked := env.ChecksAsked & SetOf(CheckTicked) // before anything moves
	switch p.Check {
	case CheckSign:
		return ticked | SetOf(CheckStopKey)
	case CheckStop:
		return ticked | SetOf(CheckStopKey, CheckCount, CheckSign)
	case CheckSilence:
		return ticked | SetOf(CheckStopKey, CheckCount, CheckSign, CheckStop)
	}
	usual := ticked | SetOf(CheckStopKey, CheckCount, CheckSign, CheckStop, CheckSilence)
	if p.Check != CheckNone {
		return usual
	}
	return usual | env.ChecksAsked
}

// Missing lists the checks that plan p still needs.
func (env Envelope) Missing(s State, p Plan) []Check { return (env.needs(p) &^ s.Checks).List() }

func (m *machine) missing(p Plan) string {
	var words []string
	for _, c := range m.env.Missing(*m.State, p) {
		words = append(words, c.String())
	}
	return strings.Join(words, ", ")
}

// clear takes the answer to the clear-area question, never in its first seconds;
// an early answer does not start them again.
func (m *machine) clear() {
	if m.Phase != Armed || m.Clear {
		return
	}
	if m.Now-m.ArmedAt < ClearWait {
		m.log("clear-area answer not taken: too soon to have looked")
		return
	}
	m.Clear = true
	m.log("area clear")
}

func (m *machine) start() {
	switch {
	case m.Phase != Armed:
	case !m.Clear:
		m.log("not started: the clear-area question is not answered")
	case m.Inches > 0: // the way to the first inch was gone
		m.begin()
	default:
		m.Phase = CountDown
		m.CountedAt = m.Now
		m.log("count-down")
	}
}

// checked keeps what was seen working. Only while disarmed or stopping does a
// check pass; the silence check is judged by Step itself.
func (m *machine) checked(e Event) {
	switch e := e.(type) {
	case CheckPassed:
		switch {
		case e.Check == CheckNone || e.Check >= checkEnd || !m.Connected:
		case e.Check == CheckSilence:
			if !m.Checks.Has(CheckSilence) {
				m.log("silence check: judged from the board's own times only")
			}
		default:
			m.Checks = m.Checks.With(e.Check)
			m.log("%s: seen working", e.Check)
		}
	case CheckFailed:
		m.Checks = m.Checks.Without(e.Check)
		m.log("%s: failed", e.Check)
	}
}

// write answers whether gains or limits may be written: only disarmed, with the
// output off and the shaft at rest. (S9)
func (m *machine) write(e Event) {
	switch e := e.(type) {
	case GainWrite:
		m.mayWrite(false, Cause{})
	case LimitWrite:
		var c Cause
		if e.Loosens && strings.TrimSpace(e.Reason) == "" {
			c = cause(CodeNoReason, "")
		}
		if m.mayWrite(true, c) && e.Loosens {
			m.log("limits loosened: %s", e.Reason)
		}
	case WriteDone:
		m.Writing = m.Writing && !e.OK
	}
}

func (m *machine) mayWrite(limits bool, c Cause) bool {
	switch {
	case c.Code != CodeNone:
	case m.Phase == Tripped:
		c = cause(CodeTripHeld, m.Trip.Cause.Words)
	case m.Phase != Disarmed:
		c = cause(CodeNotDisarmed, "")
	case !m.Connected:
		c = cause(CodeNotConnected, "")
	case m.LookOnly:
		c = cause(CodeLookOnly, "")
	case !m.fresh():
		c = cause(CodeStale, m.ageWords())
	case !m.standstill():
		c = cause(CodeMoving, "")
	}
	if c.Code != CodeNone {
		m.do(WriteRefused{Limits: limits, Cause: c})
		return false
	}
	m.Writing = true
	if limits {
		m.LimitsHeld = false // until read back equal
	}
	m.do(WriteAllowed{Limits: limits})
	return true
}
