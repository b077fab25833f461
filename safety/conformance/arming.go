package conformance

import (
	"fmt"
	"time"

	"gainwright/protocol"
)

var armingChecks = []check{
	{id: "P6.2a", what: "arm with the right number and CRC gives a token; the board is armed", arms: true, run: func(s *session) error {
		return first(s.arm, s.beat, func() error { return s.inState(protocol.Armed) })
	}},
	{id: "P6.4a", what: "an armed board whose heartbeats end trips with cause 10", arms: true, run: func(s *session) error {
		return first(s.tripByBeat, func() error { return s.inState(protocol.Tripped) })
	}},
	{id: "P6.1a", what: "one-time numbers are eight hex digits, each different", run: func(s *session) error {
		seen := map[string]bool{}
		for range 24 {
			number, err := s.nonce()
			if err != nil {
				return err
			}
			if seen[number] {
				return errorf("%s came twice", number)
			}
			seen[number] = true
		}
		return nil
	}},
	{id: "P6.1b", what: "a one-time number is good for 2 s", arms: true, run: func(s *session) error {
		number, err := s.nonce()
		return first(func() error { return err }, func() error { return s.run(2100 * time.Millisecond) },
			func() error { return s.refused(protocol.VerbArm, s.armArgs(number), protocol.RefOldNumber) })
	}},
	{id: "P6.1c", what: "a one-time number is good for one arm", arms: true, run: func(s *session) error {
		number, err := s.nonce()
		return first(func() error { return err },
			func() error { _, err := s.must(protocol.VerbArm, s.armArgs(number)); return err }, s.calm,
			func() error { return s.refused(protocol.VerbArm, s.armArgs(number), protocol.RefOldNumber) })
	}},
	{id: "P6.1d", what: "a newer one-time number voids the one before", arms: true, run: func(s *session) error {
		number, err := s.nonce()
		return first(func() error { return err }, func() error { _, err := s.nonce(); return err },
			func() error { return s.refused(protocol.VerbArm, s.armArgs(number), protocol.RefOldNumber) })
	}},
	{id: "P6.2b", what: "a number that was never given out is refused", arms: true, run: func(s *session) error {
		number, err := s.nonce()
		other := "00000000"
		if number == other {
			other = "00000001"
		}
		return first(func() error { return err }, func() error { return s.refused(protocol.VerbArm, s.armArgs(other), protocol.RefOldNumber) })
	}},
	{id: "P6.2c", what: "a number that was refused is used up", arms: true, run: func(s *session) error {
		number, err := s.nonce()
		return first(func() error { return err },
			func() error {
				return s.refused(protocol.VerbArm, fmt.Sprintf("%s %04X", number, s.limitsCRC^1), protocol.RefLimits)
			},
			func() error { return s.refused(protocol.VerbArm, s.armArgs(number), protocol.RefOldNumber) })
	}},
	{id: "P6.2d", what: "the CRC of other limits is refused", arms: true, run: func(s *session) error {
		number, err := s.nonce()
		return first(func() error { return err },
			func() error {
				return s.refused(protocol.VerbArm, fmt.Sprintf("%s %04X", number, s.limitsCRC^0x8000), protocol.RefLimits)
			},
			func() error { return s.inState(protocol.Off) })
	}},
	{id: "P6.2e", what: "arm is refused while a trip is latched", needs: "P6.4a", arms: true, run: func(s *session) error {
		return first(s.tripByBeat, func() error { return s.armRefused(protocol.RefTripped) }, func() error { return s.inState(protocol.Tripped) })
	}},
	{id: "P6.2f", what: "arm is refused while armed, and the first arm goes on", arms: true, run: func(s *session) error {
		return first(s.arm, s.beat, func() error { return s.armRefused(protocol.RefState) },
			s.beat, func() error { return s.inState(protocol.Armed) })
	}},
	{id: "P6.2g", what: "tokens differ from arm to arm", arms: true, run: func(s *session) error {
		seen := map[uint16]int{}
		for range 6 {
			if err := first(s.arm, s.calm); err != nil {
				return err
			}
			seen[s.token]++
		}
		if len(seen) < 4 {
			return errorf("6 arms gave %d different tokens", len(seen))
		}
		return nil
	}},
	{id: "P6.4b", what: "the timeout is between 0.8 times the limit and the limit and 20 ms", needs: "P6.4a", arms: true, run: func(s *session) error {
		for _, limit := range []float64{s.beatLimit(), min(2.5*s.beatLimit(), s.id.BeatMax.Seconds())} {
			if err := first(s.calm, func() error { return s.putLimit(protocol.LimBeat, limit) }, func() error { return s.timeout(limit) }); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P6.4c", what: "the console's clock agrees about the timeout", needs: "P6.4a", arms: true, run: func(s *session) error {
		if err := first(s.arm, s.beat); err != nil {
			return err
		}
		from := s.line.Now()
		if err := s.awaitTrip(protocol.CauseBeat); err != nil {
			return err
		}
		took, limit := (s.line.Now() - from).Seconds(), s.beatLimit()
		if took < 0.8*limit-0.02 || took > limit+0.15 {
			return errorf("the trip was heard %.3f s after the last heartbeat, the limit is %.3f s", took, limit)
		}
		return nil
	}},
	{id: "P6.3a", what: "heartbeats keep the board armed", arms: true, run: func(s *session) error {
		return first(s.arm, func() error { return s.alive(time.Duration(4 * s.beatLimit() * float64(time.Second))) }, func() error { return s.inState(protocol.Armed) })
	}},
	{id: "P6.3b", what: "a doubled number is no heartbeat", needs: "P6.4a", arms: true, run: func(s *session) error {
		return s.deafTo(func(i int) []byte { return protocol.AppendBeat(nil, s.k, s.token) })
	}},
	{id: "P6.3c", what: "an older number is no heartbeat", needs: "P6.4a", arms: true, run: func(s *session) error {
		return s.deafTo(func(i int) []byte { return protocol.AppendBeat(nil, s.k-1-uint16(i), s.token) })
	}},
	{id: "P6.3d", what: "another token is no heartbeat", needs: "P6.4a", arms: true, run: func(s *session) error {
		return s.deafTo(func(i int) []byte { return protocol.AppendBeat(nil, s.k+1+uint16(i), s.token^0x0010) })
	}},
	{id: "P6.3e", what: "a line of motion without its CRC is no heartbeat", needs: "P6.4a", arms: true, run: func(s *session) error {
		return s.deafTo(func(i int) []byte { return fmt.Appendf(nil, "hb %d %04X\n", s.k+1+uint16(i), s.token) })
	}},
	{id: "P6.3f", what: "numbers are compared in serial arithmetic, across 65535", arms: true, run: func(s *session) error {
		if err := s.arm(); err != nil {
			return err
		}
		pause := time.Duration(s.beatLimit() / 3 * float64(time.Second))
		for _, k := range []uint16{1, 20000, 40000, 60000, 5000, 30000, 55000, 65535, 0, 1} {
			s.k = k - 1
			if err := first(s.beat, func() error { return s.run(pause) }); err != nil {
				return err
			}
		}
		return s.inState(protocol.Armed)
	}},
	{id: "P6.3g", what: "lines of motion are not answered", arms: true, run: func(s *session) error {
		if err := s.arm(); err != nil {
			return err
		}
		s.forget()
		if err := s.alive(time.Duration(2 * s.beatLimit() * float64(time.Second))); err != nil {
			return err
		}
		if len(s.lines) > 0 {
			return errorf("%q came", s.lines[0].text)
		}
		return nil
	}},
	{id: "P6.6a", what: "an arm without a drive line lapses after 60 s, whatever the heartbeats", arms: true, run: lapse},
	{id: "P6.7a", what: "dis ends an arm; the token is void", arms: true, run: func(s *session) error {
		return first(s.arm, s.beat, func() error { _, err := s.must(protocol.VerbDisarm, ""); return err },
			func() error { return s.put("dv 2 " + hex4(s.token) + " 0") }, func() error { return s.run(50 * time.Millisecond) },
			func() error { return s.inState(protocol.Off) })
	}},
	{id: "P6.7b", what: "ramp is refused while nothing is driven", arms: true, run: func(s *session) error {
		want := protocol.RefState
		if !s.id.Can("ramp") {
			want = protocol.RefNotHere
		}
		return first(s.arm, s.beat, func() error { return s.refused(protocol.VerbRamp, hex4(s.token), want) })
	}},
	{id: "P12.1b", what: "no line of motion moves a board that is not armed", arms: true, run: func(s *session) error {
		for _, token := range []uint16{0, s.token, 0xFFFF} {
			for _, verb := range []string{"dv", "ds", "hb"} {
				body := "1 " + hex4(token)
				if verb != "hb" {
					body += " 0"
				}
				if err := s.put(verb + " " + body); err != nil {
					return err
				}
			}
		}
		return first(func() error { return s.run(50 * time.Millisecond) }, func() error { return s.inState(protocol.Off) })
	}},
}

// armRefused asks for a number and wants the arm refused.
func (s *session) armRefused(code protocol.Refusal) error {
	number, err := s.nonce()
	if err != nil {
		return err
	}
	return s.refused(protocol.VerbArm, s.armArgs(number), code)
}

// timeout trips the board by silence and judges the log's times.
func (s *session) timeout(limit float64) error {
	s.forget()
	if err := first(s.arm, s.beat); err != nil {
		return err
	}
	if err := s.run(time.Duration(limit*float64(time.Second)) + 100*time.Millisecond); err != nil {
		return err
	}
	l, err := s.stopLog(0)
	if err != nil {
		return err
	}
	held := float64(l.off-l.beat) / 1e6
	if l.cause != protocol.CauseBeat || held < 0.8*limit || held > limit+0.020 {
		return errorf("cause %d, off %.4f s after the last heartbeat, the limit is %.4f s", l.cause, held, limit)
	}
	return nil
}

// deafTo arms, beats at a number in the middle, then sends lines that must not
// count, and wants the board to trip all the same.
func (s *session) deafTo(line func(i int) []byte) error {
	s.forget()
	if err := s.arm(); err != nil {
		return err
	}
	s.k = 1000
	if err := s.beat(); err != nil {
		return err
	}
	pause := time.Duration(s.beatLimit() / 5 * float64(time.Second))
	for i := range 12 {
		if err := first(func() error { return s.run(pause) }, func() error { return s.send(line(i)) }); err != nil {
			return err
		}
	}
	if s.count(begins("ev trip 10 ")) == 0 {
		return errorf("the board did not trip: the lines kept it armed")
	}
	return nil
}

func lapse(s *session) error {
	if s.o.Brief {
		return leftOut("it takes a minute, which was not wanted")
	}
	if err := first(s.arm, func() error { return s.alive(58 * time.Second) }, func() error { return s.inState(protocol.Armed) }); err != nil {
		return err
	}
	s.forget()
	if err := s.alive(4 * time.Second); err != nil {
		return err
	}
	if s.count(begins("ev off 3 ")) != 1 {
		return errorf("62 s after the arm there was no ev off 3")
	}
	return s.inState(protocol.Off)
}
