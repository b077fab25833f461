package simrig

import (
	"time"

	"gainwright/protocol"
)

// transmitter lets bytes leave no faster than the line carries them.
type transmitter struct {
	byteNS  int64
	pending []byte
	sent    []byte // left the board, not yet taken by Output
	free    int64  // ns at which the last byte that left was through
}

// ringMax is the board's transmit ring. A telemetry line that does not fit is
// dropped, as on a chip; answers always fit, since requests come one at a time.
const ringMax = 4096

// sentMax bounds the bytes that have left the board and that nobody has taken.
const sentMax = 1 << 16

func (t *transmitter) skipTo(now int64) { t.free = max(t.free, now) }

func (t *transmitter) put(now int64, b []byte) {
	t.drain(now)
	if len(t.pending) == 0 {
		t.skipTo(now)
	}
	t.pending = append(t.pending, b...)
}

func (t *transmitter) room() int { return ringMax - len(t.pending) }

// drain moves what the line has carried by now.
func (t *transmitter) drain(now int64) {
	n := min(int((now-t.free)/t.byteNS), len(t.pending))
	if n <= 0 {
		return
	}
	if len(t.sent) < sentMax { // nobody took them for so long: they are lost, as on a wire
		t.sent = append(t.sent, t.pending[:n]...)
	}
	t.pending = append(t.pending[:0], t.pending[n:]...)
	t.free += int64(n) * t.byteNS
}

// Output returns the bytes that have left the board since the last call. The
// slice is the caller's.
func (r *Rig) Output() []byte {
	t := &r.board.tx
	t.drain(r.now)
	out := t.sent
	t.sent = nil
	if r.wrong[FaultMute] {
		return nil
	}
	return out
}

// NextOutput is the console time at which the next byte will have left the
// board; ok is false while nothing waits.
func (r *Rig) NextOutput() (at time.Duration, ok bool) {
	t := &r.board.tx
	if len(t.sent) > 0 {
		return time.Duration(r.now), true
	}
	if len(t.pending) == 0 || r.wrong[FaultMute] {
		return 0, false
	}
	return time.Duration(max(t.free, 0) + t.byteNS), true
}

// line closes a body with its CRC and queues it.
func (r *Rig) line(body []byte) {
	var buf [protocol.LineMax + 2]byte
	r.raw(protocol.AppendLine(buf[:0], body))
}

// raw queues a finished line.
func (r *Rig) raw(line []byte) {
	if r.wrong[FaultWrongCRC] {
		spoil(line)
	}
	r.board.tx.put(r.now, line)
}

// spoil changes the last digit of a line's CRC.
func spoil(line []byte) {
	d := &line[len(line)-2]
	if *d == '0' {
		*d = '1'
	} else {
		*d = '0'
	}
}
