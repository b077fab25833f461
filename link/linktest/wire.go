package linktest

import (
	"io"
	"sync"
	"time"

	"gainwright/link"
)

// Sent is one Write as the line saw it.
type Sent struct {
	Bytes   []byte
	Written time.Duration // when Write took it
	First   time.Duration // when its first bit left
	Last    time.Duration // when its last bit had left
}

// Wire is the sending half of a serial line at Baud, ten bit times a byte, with
// a kernel buffer of Buffer bytes ahead of it: Write returns as soon as its
// bytes are in the buffer, and they leave one after the other. Read is idle for
// ever. Time is package time, so in a synctest bubble it is exact. Wire answers
// the question "when was this on the wire?", which no real port does.
type Wire struct {
	Baud   int // bit/s
	Buffer int // bytes; NewWire sets 4096, as on Linux

	mu    sync.Mutex
	start time.Time
	free  time.Duration // when the line falls idle
	sent  []Sent
	shut  chan struct{}
	once  sync.Once
}

// NewWire returns a line at baud bit/s whose time starts now.
func NewWire(baud int) *Wire {
	return &Wire{Baud: baud, Buffer: 4096, start: time.Now(), shut: make(chan struct{})}
}

// Now returns the line's time.
func (w *Wire) Now() time.Duration { return time.Since(w.start) }

// Write queues p. It blocks while the buffer has no room for it.
func (w *Wire) Write(p []byte) (int, error) {
	for {
		w.mu.Lock()
		now := w.Now()
		over := max(0, w.free-now) + link.LineTime(min(len(p), w.Buffer), w.Baud) - link.LineTime(w.Buffer, w.Baud)
		if over <= 0 {
			first := max(w.free, now)
			w.free = first + link.LineTime(len(p), w.Baud)
			w.sent = append(w.sent, Sent{append([]byte(nil), p...), now, first, w.free})
			w.mu.Unlock()
			return len(p), nil
		}
		w.mu.Unlock()
		select {
		case <-time.After(over):
		case <-w.shut:
			return 0, io.ErrClosedPipe
		}
	}
}

// Read waits for link.PipeTimeout and returns nothing.
func (w *Wire) Read([]byte) (int, error) {
	select {
	case <-time.After(link.PipeTimeout):
		return 0, nil
	case <-w.shut:
		return 0, io.EOF
	}
}

// Close frees Read and Write.
func (w *Wire) Close() error {
	w.once.Do(func() { close(w.shut) })
	return nil
}

// Sent returns what was written so far, in order.
func (w *Wire) Sent() []Sent {
	w.mu.Lock()
	defer w.mu.Unlock()
	return append([]Sent(nil), w.sent...)
}

// Find returns the first Write that equals line.
func (w *Wire) Find(line string) (Sent, bool) {
	for _, s := range w.Sent() {
		if string(s.Bytes) == line {
			return s, true
		}
	}
	return Sent{}, false
}
