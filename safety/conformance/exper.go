package conformance

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
)

// experimenting leaves a check out where the loop runs no experiments.
func experimenting(f func(*session) error) func(*session) error {
	return func(s *session) error {
		if !s.id.Can("exper") {
			return leftOut("the board runs no experiments in its loop")
		}
		return f(s)
	}
}

// sequence is the request for 15 bits of 5 loop periods each about the volts of
// dv, whose amplitude is a part of them.
func (s *session) sequence(amp float64) string {
	return fmt.Sprintf("prbs %04X %d 4 5 1", s.token, int(amp*1000))
}

// experState wants the answer to exp state to begin with a word, and to end with
// a number of switchings unless that is negative.
func (s *session) experState(phase string, switched int) error {
	a, err := s.must(protocol.VerbExper, "state")
	if err == nil && (len(a.fields) < 2 || a.field(0) != phase || switched >= 0 && a.field(1) != fmt.Sprint(switched)) {
		err = errorf("exp state: %v, wanted %s and %d switchings", a, phase, switched)
	}
	return err
}

// applied wants telemetry to say that so many volts are applied. The first sample
// has the volts since the one before it, which may be long ago.
func (s *session) applied(want float64) error {
	if _, err := s.tel(); err != nil {
		return err
	}
	t, err := s.tel()
	if got := float64(t.millivs) / 1000; err == nil && math.Abs(got-want) > 0.05*want+0.02 {
		err = errorf("%.3f V are applied, wanted %.3f V", got, want)
	}
	return err
}

// sequenceTime is how long the 15 bits take, and a little more.
func (s *session) sequenceTime() time.Duration { return 75*s.id.Loop + 50*time.Millisecond }

var experChecks = []check{
	{id: "P13.4a", what: "a board without experiments in its loop refuses exp", run: func(s *session) error {
		if s.id.Can("exper") {
			return s.experState("none", 0)
		}
		return s.refused(protocol.VerbExper, "state", protocol.RefUnknown, protocol.RefNotHere)
	}},
	{id: "P13.1a", what: "exp is refused off, and armed before the first dv", arms: true, run: experimenting(func(s *session) error {
		refused := func() error {
			return s.refused(protocol.VerbExper, s.sequence(s.small()/4), protocol.RefState)
		}
		return first(refused, s.arm, s.beat, refused)
	})},
	{id: "P13.1b", what: "exp is refused with another token, or where it would pass vmax", arms: true, moves: true, run: moving(experimenting(func(s *session) error {
		return first(s.arm, func() error { return s.volts(s.small()) },
			func() error {
				return s.refused(protocol.VerbExper, fmt.Sprintf("prbs %04X 100 4 5 1", s.token^1), protocol.RefToken)
			},
			func() error { return s.volts(s.small()) },
			func() error { return s.refused(protocol.VerbExper, s.sequence(s.id.VoltsMax/9.7), protocol.RefLimit) },
			func() error { return s.experState("none", 0) })
	}))},
	{id: "P13.1c", what: "dv that the amplitude carries over vmax trips with cause 12", arms: true, moves: true, run: experimenting(trips(protocol.CauseVolts, func(s *session) error {
		_, err := s.must(protocol.VerbRate, "0 x t")
		return first(func() error { return err }, func() error { return s.volts(s.small()) },
			func() error {
				_, err := s.must(protocol.VerbExper, fmt.Sprintf("prbs %04X %d 16 100 1", s.token, int(s.small()*250)))
				return err
			}, func() error { return s.volts(s.id.VoltsMax / 9.7 * 0.95) })
	}))},
	{id: "P13.3a", what: "the sequence has its switchings, ends by itself, and the run goes on", arms: true, moves: true, run: moving(experimenting(func(s *session) error {
		start := func() error { _, err := s.must(protocol.VerbExper, s.sequence(s.small()/4)); return err }
		return first(s.arm, func() error { return s.volts(s.small()) }, start,
			func() error { return s.experState("run", -1) },
			func() error { return s.drive(s.small(), s.sequenceTime()) },
			func() error { return s.experState("done", 8) },
			func() error { return s.inState(protocol.Driving) })
	}))},
	{id: "P13.5a", what: "the square wave has its steps and ends by itself", arms: true, moves: true, run: moving(experimenting(func(s *session) error {
		start := func() error {
			_, err := s.must(protocol.VerbExper, fmt.Sprintf("steps %04X %d 10 6", s.token, int(s.small()*250)))
			return err
		}
		return first(s.arm, func() error { return s.volts(s.small()) }, start,
			func() error { return s.drive(s.small(), s.sequenceTime()) },
			func() error { return s.experState("done", 5) },
			func() error { return s.inState(protocol.Driving) })
	}))},
	{id: "P13.2a", what: "the relay is up below its middle, goes down with the speed at it, and a switching ends it", arms: true, moves: true, run: moving(experimenting(func(s *session) error {
		// The middle is far above the speed of volts so small, and then far below.
		relay := func(middle int) error {
			_, err := s.must(protocol.VerbExper, fmt.Sprintf("relay %04X %d 1 %d 1", s.token, int(s.small()*250), middle))
			return err
		}
		return first(s.arm, func() error { return s.volts(s.small()) },
			func() error { return relay(100_000_000) },
			func() error { return s.drive(s.small(), s.sequenceTime()) },
			func() error { return s.experState("run", 0) },
			func() error { return s.applied(s.small() * 1.25) },
			func() error { return relay(-100_000_000) },
			func() error { return s.drive(s.small(), s.sequenceTime()) },
			func() error { return s.experState("run", 0) },
			func() error { return s.applied(s.small() * 0.75) })
	}))},
	{id: "P13.4b", what: "a cut ends the experiment with the output", arms: true, moves: true, run: moving(experimenting(func(s *session) error {
		start := func() error { _, err := s.must(protocol.VerbExper, s.sequence(s.small()/4)); return err }
		return first(s.arm, func() error { return s.volts(s.small()) }, start,
			func() error { _, err := s.cut(can); return err },
			func() error { return s.experState("none", 0) }, func() error { return s.inState(protocol.Off) })
	}))},
}
