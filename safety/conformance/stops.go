package conformance

import (
	"strconv"
	"time"

	"gainwright/protocol"
)

// motionChecks are what is left of a stop: trips, events, the log.
var motionChecks = []check{
	{id: "P9.2a", what: "ev trip carries the cause and the time that the log gives", needs: "P6.4a", arms: true, run: func(s *session) error {
		if err := s.tripByBeat(); err != nil {
			return err
		}
		l, err := s.stopLog(0)
		if err != nil {
			return err
		}
		if head := "ev trip 10 " + strconv.Itoa(int(l.seen)); s.count(begins(head)) != 1 {
			return errorf("no %q, which the log says", head)
		}
		return nil
	}},
	{id: "P9.2b", what: "ev off comes when an arm ends without a trip", arms: true, run: func(s *session) error {
		if err := first(s.arm, s.beat); err != nil {
			return err
		}
		s.forget()
		if _, err := s.must(protocol.VerbDisarm, ""); err != nil {
			return err
		}
		l, err := s.wait(patience, begins("ev off 3 "))
		if err == nil && l == nil {
			err = errorf("dis got no ev off 3")
		}
		return err
	}},
	{id: "P5.3b", what: "flags and V line tell of a latched trip", needs: "P6.4a", arms: true, run: func(s *session) error {
		if err := s.tripByBeat(); err != nil {
			return err
		}
		return s.withHex("x", func(all []fixed, _ int) error {
			for _, f := range kind(all, 'T') {
				if f.state() != protocol.Tripped || f.flags()&16 == 0 {
					return errorf("flags %02X", f.flags())
				}
			}
			for _, f := range kind(all, 'V') {
				if f.hex(8, 2) != uint32(protocol.CauseBeat) {
					return errorf("cause %d in the V line", f.hex(8, 2))
				}
			}
			return nil
		})
	}},
	{id: "P2.2d", what: "a latched trip stays latched after a cut", needs: "P6.4a", arms: true, run: func(s *session) error {
		err := s.tripByBeat()
		if err != nil {
			return err
		}
		_, cutErr := s.cut(can)
		return first(func() error { return s.inState(protocol.Tripped) }, func() error { return cutErr })
	}},
	{id: "P7.6a", what: "reset clears a trip and does not arm", needs: "P6.4a", arms: true, run: func(s *session) error {
		return first(s.tripByBeat, func() error { _, err := s.must(protocol.VerbReset, ""); return err },
			s.beat, func() error { return s.run(30 * time.Millisecond) }, func() error { return s.inState(protocol.Off) })
	}},
	{id: "P7.3c", what: "limits are not set while a trip is latched", needs: "P6.4a", arms: true, run: func(s *session) error {
		return first(s.tripByBeat, func() error { return s.stage(0, float(s.id.VoltsMax/20), protocol.RefState) })
	}},
	{id: "P7.7a", what: "the log counts stops up and has the newest first", arms: true, run: func(s *session) error {
		var was stopped
		for i := range 4 {
			if err := first(s.arm, s.beat, func() error { return s.run(30 * time.Millisecond) }, s.calm); err != nil {
				return err
			}
			l, err := s.stopLog(0)
			if err != nil {
				return err
			}
			if l.cause != protocol.CauseDisarmed || int32(l.off-l.beat) < 0 || l.off-l.beat > 2_000_000 {
				return errorf("after dis: cause %d, off %d µs, last heartbeat %d µs", l.cause, l.off, l.beat)
			}
			if i > 0 && (l.total != was.total+1 || int32(l.off-was.off) <= 0) {
				return errorf("total %d at %d µs, then total %d at %d µs", was.total, was.off, l.total, l.off)
			}
			was = l
		}
		return nil
	}},
	{id: "P7.7b", what: "at least four stops are kept", arms: true, run: func(s *session) error {
		for range 4 {
			if err := first(s.arm, s.beat, s.calm); err != nil {
				return err
			}
		}
		var was stopped
		for i := range 4 {
			l, err := s.stopLog(i)
			if err != nil {
				return err
			}
			if i > 0 && int32(was.off-l.off) <= 0 {
				return errorf("stop %d at %d µs is not older than the one before, %d µs", i, l.off, was.off)
			}
			was = l
		}
		return nil
	}},
	{id: "P7.7c", what: "a stop that is not kept is refused", run: func(s *session) error {
		return s.refused(protocol.VerbLog, "999", protocol.RefArgument)
	}},
}
