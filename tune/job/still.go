package job

import (
	"errors"
	"time"

	"gainwright/protocol"
)

// How long a board may call a shaft moving that the console sees at rest, and how
// often it is asked again: it waits until its counter stands, and a heavy shaft that
// creeps to its rest lets that go on for a while.
const (
	stillPiece = 500 * time.Millisecond
	stillMost  = 120 // pieces
)

// whenStill asks the board for something that it does at rest only, and again while
// it says that the shaft is moving.
func (j *Job) whenStill(verb, args string) (a protocol.Answer, err error) {
	for i := range stillMost {
		a, err = j.h.Request(verb, args)
		no, refused := errors.AsType[*protocol.RefusedError](err)
		if !refused || no.Refusal != protocol.RefMoving {
			if i > 0 {
				j.h.Show(func(v *View) { v.Busy = "" })
			}
			return a, err
		}
		j.h.Show(func(v *View) { v.Busy = "waiting for the shaft to come to rest, as the board sees it" })
		if _, w := j.h.Watch(stillPiece); w != nil {
			return a, w
		}
	}
	return a, err
}
