package protocol

import (
	"errors"
	"fmt"
	"strings"
	"time"
)

// Request asks a board for something. Requests go out one at a time, in order,
// each repeated under its number until it is answered.
type Request struct {
	Verb    string
	Args    string
	Timeout time.Duration // for one try; 0: 250 ms
	Tries   int           // 0: 4
}

// Answer is what came back for a request.
type Answer struct {
	Request Request
	OK      bool
	Refusal Refusal  // where not OK and Err is nil
	Words   string   // what a refusing board adds
	Fields  []string // after "ok <n>"
	Lines   []string // identity lines, "key values…", where the request was id
	Tries   int
	Sent    time.Duration // of the first try
	At      time.Duration // of the answer
	Err     error         // ErrNoAnswer or ErrVoid
}

// Errors of an exchange.
var (
	ErrNoAnswer  = errors.New("protocol: the board does not answer")
	ErrVoid      = errors.New("protocol: a stop voided the request")
	ErrQueueFull = errors.New("protocol: too many requests wait")
)

// RefusedError is a refusal by the board as an error.
type RefusedError struct {
	Verb    string
	Refusal Refusal
	Words   string
}

func (e *RefusedError) Error() string {
	s := fmt.Sprintf("the board refuses %q: %v", e.Verb, e.Refusal)
	if e.Words != "" {
		s += " (" + e.Words + ")"
	}
	return s
}

// AsError returns nil for an answer that says ok.
func (a Answer) AsError() error {
	switch {
	case a.Err != nil:
		return fmt.Errorf("%s: %w", a.Request.Verb, a.Err)
	case !a.OK:
		return &RefusedError{Verb: a.Request.Verb, Refusal: a.Refusal, Words: a.Words}
	}
	return nil
}

// queueMax bounds the requests that wait: a whole set of limits and one of
// gains fit.
const queueMax = 64

// Exchange numbers requests, repeats them until they are answered and matches
// the answers. It is pure: the caller brings the time and carries the bytes.
type Exchange struct {
	next  uint16
	queue []Request
	busy  bool
	cur   Request
	num   uint16
	tries int
	sent  time.Duration
	due   time.Duration
	lines []string
	words [][]byte
}

// NewExchange starts numbering at first, which should differ from one
// connection to the next so that no answer to an older console matches.
func NewExchange(first uint16) *Exchange { return &Exchange{next: max(first, 1)} }

// Offer queues a request.
func (x *Exchange) Offer(r Request) error {
	if len(x.queue) >= queueMax {
		return ErrQueueFull
	}
	if r.Timeout == 0 {
		r.Timeout = 250 * time.Millisecond
	}
	if r.Tries == 0 {
		r.Tries = 4
	}
	x.queue = append(x.queue, r)
	return nil
}

// Idle reports whether nothing waits and nothing is outstanding.
func (x *Exchange) Idle() bool { return !x.busy && len(x.queue) == 0 }

// Tick returns the line that should be sent now, if any, and the answer that
// ends a request which was tried often enough, if any.
func (x *Exchange) Tick(now time.Duration) (line []byte, done *Answer) {
	if x.busy && now >= x.due {
		if x.tries < x.cur.Tries {
			x.lines = nil
			return x.send(now), nil
		}
		done = &Answer{Request: x.cur, Tries: x.tries, Sent: x.sent, At: now, Err: ErrNoAnswer}
		x.busy = false
	}
	if !x.busy && len(x.queue) > 0 {
		x.cur, x.queue = x.queue[0], x.queue[1:]
		x.busy, x.tries, x.sent, x.lines = true, 0, now, nil
		x.num = x.next
		if x.next++; x.next == 0 {
			x.next = 1
		}
		return x.send(now), done
	}
	return nil, done
}

func (x *Exchange) send(now time.Duration) []byte {
	x.tries++
	x.due = now + x.cur.Timeout
	return AppendRequest(nil, x.cur.Verb, x.num, x.cur.Args)
}

// Line takes the body of a line from the board. It returns the answer that the
// line completes, or nil; known is false for a line that is no part of any
// exchange (an event, say).
func (x *Exchange) Line(now time.Duration, body []byte) (done *Answer, known bool) {
	x.words = Fields(x.words, body)
	w := x.words
	switch {
	case len(w) >= 2 && string(w[0]) == "id":
		if x.busy && x.cur.Verb == VerbID && len(x.lines) < 100 {
			x.lines = append(x.lines, string(body[3:]))
			x.due = now + x.cur.Timeout
		}
		return nil, true
	case len(w) >= 2 && string(w[0]) == "ok":
		if !x.matches(w[1]) {
			return nil, true
		}
		a := &Answer{Request: x.cur, OK: true, Tries: x.tries, Sent: x.sent, At: now, Lines: x.lines}
		for _, f := range w[2:] {
			a.Fields = append(a.Fields, string(f))
		}
		if x.cur.Verb == VerbID && !x.complete(a) {
			return nil, true // lines were lost: the next try asks again
		}
		x.busy = false
		return a, true
	case len(w) >= 3 && string(w[0]) == "no":
		code, ok := ParseUint(w[2], 255)
		if !ok || !x.matches(w[1]) {
			return nil, true
		}
		a := &Answer{Request: x.cur, Refusal: Refusal(code), Tries: x.tries, Sent: x.sent, At: now}
		for i, f := range w[3:] {
			if i > 0 {
				a.Words += " "
			}
			a.Words += string(f)
		}
		x.busy = false
		return a, true
	}
	return nil, false
}

func (x *Exchange) matches(number []byte) bool {
	n, ok := ParseUint(number, 65535)
	return ok && x.busy && uint16(n) == x.num
}

// complete reports whether as many identity lines came as the board sent.
func (x *Exchange) complete(a *Answer) bool {
	if len(a.Fields) != 1 {
		return false
	}
	n, ok := ParseUint([]byte(a.Fields[0]), 100)
	return ok && int(n) == len(a.Lines)
}

// Void drops everything that waits or is outstanding, as a stop does, and
// returns an answer with ErrVoid for each.
func (x *Exchange) Void(now time.Duration) (voided []Answer) {
	if x.busy {
		voided = append(voided, Answer{Request: x.cur, Tries: x.tries, Sent: x.sent, At: now, Err: ErrVoid})
	}
	for _, r := range x.queue {
		voided = append(voided, Answer{Request: r, At: now, Err: ErrVoid})
	}
	x.busy, x.queue, x.lines = false, nil, nil
	return voided
}

// Field returns field i of an answer, or "".
func (a Answer) Field(i int) string {
	if i < len(a.Fields) {
		return a.Fields[i]
	}
	return ""
}

// Joined returns the fields as one string.
func (a Answer) Joined() string { return strings.Join(a.Fields, " ") }
