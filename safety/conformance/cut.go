package conformance

import (
	"bytes"
	"slices"
	"time"

	"gainwright/protocol"
)

var can = []byte{protocol.Cut}

// cutAnswered wants the bytes answered by a cut line.
func cutAnswered(p []byte) func(*session) error {
	return func(s *session) error {
		_, err := s.cut(p)
		return first(func() error { return err }, s.endLine, s.goesOn)
	}
}

// endLine ends what may be a half line and drops the complaint about it.
func (s *session) endLine() error {
	return first(func() error { return s.send([]byte("\n")) }, func() error { return s.run(30 * time.Millisecond) })
}

var cutChecks = []check{
	{id: "P2.1a", what: "the cut byte alone is answered", run: cutAnswered(can)},
	{id: "P2.1b", what: "the cut byte throws a half-received line away, at every place of it", run: cutInsideLine},
	{id: "P2.1c", what: "the cut byte works inside garbage", run: cutAnswered(append([]byte("\x80\xff\x00;;\x07"), protocol.Cut))},
	{id: "P2.1d", what: "the cut byte works inside a line that is too long", run: cutAnswered(append(bytes.Repeat([]byte("x"), 400), protocol.Cut))},
	{id: "P2.1e", what: "the cut byte works right behind a request, and between CR and LF", run: func(s *session) error {
		line, _ := s.nonceLine()
		return first(func() error { return cutAnswered(append([]byte(line), protocol.Cut))(s) },
			func() error { return cutAnswered([]byte("\r\x18\n"))(s) })
	}},
	{id: "P2.1f", what: "the cut byte is answered while telemetry flows", run: func(s *session) error {
		if _, err := s.must(protocol.VerbRate, "50 x t"); err != nil {
			return err
		}
		err := first(func() error { return s.run(100 * time.Millisecond) }, func() error { return cutAnswered(can)(s) })
		_, after := s.must(protocol.VerbRate, "0 x t")
		return first(func() error { return err }, func() error { return after })
	}},
	{id: "P2.2a", what: "after a cut an armed board is off", arms: true, run: func(s *session) error {
		return armedThen(s, func() error { _, err := s.cut(can); return err })
	}},
	{id: "P2.2b", what: "after a cut its one-time number is void", arms: true, run: func(s *session) error {
		number, err := s.nonce()
		if err != nil {
			return err
		}
		_, cutErr := s.cut(can)
		return first(func() error { return s.refused(protocol.VerbArm, s.armArgs(number), protocol.RefOldNumber) }, func() error { return cutErr })
	}},
	{id: "P2.2c", what: "after a cut the token is void", arms: true, run: func(s *session) error {
		return first(s.arm, s.beat, func() error { _, err := s.cut(can); return err },
			func() error { return s.put("dv 2 " + hex4(s.token) + " 0") },
			func() error { return s.run(50 * time.Millisecond) }, func() error { return s.inState(protocol.Off) })
	}},
	{id: "P2.3a", what: "each cut counts up by one", run: func(s *session) error {
		one, err := s.cut(can)
		for range 3 {
			if err != nil {
				return err
			}
			var two cutLine
			if two, err = s.cut(can); err == nil && two.count != (one.count+1)%65536 {
				err = errorf("count %d, then %d", one.count, two.count)
			}
			one = two
		}
		return err
	}},
	{id: "P2.3b", what: "its time runs in microseconds", run: func(s *session) error {
		one, err := s.cut(can)
		if err != nil {
			return err
		}
		from := s.line.Now()
		if err = s.run(time.Second); err != nil {
			return err
		}
		took := s.line.Now() - from
		two, err := s.cut(can)
		return first(func() error { return err }, func() error { return s.alike(time.Duration(two.us-one.us)*time.Microsecond, took) })
	}},
	{id: "P2.3c", what: "of several cut bytes in one go each is counted", run: func(s *session) error {
		one, err := s.cut(can)
		if err != nil {
			return err
		}
		if err := first(func() error { return s.send(bytes.Repeat(can, 20)) }, func() error { return s.run(200 * time.Millisecond) }); err != nil {
			return err
		}
		two, err := s.cut(can)
		if err == nil && two.count != (one.count+21)%65536 {
			err = errorf("20 cut bytes in one go and one more counted from %d to %d", one.count, two.count)
		}
		return err
	}},
	{id: "P2.4a", what: "bare stop does the same", arms: true, run: func(s *session) error {
		return armedThen(s, func() error { _, err := s.cut([]byte("stop\n")); return err })
	}},
	{id: "P2.4b", what: "stop as a request does the same, and is answered", arms: true, run: func(s *session) error {
		return armedThen(s, func() error {
			s.forget()
			if _, err := s.must(protocol.VerbStop, ""); err != nil {
				return err
			}
			l, err := s.wait(patience, begins("cut "))
			if err == nil && l == nil {
				err = errorf("stop as a request got no cut line")
			}
			return err
		})
	}},
}

// armedThen arms, acts and wants the board off.
func armedThen(s *session, act func() error) error {
	return first(s.arm, s.beat, func() error { return s.inState(protocol.Armed) }, act, func() error { return s.inState(protocol.Off) })
}

// cutInsideLine puts a cut byte at every place of a request.
func cutInsideLine(s *session) error {
	for place := 1; ; place++ {
		line, n := s.nonceLine()
		if place >= len(line) {
			return s.goesOn()
		}
		if _, err := s.cut(slices.Concat([]byte(line[:place]), can, []byte(line[place:]))); err != nil {
			return err
		}
		if a, err := s.answerTo(n, 12*time.Millisecond); err != nil || a != nil {
			return first(func() error { return err }, func() error { return errorf("cut at character %d, the line was still answered: %v", place+1, a) })
		}
	}
}

// alike wants a span of the board's clock to be that of the console's, within a
// tenth and 50 ms: enough to tell a wrong unit from a line that is late.
func (s *session) alike(board, console time.Duration) error {
	if d := board - console; d.Abs() > console/10+50*time.Millisecond {
		return errorf("%v passed on the board, %v on the console", board, console)
	}
	return nil
}

func hex4(v uint16) string { return string(protocol.AppendHex16(nil, v)) }
