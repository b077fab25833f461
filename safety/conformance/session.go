package conformance

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
)

// Line carries bytes to a board and back, and has the console's clock.
type Line interface {
	// Write hands bytes to the board.
	Write(p []byte) error
	// Read returns what has come, at the latest at the time until, when that may
	// be nothing. It lets time pass.
	Read(until time.Duration) ([]byte, error)
	// Now is the time since some start; only Read moves it.
	Now() time.Duration
}

// lineError says that the line no longer carries bytes.
type lineError struct{ err error }

func (e *lineError) Error() string { return "the line: " + e.err.Error() }
func (e *lineError) Unwrap() error { return e.err }

var errNoIdentity = errors.New("no identity that can be read")

// received is one line from the board.
type received struct {
	at   time.Duration
	text string // without its end
	body string // without CRC, where that is right
	good bool
	hex  bool // T, U or V
}

// answer is what came back for a request.
type answer struct {
	ok     bool
	code   protocol.Refusal
	fields []string // after "ok <n>"
}

func (a answer) String() string {
	if a.ok {
		return strings.TrimSpace("ok " + strings.Join(a.fields, " "))
	}
	return "no " + strconv.Itoa(int(a.code))
}

func (a answer) field(i int) string {
	if i < len(a.fields) {
		return a.fields[i]
	}
	return ""
}

// session is the talk with one board.
type session struct {
	line Line
	o    Options

	half    []byte
	lost    bool // the first line after opening may be the tail of one
	lines   []received
	n       uint16
	asked   map[uint16]bool
	strange []string // lines nobody asked for that are none of P3.4
	badCRC  []string
	ugly    []string // too long or not printable

	id        protocol.Identity
	idLines   []string
	boots     int
	bootAt    time.Duration // when the last start was heard of
	started   bool          // a restart that was asked for is awaited
	restarts  int           // restarts that nobody asked for
	wasLimits []uint32
	wasGains  []uint32
	wasStored []uint32
	limits    []uint32 // the test set
	limitsCRC uint16
	token     uint16
	k         uint16
}

func newSession(line Line, o Options) *session {
	return &session{line: line, o: o, asked: map[uint16]bool{0: true}, lost: true, boots: -1}
}

// forget drops the lines that were received so far.
func (s *session) forget() { s.lines = nil }

func (s *session) send(p []byte) error {
	if err := s.line.Write(p); err != nil {
		return &lineError{err}
	}
	return nil
}

// put sends a body with its CRC.
func (s *session) put(body string) error { return s.send(protocol.AppendLine(nil, []byte(body))) }

// slice bounds how late an interruption is seen.
const slice = 20 * time.Millisecond

// run lets time pass and collects what comes.
func (s *session) run(d time.Duration) error {
	_, err := s.wait(d, func(received) bool { return false })
	return err
}

// wait lets time pass until a line comes for which is holds, and returns it, or
// nil after d. Lines that came since the last forget count, too.
func (s *session) wait(d time.Duration, is func(received) bool) (*received, error) {
	end := s.line.Now() + d
	seen := 0
	for {
		for ; seen < len(s.lines); seen++ {
			if is(s.lines[seen]) {
				return &s.lines[seen], nil
			}
		}
		now := s.line.Now()
		if now >= end {
			return nil, nil
		}
		if s.o.Interrupted != nil && s.o.Interrupted() {
			_ = s.line.Write([]byte{protocol.Cut})
			return nil, ErrInterrupted
		}
		b, err := s.line.Read(min(end, now+slice))
		if err != nil {
			return nil, &lineError{err}
		}
		s.take(b)
	}
}

// halfMax bounds a line that never ends.
const halfMax = 4096

func (s *session) take(b []byte) {
	for len(b) > 0 {
		i := bytes.IndexByte(b, '\n')
		if i < 0 {
			if len(s.half) < halfMax {
				s.half = append(s.half, b...)
			}
			return
		}
		text := strings.TrimSuffix(string(s.half)+string(b[:i]), "\r")
		s.half, b = s.half[:0], b[i+1:]
		if text != "" {
			s.line1(text)
		}
		s.lost = false
	}
}

// line1 files one line and keeps the books for the closing checks.
func (s *session) line1(text string) {
	l := received{at: s.line.Now(), text: text}
	if len(text) == protocol.HexLine-1 && text[0] >= 'T' && text[0] <= 'V' {
		crc, ok := protocol.ParseHex16([]byte(text[19:]))
		l.good = ok && crc == protocol.CRC16([]byte(text[:19]))
		l.hex, l.body = true, text[:19]
	} else if body, err := protocol.SplitCRC([]byte(text)); err == nil {
		l.good, l.body = true, string(body)
	}
	if s.lost && !l.good {
		return
	}
	plain := len(text) < protocol.LineMax
	for i := range len(text) {
		plain = plain && text[i] >= 0x20 && text[i] <= 0x7E
	}
	if l.good && strings.HasPrefix(l.body, "ev boot ") {
		s.excuse()
	}
	switch {
	case !plain:
		s.ugly = append(s.ugly, text)
	case !l.good:
		s.badCRC = append(s.badCRC, text)
	case !s.expected(l):
		s.strange = append(s.strange, text)
	}
	s.event(l)
	s.lines = append(s.lines, l)
}

// excuse takes back the last bad line where it stands right before a start: it
// is what the last run left half sent (P9.1).
func (s *session) excuse() {
	if len(s.lines) == 0 {
		return
	}
	last := s.lines[len(s.lines)-1].text
	for _, book := range []*[]string{&s.badCRC, &s.ugly} {
		if n := len(*book); n > 0 && (*book)[n-1] == last {
			*book = (*book)[:n-1]
		}
	}
}

// expected reports whether a line is an answer or one of those of P3.4.
func (s *session) expected(l received) bool {
	w := strings.Split(l.body, " ")
	switch w[0] {
	case "ok", "no":
		n, ok := protocol.ParseUint([]byte(at(w, 1)), 65535)
		return ok && s.asked[uint16(n)]
	case "id", "ev", "cut", "t", "u":
		return true
	}
	return l.hex
}

// event notices restarts.
func (s *session) event(l received) {
	if !l.good || !strings.HasPrefix(l.body, "ev boot ") {
		return
	}
	s.bootAt = l.at
	if n, ok := protocol.ParseUint([]byte(at(strings.Split(l.body, " "), 2)), 65535); ok {
		s.boots = int(n)
	}
	if s.started {
		s.started = false
		return
	}
	s.restarts++
}

func at(w []string, i int) string {
	if i < len(w) {
		return w[i]
	}
	return ""
}

// number gives out the next request number.
func (s *session) number() uint16 {
	if s.n++; s.n == 0 {
		s.n = 1
	}
	s.asked[s.n] = true
	return s.n
}

// Times of an exchange: an answer has this long, and is asked for so often.
const (
	patience = 600 * time.Millisecond
	tries    = 3
)

// ask sends a request and returns its answer.
func (s *session) ask(verb, args string) (answer, error) {
	n := s.number()
	line := protocol.AppendRequest(nil, verb, n, args)
	for range tries {
		s.drop(n)
		if err := s.send(line); err != nil {
			return answer{}, err
		}
		if a, err := s.answerTo(n, patience); a != nil || err != nil {
			if err != nil {
				return answer{}, err
			}
			return *a, nil
		}
	}
	return answer{}, errorf("%q is not answered", strings.TrimSpace(verb+" n "+args))
}

// drop forgets answers to n that came earlier.
func (s *session) drop(n uint16) {
	kept := s.lines[:0:0]
	for _, l := range s.lines {
		if !isAnswer(l, n) {
			kept = append(kept, l)
		}
	}
	s.lines = kept
}

func isAnswer(l received, n uint16) bool {
	w := strings.SplitN(l.body, " ", 3)
	return l.good && (w[0] == "ok" || w[0] == "no") && at(w, 1) == strconv.Itoa(int(n))
}

// answerTo waits for the answer to request n; nil: none came.
func (s *session) answerTo(n uint16, d time.Duration) (*answer, error) {
	l, err := s.wait(d, func(l received) bool { return isAnswer(l, n) })
	if l == nil || err != nil {
		return nil, err
	}
	w := strings.Split(l.body, " ")
	a := &answer{ok: w[0] == "ok", fields: w[2:]}
	if !a.ok {
		code, ok := protocol.ParseUint([]byte(at(w, 2)), 255)
		if !ok {
			return nil, errorf("%q has no code", l.body)
		}
		a.code = protocol.Refusal(code)
	}
	return a, nil
}

// must asks and wants ok.
func (s *session) must(verb, args string) (answer, error) {
	a, err := s.ask(verb, args)
	if err == nil && !a.ok {
		err = errorf("%s %s: %v, wanted ok", verb, args, a)
	}
	return a, err
}

// refused asks and wants one of the codes.
func (s *session) refused(verb, args string, codes ...protocol.Refusal) error {
	a, err := s.ask(verb, args)
	if err != nil {
		return err
	}
	for _, c := range codes {
		if !a.ok && a.code == c {
			return nil
		}
	}
	return errorf("%s %s: %v, wanted no %d", verb, args, a, codes[0])
}

// begins returns a test for lines whose body begins with head.
func begins(head string) func(received) bool {
	return func(l received) bool { return l.good && !l.hex && strings.HasPrefix(l.body, head) }
}

// count is how many lines since the last forget the test holds for.
func (s *session) count(is func(received) bool) int {
	n := 0
	for _, l := range s.lines {
		if is(l) {
			n++
		}
	}
	return n
}

// first runs steps until one fails.
func first(steps ...func() error) error {
	for _, step := range steps {
		if err := step(); err != nil {
			return err
		}
	}
	return nil
}

func float(v float64) string { return fmt.Sprintf("%08X", math.Float32bits(float32(v))) }

func value(bits uint32) float64 { return float64(math.Float32frombits(bits)) }
