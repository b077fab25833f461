package job

import (
	"errors"
	"testing"
	"time"

	"gainwright/protocol"
)

// creeping is a board that calls its shaft moving for so many requests, or refuses
// for another reason.
type creeping struct {
	Hands
	left    int
	refusal protocol.Refusal
	asked   int
	waited  time.Duration
	busy    string
}

func (c *creeping) Request(verb, args string) (protocol.Answer, error) {
	c.asked++
	if c.left == 0 {
		return protocol.Answer{}, nil
	}
	c.left--
	return protocol.Answer{}, &protocol.RefusedError{Refusal: c.refusal}
}

func (c *creeping) Watch(d time.Duration) ([]protocol.Sample, error) { c.waited += d; return nil, nil }

func (c *creeping) Show(f func(*View)) {
	v := View{Busy: c.busy}
	f(&v)
	c.busy = v.Busy
}

// What a board does at rest only is asked for again while it says that the shaft is
// moving, and not for ever; another refusal stands.
func TestABoardIsWaitedForUntilItIsStill(t *testing.T) {
	c := &creeping{left: 5, refusal: protocol.RefMoving}
	j := &Job{h: c}
	if _, err := j.whenStill("gain", "set 0 00000000"); err != nil || c.asked != 6 || c.waited < time.Second || c.busy != "" {
		t.Errorf("%v after %d requests and %v, busy %q", err, c.asked, c.waited, c.busy)
	}
	var no *protocol.RefusedError
	c = &creeping{left: 1, refusal: protocol.RefState}
	if _, err := (&Job{h: c}).whenStill("gain", ""); !errors.As(err, &no) || c.asked != 1 {
		t.Errorf("%v after %d requests", err, c.asked)
	}
	c = &creeping{left: 1000, refusal: protocol.RefMoving}
	if _, err := (&Job{h: c}).whenStill("gain", ""); !errors.As(err, &no) || c.waited > 2*time.Minute {
		t.Errorf("%v after %v", err, c.waited)
	}
}
