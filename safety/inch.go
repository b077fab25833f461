package safety

import (
	"fmt"
	"math"
	"time"
)

// InchRest is the least time at no drive at the end of an inch: long enough for
// several drive lines to tell the board, should one be lost.
const InchRest = 200 * time.Millisecond

// inched ends one inch. The arm goes on for the next press until it lapses; the
// board holds no drive and is kept alive.
func (m *machine) inched(why string) {
	m.log("%s: inch %d over after %.3f s", why, m.Inches, (m.Now - m.RunAt).Seconds())
	m.Phase = Armed
	m.inchedAt = m.Now
}

// betweenInches reports whether the arm waits for the press of the next inch.
func (m *machine) betweenInches() bool { return m.Phase == Armed && m.Inches > 0 }

// listedBetweenInches reports whether e is one of the two keys that do not mean
// "stop and disarm" then: the press that inches, and disarm, which says so itself.
func (m *machine) listedBetweenInches(e Event) bool {
	switch e.(type) {
	case Start, Disarm:
		return m.betweenInches()
	}
	return false
}

// judgeInchRest trips when the board drives between two inches.
func (m *machine) judgeInchRest() bool {
	if m.Inches == 0 || m.HeardAt < m.inchedAt+OffSettle {
		return false
	}
	if v := math.Abs(float64(m.Last.Volts)); v > voltsOffset {
		m.trip(CodeUndriven, fmt.Sprintf("%.4g V between two inches", v))
		return true
	}
	return false
}

// admitInch holds a plan for inching to angle and time a press, and to an end at
// no drive. (S7)
func (env Envelope) admitInch(p Plan) error {
	switch {
	case !p.Inch:
		return nil
	case !(env.InchTurns > 0) || env.InchTime <= 0:
		return refused(0, "no size of an inch is stated", "give it in the rig file")
	case p.Check != CheckNone || p.Locked:
		return refused(0, "an inch is no check and needs a free shaft", "make it a plan of its own")
	case p.SpeedMax <= 0 || p.SpeedMax > float64(env.CreepMax):
		return over(0, "speed limit of an inch", p.SpeedMax, float64(env.CreepMax), "rad/s", "state it, at creep or below")
	case p.TurnsMax <= 0 || p.TurnsMax > 2*env.InchTurns+1e-9:
		return over(0, "turns limit of an inch", p.TurnsMax, 2*env.InchTurns, "turns", "state it, at twice the inch or below")
	}
	var driven time.Duration
	for i, s := range p.Segments {
		if s.Mode != ModeVolts {
			return refused(i+1, "an inch runs open loop only", "give volts")
		}
		if s.From == 0 && s.To == 0 {
			continue
		}
		driven += s.Duration
		if s.Until.Kind != UntilMotion || float64(s.Until.Counts)*env.RadPerCount > 2*math.Pi*env.InchTurns+env.RadPerCount {
			return refused(i+1, "it drives on after the angle of an inch", "end it after at most that many counts")
		}
	}
	if driven > env.InchTime {
		return over(0, "driven time of an inch", driven.Seconds(), env.InchTime.Seconds(), "s", "shorten it")
	}
	if end := p.Segments[len(p.Segments)-1]; end.From != 0 || end.To != 0 || end.Duration < InchRest || end.Until.Kind != UntilTime {
		return refused(len(p.Segments), "an inch does not end at no drive", fmt.Sprintf("end it with %v at 0 V", InchRest))
	}
	return nil
}
