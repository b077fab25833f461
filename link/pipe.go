package link

import (
	"io"
	"sync"
	"time"
)

// PipeSize is how many bytes one direction of a Pipe holds before Write blocks.
const PipeSize = ChunkMax

// PipeTimeout is how long a Read of a Pipe end waits before it returns 0, nil.
const PipeTimeout = 50 * time.Millisecond

// Pipe returns the two ends of a serial line in memory: what is written to one
// is read from the other. It behaves like an open port: an idle Read returns
// 0, nil after PipeTimeout, a Write blocks while PipeSize bytes are unread, and
// Close of either end ends both. Each end takes one reader and one writer.
func Pipe() (Port, Port) {
	shut := &shutter{done: make(chan struct{})}
	out, in := newFlow(shut), newFlow(shut)
	return &pipeEnd{in: in, out: out, shut: shut}, &pipeEnd{in: out, out: in, shut: shut}
}

type shutter struct {
	once sync.Once
	done chan struct{}
}

// flow is one direction.
type flow struct {
	shut     *shutter
	mu       sync.Mutex
	buf      []byte
	readable chan struct{} // capacity 1: something was added
	writable chan struct{} // capacity 1: something was taken
}

func newFlow(s *shutter) *flow {
	return &flow{shut: s, readable: make(chan struct{}, 1), writable: make(chan struct{}, 1)}
}

func signal(c chan struct{}) {
	select {
	case c <- struct{}{}:
	default:
	}
}

// take copies what is there. Bytes that were written before Close are still
// delivered after it.
func (f *flow) take(p []byte) int {
	f.mu.Lock()
	n := copy(p, f.buf)
	f.buf = f.buf[:copy(f.buf, f.buf[n:])]
	f.mu.Unlock()
	if n > 0 {
		signal(f.writable)
	}
	return n
}

func (f *flow) add(p []byte) int {
	f.mu.Lock()
	n := min(len(p), PipeSize-len(f.buf))
	f.buf = append(f.buf, p[:n]...)
	f.mu.Unlock()
	if n > 0 {
		signal(f.readable)
	}
	return n
}

type pipeEnd struct {
	in, out *flow
	shut    *shutter
	timer   *time.Timer // of the one reader
}

func (e *pipeEnd) Read(p []byte) (int, error) {
	if len(p) == 0 {
		return 0, nil
	}
	if n := e.in.take(p); n > 0 {
		return n, nil
	}
	if e.timer == nil {
		e.timer = time.NewTimer(PipeTimeout)
	} else {
		e.timer.Reset(PipeTimeout)
	}
	defer e.timer.Stop()
	for {
		select {
		case <-e.in.readable:
			if n := e.in.take(p); n > 0 {
				return n, nil
			}
		case <-e.timer.C:
			return 0, nil
		case <-e.shut.done:
			if n := e.in.take(p); n > 0 {
				return n, nil
			}
			return 0, io.EOF
		}
	}
}

func (e *pipeEnd) Write(p []byte) (int, error) {
	sent := 0
	for {
		select {
		case <-e.shut.done:
			return sent, io.ErrClosedPipe
		default:
		}
		sent += e.out.add(p[sent:])
		if sent == len(p) {
			return sent, nil
		}
		select {
		case <-e.out.writable:
		case <-e.shut.done:
		}
	}
}

func (e *pipeEnd) Close() error {
	e.shut.once.Do(func() { close(e.shut.done) })
	return nil
}
