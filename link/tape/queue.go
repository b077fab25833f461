package tape

import (
	"encoding/binary"
	"time"
)

// recordHead is the size of a queued record without its bytes: time, direction,
// length.
const recordHead = 8 + 1 + 4

// queue is records one after the other in one slice: adding one costs a copy.
type queue struct{ buf []byte }

func (q *queue) size() int { return len(q.buf) }

func (q *queue) reset() { q.buf = q.buf[:0] }

func (q *queue) add(t time.Duration, d Dir, b []byte) {
	q.buf = binary.LittleEndian.AppendUint64(q.buf, uint64(t))
	q.buf = append(q.buf, byte(d))
	q.buf = binary.LittleEndian.AppendUint32(q.buf, uint32(len(b)))
	q.buf = append(q.buf, b...)
}

func (q *queue) each(f func(t time.Duration, d Dir, b []byte)) {
	for rest := q.buf; len(rest) > 0; {
		t := time.Duration(binary.LittleEndian.Uint64(rest))
		d := Dir(rest[8])
		n := int(binary.LittleEndian.Uint32(rest[9:]))
		f(t, d, rest[recordHead:recordHead+n])
		rest = rest[recordHead+n:]
	}
}
