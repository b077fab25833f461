package link

import (
	"context"
	"time"
)

// Run writes until ctx is done, a Write fails or a Write hangs. It returns
// ctx.Err(), a *PortError or a *StallError. A stop that is pending when ctx ends
// is still written. Run may be called once.
func (w *Writer) Run(ctx context.Context) error {
	w.watch = time.AfterFunc(time.Hour, w.checkStall)
	w.watch.Stop()
	done := make(chan error, 1)
	go WithPanicHook(w.cfg.OnPanic, func() { done <- w.loop(ctx) })
	select {
	case err := <-done:
		return err
	case <-w.stalled:
		return w.stallErr
	}
}

// loop is the goroutine that owns the right to call Port.Write. It writes
// itself, without a hand-over to another goroutine, because every hand-over is
// time between the stop key and the stop byte.
func (w *Writer) loop(ctx context.Context) error {
	pace := time.NewTimer(time.Hour)
	defer pace.Stop()
	for {
		n, wait := w.take(ctx.Err() != nil)
		if n > 0 {
			if err := w.write(w.cur[:n]); err != nil {
				return err
			}
			continue
		}
		if ctx.Err() != nil {
			w.end()
			return ctx.Err()
		}
		var paced <-chan time.Time
		if wait > 0 {
			pace.Reset(wait)
			paced = pace.C
		}
		select {
		case <-w.wake:
		case <-paced:
		case <-ctx.Done():
		}
	}
}

// take moves what may leave now into w.cur and marks the Write as begun. A stop
// may leave at once; any other line only when the line before it has left. With
// nothing to write it returns how long until something may be, 0 = not known.
func (w *Writer) take(leaving bool) (n int, wait time.Duration) {
	w.mu.Lock()
	defer w.mu.Unlock()
	switch {
	case w.over:
		return 0, 0
	case len(w.lanes.stop) > 0:
		n = copy(w.cur[:], w.lanes.stop)
		w.lanes.stop = w.lanes.stop[:0]
		w.lanes.stats.StopsSent++
	case leaving || !w.lanes.waiting():
		return 0, 0
	default:
		if wait = w.free - w.cfg.Clock(); wait > 0 {
			return 0, wait
		}
		n = w.lanes.next(&w.cur)
		w.lanes.stats.Lines++
	}
	w.writing = n
	w.began = time.Now()
	// Some drivers return from Write only when the last byte has left, so what
	// is still in flight ahead of a stop is granted too.
	ahead := max(0, w.free-w.cfg.Clock())
	w.deadline = w.began.Add(StallGrace + ahead + LineTime(n, w.cfg.Baud))
	// Setting a timer may wake another thread, which a stop would wait for. So a
	// timer that is running is left alone: it fires no later than this Write's
	// deadline and then sets itself to what remains.
	if !w.watching {
		w.watching = true
		w.watch.Reset(StallGrace)
	}
	return n, 0
}

// write hands b to the port, all of it: a port may take less than it was given
// and say nothing.
func (w *Writer) write(b []byte) error {
	var err error
	for rest := b; len(rest) > 0 && err == nil; {
		var n int
		n, err = w.port.Write(rest)
		if n == 0 && err == nil {
			err = errNoProgress
		}
		rest = rest[n:]
	}
	now := w.cfg.Clock()

	w.mu.Lock()
	given := w.over // given up as stalled while it hung
	w.writing = 0
	w.lanes.stats.Bytes += uint64(len(b))
	w.free = max(w.free, now) + LineTime(len(b), w.cfg.Baud)
	w.mu.Unlock()

	if given {
		return ErrStalled // nobody listens any more
	}
	if err != nil {
		w.end()
		return &PortError{Op: "write", Err: err}
	}
	if w.cfg.OnWrote != nil {
		w.cfg.OnWrote(now, b)
	}
	return nil
}

// checkStall is called by the watch timer, which may have been set for a Write
// that has ended since.
func (w *Writer) checkStall() {
	w.mu.Lock()
	now := time.Now()
	if w.over || w.writing == 0 || now.Before(w.deadline) {
		if w.watching = !w.over && w.writing > 0; w.watching {
			w.watch.Reset(w.deadline.Sub(now))
		}
		w.mu.Unlock()
		return
	}
	w.over = true
	w.stallErr = &StallError{Bytes: w.writing, After: now.Sub(w.began)}
	close(w.stalled)
	w.mu.Unlock()
	if w.cfg.OnStall != nil {
		WithPanicHook(w.cfg.OnPanic, func() { w.cfg.OnStall(w.stallErr) })
	}
}

func (w *Writer) end() {
	w.mu.Lock()
	w.over = true
	w.mu.Unlock()
}
