package conformance

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
)

// stream turns telemetry on for d and off again, and keeps what came. It
// returns the rate that the board promised.
func (s *session) stream(args string, d time.Duration) (hz int, err error) {
	a, err := s.must(protocol.VerbRate, args)
	if err != nil {
		return 0, err
	}
	n, ok := protocol.ParseUint([]byte(a.field(0)), 1_000_000)
	if !ok || len(a.fields) != 1 {
		return 0, errorf("rate: %v, wanted the rate that it will be", a)
	}
	s.forget()
	if err := s.run(d); err != nil {
		return 0, err
	}
	kept := s.lines
	_, err = s.must(protocol.VerbRate, "0 x t")
	s.lines = kept
	return int(n), err
}

// usual is a rate that every line above the slowest carries.
const usual = 50

var telemetryChecks = []check{
	{id: "P5.2a", what: "the hex form is 24 bytes of upper-case digits, of T, U and V lines", run: func(s *session) error {
		return s.withHex("xtu", func(all []fixed, _ int) error {
			for _, k := range []byte("TUV") {
				if len(kind(all, k)) == 0 {
					return errorf("no %c line in a second", k)
				}
			}
			return nil
		})
	}},
	{id: "P5.2b", what: "time goes up by whole loop periods, as the promised rate says", run: evenTime},
	{id: "P5.2c", what: "with the output off the volts are 0", run: func(s *session) error {
		return s.withHex("x", func(all []fixed, _ int) error {
			for _, f := range kind(all, 'T') {
				if f.volts() != 0 {
					return errorf("%d steps", f.volts())
				}
			}
			return nil
		})
	}},
	{id: "P5.2d", what: "the V line carries inputs, trip cause and boot count", run: func(s *session) error {
		in, err := s.must(protocol.VerbInput, "")
		if err != nil {
			return err
		}
		return s.withHex("x", func(all []fixed, _ int) error {
			for _, f := range kind(all, 'V') {
				if got := fmt.Sprintf("%04X", f.hex(4, 4)); got != in.field(0) || f.hex(8, 2) != 0 || int(f.hex(12, 4)) != s.boots {
					return errorf("inputs %s, cause %d, boot %d; in says %s, nothing is tripped, the identity says boot %d", got, f.hex(8, 2), f.hex(12, 4), in.field(0), s.boots)
				}
			}
			return nil
		})
	}},
	{id: "P5.3a", what: "the flags of a board that is off say so", arms: true, run: func(s *session) error {
		return s.withHex("x", func(all []fixed, _ int) error {
			for _, f := range kind(all, 'T') {
				if f.state() != protocol.Off || f.flags()&16 != 0 {
					return errorf("flags %02X", f.flags())
				}
			}
			return nil
		})
	}},
	{id: "P5.4a", what: "numbers count up by one for each T line, modulo 256", run: counting},
	{id: "P5.4b", what: "U and V lines carry the number of the T line that follows", run: func(s *session) error {
		return s.withHex("xtu", func(all []fixed, _ int) error {
			for i, f := range all[:max(0, len(all)-2)] {
				next := i
				for all[next].kind != 'T' && next < len(all)-1 {
					next++
				}
				if all[next].kind == 'T' && f.seq != all[next].seq {
					return errorf("%c %d before T %d", f.kind, f.seq, all[next].seq)
				}
			}
			return nil
		})
	}},
	{id: "P5.5a", what: "decimal t lines are at most 64 bytes and have their words", run: func(s *session) error {
		return s.withText("25 d t", func() error {
			for _, l := range s.lines {
				if len(l.text) > 63 {
					return errorf("%q is %d bytes with its end", l.text, len(l.text)+1)
				}
			}
			return nil
		})
	}},
	{id: "P5.5b", what: "decimal u lines stand before the t line of their number", run: func(s *session) error {
		return s.withText("20 d tu", func() error {
			n := 0
			for i, l := range s.lines {
				if !l.good || !strings.HasPrefix(l.body, "u ") || i+1 >= len(s.lines) || !strings.HasPrefix(s.lines[i+1].body, "t ") {
					continue
				}
				seq, err := parseExtra(l.body)
				if err != nil {
					return err
				}
				if t, err := parseText(s.lines[i+1].body); err != nil || t.seq != seq {
					return errorf("%q before %q", l.body, s.lines[i+1].body)
				}
				n++
			}
			if n == 0 {
				return errors.New("no u line before a t line")
			}
			return nil
		})
	}},
	{id: "P5.5c", what: "tel sends one t line, and under a number ok besides", run: func(s *session) error {
		s.forget()
		if err := first(func() error { _, err := s.must(protocol.VerbTel, ""); return err },
			func() error { return s.run(100 * time.Millisecond) }); err != nil {
			return err
		}
		if n := s.count(begins("t ")); n != 1 {
			return errorf("%d t lines", n)
		}
		return nil
	}},
	{id: "P5.6a", what: "lines come at the rate that was promised", run: func(s *session) error {
		hz, err := s.stream("40 x t", 2*time.Second)
		if err != nil {
			return err
		}
		all, err := s.fixedLines()
		if n := len(kind(all, 'T')); err == nil && math.Abs(float64(n-2*hz)) > 0.1*float64(hz)+2 {
			err = errorf("%d lines in 2 s, promised were %d Hz", n, hz)
		}
		return err
	}},
	{id: "P5.6b", what: "0 Hz ends it", run: func(s *session) error {
		if _, err := s.stream("50 x tu", 100*time.Millisecond); err != nil {
			return err
		}
		if err := s.run(50 * time.Millisecond); err != nil {
			return err
		}
		s.forget()
		if err := s.run(300 * time.Millisecond); err != nil {
			return err
		}
		if len(s.lines) > 0 {
			return errorf("%q still came", s.lines[0].text)
		}
		return nil
	}},
	{id: "P5.6c", what: "a rate that would fill the line over 70 % is refused", run: fullLine},
	{id: "P5.6d", what: "after that refusal it goes on as before", run: afterRefusal},
	{id: "P5.6e", what: "V lines come at least four times a second", run: func(s *session) error {
		return s.withHex("x", func(all []fixed, _ int) error {
			if n := len(kind(all, 'V')); n < 4 {
				return errorf("%d in a second", n)
			}
			return nil
		})
	}},
	{id: "P4.1d", what: "the identity is whole also while telemetry flows", run: func(s *session) error {
		if _, err := s.must(protocol.VerbRate, "30 x t"); err != nil {
			return err
		}
		lines, err := s.readIdentity(false)
		_, after := s.must(protocol.VerbRate, "0 x t")
		if err == nil && len(lines) != len(s.idLines) {
			err = errorf("%d lines, before %d", len(lines), len(s.idLines))
		}
		return first(func() error { return err }, func() error { return after })
	}},
}

// withHex streams a second of hex lines and judges them.
func (s *session) withHex(form string, judge func([]fixed, int) error) error {
	what := "t"
	if form == "xtu" {
		what = "tu"
	}
	hz, err := s.stream(fmt.Sprintf("%d x %s", usual, what), 1050*time.Millisecond)
	if err != nil {
		return err
	}
	all, err := s.fixedLines()
	if err != nil {
		return err
	}
	if len(kind(all, 'T')) == 0 {
		return errors.New("no T line in a second")
	}
	return judge(all, hz)
}

// withText streams a second of decimal lines, reads every t line and judges.
func (s *session) withText(args string, judge func() error) error {
	if _, err := s.stream(args, time.Second); err != nil {
		return err
	}
	n := 0
	for _, l := range s.lines {
		if !l.good || l.hex || !strings.HasPrefix(l.body, "t ") {
			continue
		}
		if _, err := parseText(l.body); err != nil {
			return err
		}
		n++
	}
	if n == 0 {
		return errors.New("no t line in a second")
	}
	return judge()
}

func evenTime(s *session) error {
	return s.withHex("x", func(all []fixed, hz int) error {
		ts := kind(all, 'T')
		loop := float64(s.id.Loop.Microseconds())
		for i := 1; i < len(ts); i++ {
			if ts[i].seq != ts[i-1].seq+1 {
				continue // one was lost on the way
			}
			dt := float64((ts[i].us() - ts[i-1].us()) & 0xFFFFFF)
			if n := math.Round(dt / loop); n < 1 || math.Abs(dt-n*loop) > 0.2*loop+2 {
				return errorf("%g µs between two lines, the loop takes %g µs", dt, loop)
			}
			if math.Abs(1e6/dt-float64(hz)) > 0.51+0.02*float64(hz) {
				return errorf("%g µs between two lines, promised were %d Hz", dt, hz)
			}
		}
		return nil
	})
}

// counting watches more than 256 hex lines and some decimal ones.
func counting(s *session) error {
	hz, err := s.stream("100 x t", 3*time.Second)
	if err != nil {
		return err
	}
	all, err := s.fixedLines()
	if err != nil {
		return err
	}
	ts := kind(all, 'T')
	if len(ts) < 2*hz {
		return errorf("%d lines in 3 s, promised were %d Hz", len(ts), hz)
	}
	for i := 1; i < len(ts); i++ {
		if ts[i].seq != ts[i-1].seq+1 {
			return errorf("%d, then %d", ts[i-1].seq, ts[i].seq)
		}
	}
	if _, err := s.stream("20 d t", time.Second); err != nil {
		return err
	}
	last := -1
	for _, l := range s.lines {
		if !l.good || !strings.HasPrefix(l.body, "t ") {
			continue
		}
		t, err := parseText(l.body)
		if err != nil {
			return err
		}
		if last >= 0 && t.seq != uint8(last+1) {
			return errorf("decimal: %d, then %d", last, t.seq)
		}
		last = int(t.seq)
	}
	return nil
}

// fullLine asks for more and more. Whatever is promised must fit: what comes is
// weighed.
func fullLine(s *session) error {
	may := 0.7 * float64(s.id.Baud) / 10 // bytes a second
	if s.id.Baud == 0 {
		return leftOut("the board does not say its line rate")
	}
	loop := 1 / s.id.Loop.Seconds()
	for _, form := range []string{"x t", "x tu", "d t", "d tu"} {
		for _, share := range []float64{1, 0.5, 0.25, 0.1} {
			args := strconv.Itoa(max(1, int(share*loop))) + " " + form
			a, err := s.ask(protocol.VerbRate, args)
			if err != nil {
				return err
			}
			if !a.ok && a.code == protocol.RefLineFull {
				continue
			}
			if !a.ok {
				return errorf("rate %s: %v, wanted ok or no 9", args, a)
			}
			s.forget()
			if err := s.run(500 * time.Millisecond); err != nil {
				return err
			}
			n := 0
			for _, l := range s.lines {
				n += len(l.text) + 1
			}
			if _, err := s.must(protocol.VerbRate, "0 x t"); err != nil {
				return err
			}
			if got := 2 * float64(n); got > 1.05*may+200 {
				return errorf("rate %s was promised and gives %.0f bytes a second, more than 70 %% of %d baud", args, got, s.id.Baud)
			}
		}
	}
	return nil
}

func afterRefusal(s *session) error {
	fill := strconv.Itoa(int(1 / s.id.Loop.Seconds()))
	if _, err := s.must(protocol.VerbRate, "20 x t"); err != nil {
		return err
	}
	a, err := s.ask(protocol.VerbRate, fill+" d tu")
	if err != nil {
		return err
	}
	if a.ok {
		_, err := s.must(protocol.VerbRate, "0 x t")
		return first(func() error { return err }, func() error { return leftOut("the line carries every rate of this loop") })
	}
	s.forget()
	if err := s.run(time.Second); err != nil {
		return err
	}
	all, err := s.fixedLines()
	if n := len(kind(all, 'T')); err == nil && (n < 15 || n > 25) {
		err = errorf("%d lines in a second, 20 Hz had been promised before", n)
	}
	_, after := s.must(protocol.VerbRate, "0 x t")
	return first(func() error { return err }, func() error { return after })
}
