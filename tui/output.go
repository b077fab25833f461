package tui

import (
	"bytes"
	"io"
	"sync"
	"sync/atomic"
	"time"
)

// output stands between the renderer and the terminal. It knows when a frame
// was really taken by the terminal: only then does the screen count as alive.
type output struct {
	w     io.Writer
	alive func()
	now   func() time.Time

	mu   sync.Mutex // one write at a time
	bell atomic.Bool
	sent atomic.Int64 // bytes
	took atomic.Int64 // ns of the last write
}

// home begins every frame on the alternate screen.
var home = []byte("\x1b[H")

// Write passes p on and, after a frame, says that the screen is alive. A bell
// that waits goes out behind the frame.
func (o *output) Write(p []byte) (int, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	frame := len(p) > len(home) && bytes.HasPrefix(p, home)
	out := p
	if frame && o.bell.Swap(false) {
		out = append(bytes.Clone(p), '\a')
	}
	began := o.now()
	n, err := o.w.Write(out)
	o.took.Store(int64(o.now().Sub(began)))
	o.sent.Add(int64(n))
	if err == nil && frame {
		o.alive()
	}
	return min(n, len(p)), err
}

// file is what a terminal is to the library that draws: it asks such a writer
// for the size of the window.
type file interface {
	io.ReadWriteCloser
	Fd() uintptr
}

// fileOutput is an output that still shows the terminal behind it.
type fileOutput struct {
	*output
	f file
}

func (o fileOutput) Read(p []byte) (int, error) { return o.f.Read(p) }
func (o fileOutput) Fd() uintptr                { return o.f.Fd() }

// Close does nothing: the terminal belongs to the caller.
func (o fileOutput) Close() error { return nil }
