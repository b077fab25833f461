package conformance

import (
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
)

// noAnswer wants that request n is not answered with ok within d.
func (s *session) noAnswer(n uint16, d time.Duration) error {
	a, err := s.answerTo(n, d)
	if err == nil && a != nil && a.ok {
		err = errorf("it was answered with %v", a)
	}
	return err
}

// complains sends bytes and wants the complaint with the code, then that the
// board goes on with the next line.
func (s *session) complains(p string, code protocol.Refusal) error {
	s.forget()
	if err := first(
		func() error { return s.run(15 * time.Millisecond) }, // P1.4: the complaint before may still hold this one back
		func() error { return s.send([]byte(p)) },
	); err != nil {
		return err
	}
	l, err := s.wait(patience, begins("no 0 "))
	if err != nil {
		return err
	}
	if l == nil || !strings.HasPrefix(l.body+" ", "no 0 "+strconv.Itoa(int(code))+" ") {
		got := "nothing"
		if l != nil {
			got = l.body
		}
		return errorf("answered by %s, wanted no 0 %d", got, code)
	}
	return s.goesOn()
}

// goesOn wants that the board answers the next line.
func (s *session) goesOn() error {
	_, err := s.must(protocol.VerbInput, "")
	return err
}

// nonceLine is a request with an effect that shows, under a number of its own.
func (s *session) nonceLine() (string, uint16) {
	n := s.number()
	return string(protocol.AppendRequest(nil, protocol.VerbNonce, n, "")), n
}

var lineChecks = []check{
	{id: "P1.1a", what: "a CR before the LF is ignored", run: func(s *session) error {
		line, n := s.nonceLine()
		if err := s.send([]byte(strings.Replace(line, "\n", "\r\n", 1))); err != nil {
			return err
		}
		a, err := s.answerTo(n, patience)
		if err == nil && (a == nil || !a.ok) {
			err = errorf("%v, wanted ok", a)
		}
		return err
	}},
	{id: "P1.1b", what: "a line of 128 bytes with its end is taken", run: func(s *session) error {
		n := s.number()
		body := "zz " + strconv.Itoa(int(n)) + " "
		body += strings.Repeat("x", protocol.LineMax-6-len(body))
		if err := s.put(body); err != nil {
			return err
		}
		a, err := s.answerTo(n, patience)
		if err == nil && (a == nil || a.ok || a.code != protocol.RefUnknown) {
			err = errorf("%v, wanted no 3", a)
		}
		return err
	}},
	{id: "P1.1c", what: "an empty line is not answered", run: func(s *session) error {
		s.forget()
		err := first(func() error { return s.send([]byte("\n\r\n")) }, func() error { return s.run(60 * time.Millisecond) })
		if err == nil && s.count(begins("no 0")) > 0 {
			err = errorf("an empty line was answered")
		}
		return err
	}},
	{id: "P1.2b", what: "a line with a wrong CRC does nothing and gets no 0 1", run: func(s *session) error {
		line, n := s.nonceLine()
		wrong := []byte(line)
		wrong[len(wrong)-2] ^= 1
		if !strings.Contains("0123456789ABCDEF", string(wrong[len(wrong)-2])) {
			wrong[len(wrong)-2] = '0'
		}
		return first(func() error { return s.complains(string(wrong), protocol.RefBadCRC) }, func() error { return s.noAnswer(n, 0) })
	}},
	{id: "P1.2c", what: "a wrong character at any place of a line is found", run: everyPlace},
	{id: "P1.2d", what: "CRC digits in lower case are wrong", run: func(s *session) error {
		line, n := "", uint16(0)
		for strings.ToLower(line[max(0, len(line)-5):]) == line[max(0, len(line)-5):] {
			line, n = s.nonceLine()
		}
		low := line[:len(line)-5] + strings.ToLower(line[len(line)-5:])
		return first(func() error { return s.complains(low, protocol.RefBadCRC) }, func() error { return s.noAnswer(n, 0) })
	}},
	{id: "P1.2e", what: "a request without a CRC does nothing and gets no 0 1", run: func(s *session) error {
		line, n := s.nonceLine()
		return first(func() error { return s.complains(line[:len(line)-6]+"\n", protocol.RefBadCRC) }, func() error { return s.noAnswer(n, 0) })
	}},
	{id: "P1.3a", what: "integers with leading zeros, plus sign or too many digits are refused", run: func(s *session) error {
		for _, bad := range []string{"00", "+0", "-0", "0.0", "4294967296", "99999999999", ""} {
			if err := s.refused(protocol.VerbLimit, "get "+bad, protocol.RefArgument); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P1.3b", what: "floats that are not eight upper-case hex digits are refused", run: func(s *session) error {
		for _, bad := range []string{"3dcccccd", "3DCCCCC", "3DCCCCCD0", "0.1", "3DCCCCCG"} {
			if err := s.refused(protocol.VerbLimit, "set 0 "+bad, protocol.RefArgument); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P1.3c", what: "a word too many or too few is refused", run: func(s *session) error {
		for _, bad := range []string{"get 0 0", "get", "set 0", "crc 0", "use", ""} {
			if err := s.refused(protocol.VerbLimit, bad, protocol.RefArgument); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P1.4a", what: "a line of 129 bytes does nothing and gets no 0 2", run: func(s *session) error {
		return s.complains(strings.Repeat("x", protocol.LineMax)+"\n", protocol.RefTooLong)
	}},
	{id: "P1.4b", what: "a line of 3000 bytes gets one answer, and the next line works", run: func(s *session) error {
		s.forget()
		long := strings.Repeat("nonce 7 ", 375)
		err := first(func() error { return s.complains(long+"\n", protocol.RefTooLong) }, func() error { return s.run(300 * time.Millisecond) })
		if n := s.count(begins("no 0")); err == nil && n != 1 {
			err = errorf("%d answers", n)
		}
		return err
	}},
	{id: "P1.4c", what: "a line with a byte outside printable ASCII does nothing, whatever its CRC", run: func(s *session) error {
		for _, b := range []byte{0x00, 0x09, 0x1F, 0x7F, 0x80, 0xFF} {
			n := s.number()
			body := append([]byte("zz "+strconv.Itoa(int(n))+" "), b)
			crc := protocol.AppendHex16(append(body[:len(body):len(body)], ';'), protocol.CRC16(body))
			if err := s.send(append(crc, '\n')); err != nil {
				return err
			}
			if a, err := s.answerTo(n, 50*time.Millisecond); err != nil || a != nil {
				return first(func() error { return err }, func() error { return errorf("byte %02X: %v", b, a) })
			}
		}
		return s.goesOn()
	}},
	{id: "P1.4d", what: "bad lines are answered at most once every 10 ms", run: func(s *session) error {
		s.forget()
		err := first(func() error { return s.run(30 * time.Millisecond) },
			func() error { return s.send([]byte(strings.Repeat("?\n", 12))) },
			func() error { return s.run(150 * time.Millisecond) })
		span := time.Duration(24*10) * time.Second / time.Duration(max(s.id.Baud, 1200))
		most := 2 + int(span/(10*time.Millisecond))
		if n := s.count(begins("no 0")); err == nil && (n < 1 || n > most) {
			err = errorf("12 bad lines in %s got %d answers, wanted 1 to %d", ms(span), n, most)
		}
		return err
	}},
	{id: "P1.4e", what: "after a burst of 8-bit noise the next line works", run: func(s *session) error {
		noise := make([]byte, 0, 512)
		for i := range 512 {
			if b := byte(i*167 + 13); b != protocol.Cut && b != '\n' {
				noise = append(noise, b)
			}
		}
		return first(func() error { return s.send(append(noise, '\n')) }, func() error { return s.run(100 * time.Millisecond) }, s.goesOn)
	}},
	{id: "P1.5a", what: "bare tel is taken", run: func(s *session) error {
		_, err := s.tel()
		return err
	}},
	{id: "P1.5b", what: "nothing else is taken bare", run: func(s *session) error {
		for _, verb := range []string{"nonce", "dis", "in", "reset", "stop 5", "tel 5", "id 5"} {
			s.forget()
			if err := first(func() error { return s.run(12 * time.Millisecond) }, func() error { return s.send([]byte(verb + "\n")) },
				func() error { return s.run(60 * time.Millisecond) }); err != nil {
				return err
			}
			for _, l := range s.lines {
				if l.good && !strings.HasPrefix(l.body, "no 0 1") {
					return errorf("%q was answered with %q", verb, l.body)
				}
			}
		}
		return nil
	}},
}

// everyPlace changes each character of a request in turn.
func everyPlace(s *session) error {
	line, n := s.nonceLine()
	for i := range len(line) - 1 {
		wrong := []byte(line)
		wrong[i] ^= 1 // a printable character stays printable but for space and tilde
		if wrong[i] < 0x20 || wrong[i] > 0x7E {
			wrong[i] = 'z'
		}
		if err := s.send(wrong); err != nil {
			return err
		}
		if err := s.run(15 * time.Millisecond); err != nil {
			return err
		}
		for _, l := range s.lines {
			if l.good && strings.HasPrefix(l.body, "ok ") {
				return errorf("with character %d changed it was answered with %q", i+1, l.body)
			}
		}
	}
	return s.noAnswer(n, 50*time.Millisecond)
}
