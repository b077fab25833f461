package link

import "fmt"

// Bounds of the lanes. The longest line of the wire is 128 bytes; twice that
// leaves room for adapters with a line format of their own. Sixteen requests are
// more than one procedure ever has outstanding, so a full queue means that the
// board has stopped answering, not that the queue is too small.
const (
	LineMax     = 256
	RequestsMax = 16
	StopMax     = 256
)

// line is one queued Write in storage of its own, so that queueing allocates
// nothing and the caller may reuse its buffer.
type line struct {
	seq uint64 // order of first arrival; 0 = empty
	n   int
	buf [LineMax]byte
}

func (l *line) set(seq uint64, b []byte) {
	l.seq = seq
	l.n = copy(l.buf[:], b)
}

// lanes holds what waits to be written. The caller holds the Writer's mutex.
type lanes struct {
	seq       uint64
	stop      []byte // pending stop bytes, empty = none; capacity StopMax
	motion    line
	heartbeat line
	requests  [RequestsMax]line // ring
	head, len int
	stats     Stats
}

// putStop adds b to the pending stop. A stop that is already pending is not
// sent twice, and one that does not fit replaces what is pending: the newest
// wish is the one that counts.
func (l *lanes) putStop(b []byte) {
	l.stats.StopsAsked++
	l.void()
	last := len(l.stop) - len(b)
	if last >= 0 && string(l.stop[last:]) == string(b) {
		return
	}
	if len(l.stop)+len(b) > StopMax {
		l.stop = l.stop[:0]
	}
	l.stop = append(l.stop, b...)
}

// void throws away every queued line.
func (l *lanes) void() {
	for _, s := range []*line{&l.motion, &l.heartbeat} {
		if s.seq != 0 {
			s.seq = 0
			l.stats.Voided++
		}
	}
	l.stats.Voided += uint64(l.len)
	l.head, l.len = 0, 0
}

// lane names where a line goes.
type lane int

const (
	toMotion lane = iota
	toHeartbeat
	toRequests
)

func (l *lanes) put(to lane, b []byte) error {
	switch to {
	case toMotion:
		l.putNewest(&l.motion, b)
	case toHeartbeat:
		l.putNewest(&l.heartbeat, b)
	default:
		return l.putRequest(b)
	}
	return nil
}

// putNewest overwrites slot. The new line keeps the place in the order that the
// overwritten one had, so that a busy neighbour cannot starve it.
func (l *lanes) putNewest(slot *line, b []byte) {
	seq := slot.seq
	if seq != 0 {
		l.stats.Superseded++
	} else {
		l.seq++
		seq = l.seq
	}
	slot.set(seq, b)
}

func (l *lanes) putRequest(b []byte) error {
	if l.len == RequestsMax {
		return fmt.Errorf("%w: %d requests wait for the line", ErrFull, RequestsMax)
	}
	l.seq++
	l.requests[(l.head+l.len)%RequestsMax].set(l.seq, b)
	l.len++
	return nil
}

// next moves the line that may leave now into out and returns its length, 0 if
// none waits. Motion and heartbeat go by age, requests after them.
func (l *lanes) next(out *[LineMax]byte) int {
	slot := &l.motion
	if slot.seq == 0 || l.heartbeat.seq != 0 && l.heartbeat.seq < slot.seq {
		slot = &l.heartbeat
	}
	if slot.seq == 0 {
		if l.len == 0 {
			return 0
		}
		slot = &l.requests[l.head]
		l.head = (l.head + 1) % RequestsMax
		l.len--
	}
	slot.seq = 0
	return copy(out[:], slot.buf[:slot.n])
}

func (l *lanes) waiting() bool {
	return l.motion.seq != 0 || l.heartbeat.seq != 0 || l.len > 0
}
