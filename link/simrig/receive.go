package simrig

import (
	"time"

	"gainwright/protocol"
)

// receiver puts received bytes together to lines.
type receiver struct {
	line      [protocol.LineMax]byte
	n         int
	over, bad bool
	grumbled  int64 // ns of the last answer to a bad line
	fields    [][]byte
	bootCause string

	lastN   uint16 // the request answered last, its CRC and its answer
	lastCRC uint16
	any     bool
	answer  []byte
}

// grumbleEvery is the shortest time between two answers to bad lines.
const grumbleEvery = int64(10 * time.Millisecond)

// Receive hands bytes from the console to the board at the instant to which the
// rig was last advanced.
func (r *Rig) Receive(b []byte) {
	x := &r.board.rx
	if !r.board.booted || r.wrong[FaultDeaf] {
		return
	}
	for _, c := range b {
		switch {
		case c == protocol.Cut:
			r.cut()
			x.n, x.over, x.bad = 0, false, false
		case c == '\n':
			line, over, bad := x.line[:x.n], x.over, x.bad
			x.n, x.over, x.bad = 0, false, false
			r.take(line, over, bad)
		case c == '\r':
		case x.n == protocol.LineMax-1:
			x.over = true
		default:
			x.bad = x.bad || c < 0x20 || c > 0x7E
			x.line[x.n] = c
			x.n++
		}
	}
}

// take works off one whole line.
func (r *Rig) take(line []byte, over, bad bool) {
	x := &r.board.rx
	switch {
	case over:
		r.grumble("no 0 2 line too long")
		return
	case bad:
		r.grumble("no 0 1 bad crc")
		return
	case len(line) == 0:
		return
	}
	switch string(line) {
	case protocol.VerbID:
		r.identity(0)
		return
	case protocol.VerbTel:
		r.tell()
		return
	case protocol.VerbStop:
		r.cut()
		return
	}
	body, err := protocol.SplitCRC(line)
	if err != nil {
		r.grumble("no 0 1 bad crc")
		return
	}
	crc := protocol.CRC16(body)
	var c protocol.Command
	c, x.fields, err = protocol.ParseCommand(x.fields, body)
	if err != nil || c.N == 0 && !motionVerb(c.Verb) {
		return
	}
	if motionVerb(c.Verb) {
		r.drive(c)
		return
	}
	r.request(c, crc)
}

func (r *Rig) grumble(body string) {
	x := &r.board.rx
	if x.grumbled != 0 && r.now-x.grumbled < grumbleEvery {
		return
	}
	x.grumbled = r.now
	r.line([]byte(body))
}

func motionVerb(v string) bool {
	return v == protocol.VerbBeat || v == protocol.VerbVolts || v == protocol.VerbSpeed
}
