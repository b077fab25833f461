package conformance

import (
	"fmt"
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
)

// askLine sends a finished request line and returns its answer.
func (s *session) askLine(line []byte, n uint16) (answer, error) {
	s.drop(n)
	if err := s.send(line); err != nil {
		return answer{}, err
	}
	a, err := s.answerTo(n, patience)
	if err == nil && a == nil {
		err = errorf("%q is not answered", strings.TrimSpace(string(line)))
	}
	if err != nil {
		return answer{}, err
	}
	return *a, nil
}

var requestChecks = []check{
	{id: "P3.1a", what: "answers carry the number of their request, from 1 to 65535", run: func(s *session) error {
		for _, n := range []uint16{1, 9, 255, 256, 32768, 65535} {
			s.asked[n] = true
			if _, err := s.askLine(protocol.AppendRequest(nil, protocol.VerbInput, n, ""), n); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P3.2a", what: "an unknown verb gets code 3", run: func(s *session) error {
		for _, verb := range []string{"sing", "no", "ID", "idx", "n", "a-verb-that-is-rather-long"} {
			if err := s.refused(verb, "", protocol.RefUnknown); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P3.2b", what: "a request whose number cannot be read, or is 0, is ignored", run: func(s *session) error {
		for _, head := range []string{"nonce", "nonce 0", "nonce 007", "nonce x", "nonce -1", "nonce 65536", "nonce  5"} {
			s.forget()
			if err := first(func() error { return s.put(head) }, func() error { return s.run(50 * time.Millisecond) }); err != nil {
				return err
			}
			if s.count(begins("ok ")) > 0 {
				return errorf("%q was answered with ok", head)
			}
		}
		return s.goesOn()
	}},
	{id: "P3.2c", what: "arguments that mean nothing get code 4", run: func(s *session) error {
		for _, bad := range []string{"lim keep 1", "gain get walk 0", "rate 10 q t", "rate 10 x", "log x", "arm 12345678"} {
			verb, args, _ := strings.Cut(bad, " ")
			if err := s.refused(verb, args, protocol.RefArgument); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P3.3a", what: "the same line again gets the same answer", run: func(s *session) error {
		line, n := s.nonceLine()
		one, err := s.askLine([]byte(line), n)
		for range 2 {
			if err != nil {
				return err
			}
			var two answer
			if two, err = s.askLine([]byte(line), n); err == nil && two.String() != one.String() {
				err = errorf("%v, then %v", one, two)
			}
		}
		return err
	}},
	{id: "P3.3b", what: "the same number with another CRC is another request", run: func(s *session) error {
		n := s.number()
		one, err := s.askLine(protocol.AppendRequest(nil, protocol.VerbLimit, n, "get 0"), n)
		if err != nil {
			return err
		}
		two, err := s.askLine(protocol.AppendRequest(nil, protocol.VerbLimit, n, "get 1"), n)
		if err == nil && (two.field(0) != "1" || one.field(0) != "0") {
			err = errorf("%v, then %v", one, two)
		}
		return err
	}},
	{id: "P3.3c", what: "a repeated refusal is the same refusal", run: func(s *session) error {
		n := s.number()
		line := protocol.AppendRequest(nil, "sing", n, "")
		for range 2 {
			if a, err := s.askLine(line, n); err != nil || a.ok || a.code != protocol.RefUnknown {
				return first(func() error { return err }, func() error { return errorf("%v, wanted no 3", a) })
			}
		}
		return nil
	}},
	{id: "P11.1a", what: "in is answered with four hex digits", run: func(s *session) error {
		a, err := s.must(protocol.VerbInput, "")
		if _, ok := protocol.ParseHex16([]byte(a.field(0))); err == nil && (!ok || len(a.fields) != 1) {
			err = errorf("in: %v", a)
		}
		return err
	}},
}

// cutLine is one answer to a cut.
type cutLine struct {
	count int
	us    uint32
}

func parseCut(body string) (cutLine, error) {
	w := strings.Split(body, " ")
	n, ok1 := protocol.ParseUint([]byte(at(w, 1)), 65535)
	us, ok2 := protocol.ParseUint([]byte(at(w, 2)), 1<<32-1)
	if !ok1 || !ok2 || len(w) != 3 {
		return cutLine{}, errorf("%q is no cut <count> <time>", body)
	}
	return cutLine{int(n), uint32(us)}, nil
}

// cut sends bytes that hold a cut byte and returns the first answer to it.
func (s *session) cut(p []byte) (cutLine, error) {
	s.forget()
	if err := s.send(p); err != nil {
		return cutLine{}, err
	}
	l, err := s.wait(patience, begins("cut "))
	if err != nil {
		return cutLine{}, err
	}
	if l == nil {
		return cutLine{}, errorf("%s is not answered", visible(p))
	}
	return parseCut(l.body)
}

// visible is bytes for a detail, shortened.
func visible(p []byte) string {
	q := strconv.Quote(string(p))
	if len(q) > 40 {
		q = fmt.Sprintf("%s… (%d bytes)", q[:40], len(p))
	}
	return q
}
