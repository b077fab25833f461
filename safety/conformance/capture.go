package conformance

import (
	"fmt"
	"strconv"
	"time"

	"gainwright/protocol"
)

// digitsOf is the length of one captured sample in digits.
const digitsOf = 12

// captured is what cap state says.
type captured struct {
	phase   string
	samples int
	stepUS  int64
}

func (s *session) capState() (captured, error) {
	a, err := s.must(protocol.VerbCap, "state")
	if err != nil {
		return captured{}, err
	}
	n, ok1 := protocol.ParseUint([]byte(a.field(1)), 1<<31)
	_, ok2 := protocol.ParseUint([]byte(a.field(2)), 1<<32-1)
	step, ok3 := protocol.ParseUint([]byte(a.field(3)), 1<<31)
	if !ok1 || !ok2 || !ok3 || len(a.fields) != 4 {
		return captured{}, errorf("cap state: %v, wanted phase, samples, time, step", a)
	}
	return captured{a.field(0), int(n), step}, nil
}

// capturing leaves a check out where there is no capture.
func capturing(f func(*session) error) func(*session) error {
	return func(s *session) error {
		if !s.id.Can("capture") {
			return leftOut("the board has no capture")
		}
		return f(s)
	}
}

// fillCapture captures n samples at a decimation and waits for them.
func (s *session) fillCapture(every, n int) (captured, error) {
	if _, err := s.must(protocol.VerbCap, fmt.Sprintf("now %d %d", every, n)); err != nil {
		return captured{}, err
	}
	takes := time.Duration(every*n)*s.id.Loop + 50*time.Millisecond
	if err := s.run(takes); err != nil {
		return captured{}, err
	}
	c, err := s.capState()
	if err == nil && (c.phase != "full" || c.samples != n) {
		err = errorf("%s with %d samples %v after cap now %d %d", c.phase, c.samples, takes, every, n)
	}
	return c, err
}

// piece reads up to eight samples.
func (s *session) piece(i, n int) (string, error) {
	a, err := s.must(protocol.VerbCap, "get "+strconv.Itoa(i))
	if err != nil {
		return "", err
	}
	want := digitsOf * min(8, n-i)
	ok := len(a.fields) == 2 && a.field(0) == strconv.Itoa(i) && len(a.field(1)) == want
	for j := 0; ok && j < want; j += 4 {
		_, ok = protocol.ParseHex16([]byte(a.field(1)[j : j+4]))
	}
	if !ok {
		return "", errorf("cap get %d: %v, wanted %d and %d digits", i, a, i, want)
	}
	return a.field(1), nil
}

// captureSize is a number of samples that does not fill its last piece.
func (s *session) captureSize() int { return min(s.id.CaptureN, 43) }

var captureChecks = []check{
	{id: "P10.1a", what: "cap now fills with as many samples as were asked for", run: capturing(func(s *session) error {
		_, err := s.fillCapture(1, s.captureSize())
		return err
	})},
	{id: "P10.1b", what: "a capture that does not fit is refused with code 8", run: capturing(func(s *session) error {
		big := strconv.Itoa(s.id.CaptureN + 1)
		return first(func() error { return s.refused(protocol.VerbCap, "now 1 "+big, protocol.RefLimit) },
			func() error { return s.refused(protocol.VerbCap, "arm 1 0 "+big, protocol.RefLimit) })
	})},
	{id: "P10.1c", what: "cap arm waits while nothing is driven", run: capturing(func(s *session) error {
		n := s.captureSize()
		if _, err := s.must(protocol.VerbCap, fmt.Sprintf("arm 1 %d %d", n/4, n)); err != nil {
			return err
		}
		if err := s.run(time.Duration(2*n)*s.id.Loop + 20*time.Millisecond); err != nil {
			return err
		}
		c, err := s.capState()
		if err == nil && c.phase != "wait" {
			err = errorf("%s, wanted wait", c.phase)
		}
		return err
	})},
	{id: "P10.2a", what: "state gives the step between samples", run: capturing(func(s *session) error {
		for _, every := range []int{1, 3} {
			c, err := s.fillCapture(every, 9)
			if err != nil {
				return err
			}
			if want := int64(every) * s.id.Loop.Microseconds(); c.stepUS != want {
				return errorf("%d µs at decimation %d, wanted %d", c.stepUS, every, want)
			}
		}
		return nil
	})},
	{id: "P10.3a", what: "the pieces are whole, and crc is over their digits", run: capturing(func(s *session) error {
		n := s.captureSize()
		if _, err := s.fillCapture(1, n); err != nil {
			return err
		}
		var all string
		for i := 0; i < n; i += 8 {
			p, err := s.piece(i, n)
			if err != nil {
				return err
			}
			all += p
		}
		a, err := s.must(protocol.VerbCap, "crc")
		if want := hex4(protocol.CRC16([]byte(all))); err == nil && (a.field(0) != want || len(a.fields) != 1) {
			err = errorf("cap crc: %v, over the digits that came it is %s", a, want)
		}
		return err
	})},
	{id: "P10.3b", what: "an index behind the last sample is refused", run: capturing(func(s *session) error {
		if _, err := s.fillCapture(1, 9); err != nil {
			return err
		}
		return s.refused(protocol.VerbCap, "get 9", protocol.RefArgument)
	})},
	{id: "P10.4a", what: "pieces come again, in any order, from any index", run: capturing(func(s *session) error {
		n := s.captureSize()
		if _, err := s.fillCapture(1, n); err != nil {
			return err
		}
		one, err := s.piece(0, n)
		for _, i := range []int{n - 1, n / 2, 0} {
			if err == nil {
				_, err = s.piece(i, n)
			}
		}
		var again, shifted string
		if err == nil {
			again, err = s.piece(0, n)
		}
		if err == nil {
			shifted, err = s.piece(1, n)
		}
		if err == nil && (again != one || shifted[:digitsOf*(min(8, n)-1)] != one[digitsOf:]) {
			err = errorf("%s, then %s, from 1 %s", one, again, shifted)
		}
		return err
	})},
	{id: "P3.1b", what: "a board without capture says so with code 13", run: func(s *session) error {
		if s.id.Can("capture") {
			return leftOut("the board has a capture")
		}
		return s.refused(protocol.VerbCap, "state", protocol.RefNotHere)
	}},
}
