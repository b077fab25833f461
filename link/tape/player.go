package tape

import (
	"io"
	"sync"
	"time"

	"gainwright/link"
)

// Player plays a tape as the board it was recorded from: it is a link.Port whose
// Read gives what came from the board, when it came. What is written to it is
// kept and answered by nothing: a recording cannot react.
type Player struct {
	// Fast, set before the first Read, leaves out the waiting: only the order
	// is kept.
	Fast bool

	records []Record
	begin   sync.Once
	start   time.Time
	part    []byte // rest of the record that is being read

	mu   sync.Mutex
	sent []byte

	shut sync.Once
	done chan struct{}
}

// NewPlayer returns a Player of records. Time 0 of the tape is the first Read.
func NewPlayer(records []Record) *Player {
	return &Player{records: records, done: make(chan struct{})}
}

// Read gives the bytes of one record, or 0, nil when link.PipeTimeout passes
// first, and io.EOF at the end of the tape.
func (p *Player) Read(b []byte) (int, error) {
	select {
	case <-p.done:
		return 0, io.ErrClosedPipe
	default:
	}
	p.begin.Do(func() { p.start = time.Now() })
	for len(p.part) == 0 {
		if len(p.records) == 0 {
			return 0, io.EOF
		}
		next := p.records[0]
		if next.Dir != FromBoard {
			p.records = p.records[1:]
			continue
		}
		if wait := next.Time - time.Since(p.start); wait > 0 && !p.Fast {
			select {
			case <-time.After(min(wait, link.PipeTimeout)):
			case <-p.done:
				return 0, io.ErrClosedPipe
			}
			if wait > link.PipeTimeout {
				return 0, nil
			}
		}
		p.part, p.records = next.Bytes, p.records[1:]
	}
	n := copy(b, p.part)
	p.part = p.part[n:]
	return n, nil
}

// Write keeps b.
func (p *Player) Write(b []byte) (int, error) {
	select {
	case <-p.done:
		return 0, io.ErrClosedPipe
	default:
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	p.sent = append(p.sent, b...)
	return len(b), nil
}

// Sent returns what was written so far.
func (p *Player) Sent() []byte {
	p.mu.Lock()
	defer p.mu.Unlock()
	return append([]byte(nil), p.sent...)
}

// Close ends the replay.
func (p *Player) Close() error {
	p.shut.Do(func() { close(p.done) })
	return nil
}
