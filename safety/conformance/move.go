package conformance

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"time"

	"gainwright/protocol"
)

// small is the voltage of the moving checks, V: well under the test limits.
func (s *session) small() float64 { return s.id.VoltsMax / 14 }

// volts sends one drive line.
func (s *session) volts(v float64) error {
	s.k++
	return s.send(protocol.AppendDriveVolts(nil, s.k, s.token, v))
}

// speed sends one setpoint.
func (s *session) speed(w float64) error {
	s.k++
	return s.send(protocol.AppendDriveSpeed(nil, s.k, s.token, w))
}

// drive drives open loop for d.
func (s *session) drive(v float64, d time.Duration) error {
	pause := time.Duration(s.beatLimit() / 4 * float64(time.Second))
	for end := s.line.Now() + d; s.line.Now() < end; {
		if err := first(func() error { return s.volts(v) }, func() error { return s.run(pause) }); err != nil {
			return err
		}
	}
	return nil
}

// rests waits until the shaft stands, so that the board arms again.
func (s *session) rests() error {
	quiet := 0
	for range 100 {
		t, err := s.tel()
		if err != nil {
			return err
		}
		if quiet++; t.speed != 0 {
			quiet = 0
		}
		if quiet >= 4 {
			return s.run(100 * time.Millisecond)
		}
		if err := s.run(50 * time.Millisecond); err != nil {
			return err
		}
	}
	return errors.New("the shaft does not come to rest")
}

// moving is a check that drives: at rest before, off and at rest after.
func moving(f func(*session) error) func(*session) error {
	return func(s *session) error {
		err := first(s.rests, func() error { return f(s) })
		if errors.Is(err, ErrInterrupted) {
			return err
		}
		_, off := s.ask(protocol.VerbDisarm, "")
		return first(func() error { return err }, func() error { return off }, s.rests)
	}
}

// trips acts on an armed board and wants it tripped by a cause.
func trips(cause protocol.Cause, act func(*session) error) func(*session) error {
	return moving(func(s *session) error {
		if err := first(s.arm, s.beat); err != nil {
			return err
		}
		s.forget()
		if err := act(s); err != nil {
			return err
		}
		l, err := s.wait(patience, begins("ev trip "))
		if err == nil && l == nil {
			err = errorf("no trip, wanted cause %d", cause)
		}
		if err == nil && !strings.HasPrefix(l.body, fmt.Sprintf("ev trip %d ", cause)) {
			err = errorf("%q, wanted cause %d", l.body, cause)
		}
		return first(func() error { return err }, func() error { return s.inState(protocol.Tripped) })
	})
}

var moveChecks = []check{
	{id: "P6.3h", what: "dv drives, and telemetry says the volts", arms: true, moves: true, run: moving(func(s *session) error {
		if _, err := s.must(protocol.VerbRate, "50 x t"); err != nil {
			return err
		}
		if err := first(s.arm, func() error { return s.drive(s.small(), 300*time.Millisecond) }); err != nil {
			return err
		}
		all, err := s.fixedLines()
		if _, off := s.must(protocol.VerbRate, "0 x t"); err == nil {
			err = off
		}
		ts := kind(all, 'T')
		if err != nil || len(ts) == 0 {
			return first(func() error { return err }, func() error { return errors.New("no telemetry") })
		}
		last := ts[len(ts)-1]
		if got := float64(last.volts()) * s.id.Scales.VoltsLSB; last.state() != protocol.Driving || math.Abs(got-s.small()) > 0.1*s.small()+2*s.id.Scales.VoltsLSB {
			return errorf("%v at %.3g V, wanted driving at %.3g V", last.state(), got, s.small())
		}
		return nil
	})},
	{id: "P2.2e", what: "a cut takes the output away in motion", arms: true, moves: true, run: moving(func(s *session) error {
		return first(s.arm, func() error { return s.drive(s.small(), 200*time.Millisecond) },
			func() error { _, err := s.cut(can); return err }, func() error { return s.volts(s.small()) },
			func() error { return s.run(50 * time.Millisecond) }, func() error { return s.inState(protocol.Off) })
	})},
	{id: "P6.4d", what: "a run whose heartbeats end trips with cause 10", arms: true, moves: true, run: trips(protocol.CauseBeat, func(s *session) error {
		return first(func() error { return s.drive(s.small(), 150*time.Millisecond) }, func() error { return s.awaitTrip(protocol.CauseBeat) })
	})},
	{id: "P6.5a", what: "a run of dv ignores ds", arms: true, moves: true, run: moving(func(s *session) error {
		return first(s.arm, func() error { return s.volts(0) }, func() error { return s.speed(0) }, func() error { return s.inState(protocol.Driving) })
	})},
	{id: "P7.4a", what: "a voltage over vmax is not clamped: cause 12", arms: true, moves: true, run: trips(protocol.CauseVolts, func(s *session) error {
		return s.volts(s.id.VoltsMax / 9.7 * 1.05)
	})},
	{id: "P7.4b", what: "a setpoint over wmax is not clamped: cause 11", arms: true, moves: true, run: trips(protocol.CauseSpeed, func(s *session) error {
		return s.speed(s.id.SpeedMax / 9.7 * 1.05)
	})},
	{id: "P7.5a", what: "a run that lasts too long trips with cause 23", arms: true, moves: true, run: func(s *session) error {
		if err := s.putLimit(protocol.LimRun, 0.3); err != nil {
			return err
		}
		return trips(protocol.CauseRunTime, func(s *session) error { return s.drive(s.small(), 450*time.Millisecond) })(s)
	}},
	{id: "P7.3d", what: "limits and gains are not changed while driving", arms: true, moves: true, run: moving(func(s *session) error {
		return first(s.arm, func() error { return s.volts(0) }, func() error { return s.stage(0, float(s.id.VoltsMax/20), protocol.RefState) },
			func() error { return s.volts(0) },
			func() error { return s.refused(protocol.VerbGain, "store 0000", protocol.RefState) })
	})},
	{id: "P6.7c", what: "ramp brings a run to rest and ends it with cause 2", arms: true, moves: true, run: moving(func(s *session) error {
		if !s.id.Can("ramp") {
			return leftOut("the board has no ramp")
		}
		if err := first(s.arm, func() error { return s.drive(s.small(), 200*time.Millisecond) }); err != nil {
			return err
		}
		s.forget()
		if _, err := s.must(protocol.VerbRamp, hex4(s.token)); err != nil {
			return err
		}
		if err := s.alive(2500 * time.Millisecond); err != nil {
			return err
		}
		if s.count(begins("ev off 2 ")) != 1 {
			return errors.New("no ev off 2")
		}
		return s.inState(protocol.Off)
	})},
	{id: "P10.1d", what: "cap arm keeps the samples from before the first drive line", arms: true, moves: true, run: moving(capturing(func(s *session) error {
		n := s.captureSize()
		if _, err := s.must(protocol.VerbCap, fmt.Sprintf("arm 1 %d %d", n/4, n)); err != nil {
			return err
		}
		if err := first(func() error { return s.run(time.Duration(n)*s.id.Loop + 20*time.Millisecond) }, s.arm,
			func() error { return s.drive(s.small(), time.Duration(n)*s.id.Loop+100*time.Millisecond) }); err != nil {
			return err
		}
		c, err := s.capState()
		if err != nil || c.phase != "full" || c.samples != n {
			return first(func() error { return err }, func() error { return errorf("%s with %d samples, wanted full with %d", c.phase, c.samples, n) })
		}
		before, err := s.piece(0, n)
		if err != nil {
			return err
		}
		after, err := s.piece(n-1, n)
		if err == nil && (before[4:8] != "0000" || after[4:8] == "0000") {
			err = errorf("volts %s in the first sample, %s in the last", before[4:8], after[4:8])
		}
		return err
	}))},
}
