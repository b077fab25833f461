package tape

import (
	"context"
	"fmt"
	"io"
	"sync"
	"time"

	"gainwright/link"
)

// Bounds of a Writer.
const (
	// QueueMax is how many bytes may wait for the disk: about four seconds of a
	// line at 2 Mbaud, about a minute of one at 115 200.
	QueueMax = 1 << 20
	// FlushEvery is how often what waits is written and synced. Half of the
	// second that may be lost is left for the disk.
	FlushEvery = 500 * time.Millisecond
)

// Config of a Writer.
type Config struct {
	// Start is the wall clock at time 0, for the header.
	Start time.Time
	// OnError is called once, from the Writer's goroutine, when the tape can
	// no longer be written: disk full, stick pulled. Recording ends with it.
	OnError func(error)
	// OnPanic is called first if the Writer's goroutine panics.
	OnPanic func(v any, stack []byte)
}

// Stats counts what a Writer did.
type Stats struct {
	Records    uint64 // handed over and taken
	LostChunks uint64 // handed over and not taken: the disk was too slow or gone
	LostBytes  uint64
	Flushed    uint64 // bytes of tape that are on the disk
}

// Writer records without ever keeping its callers waiting: Record copies into a
// bounded queue, a goroutine of the Writer formats, writes and syncs.
type Writer struct {
	out io.Writer
	cfg Config

	mu         sync.Mutex
	fill       queue // what callers add to
	stats      Stats
	lostChunks uint64 // since the last swap
	lostBytes  uint64
	lostTime   time.Duration
	err        error
	closing    bool

	wake chan struct{}
	done chan struct{}
	work queue  // what the goroutine formats
	text []byte // what it writes
}

// NewWriter starts a tape on out, usually a new file. If out has a method
// Sync() error, as files have, it is called after every flush.
func NewWriter(out io.Writer, cfg Config) *Writer {
	w := &Writer{out: out, cfg: cfg, wake: make(chan struct{}, 1), done: make(chan struct{})}
	w.text = AppendHeader(w.text, cfg.Start)
	go link.WithPanicHook(cfg.OnPanic, w.run)
	return w
}

// Record hands b over with its time. It copies b, never blocks and allocates
// nothing once the queue has grown. What does not fit is counted, and the count
// is written into the tape at the place where it is missing.
func (w *Writer) Record(t time.Duration, d Dir, b []byte) {
	w.mu.Lock()
	// Once something is lost everything is, up to the next flush: the place of
	// the loss in the tape is then exact.
	if w.lostChunks > 0 || w.closing || w.err != nil || w.fill.size()+len(b)+recordHead > QueueMax {
		if w.lostChunks == 0 {
			w.lostTime = t
		}
		w.lostChunks++
		w.lostBytes += uint64(len(b))
		w.stats.LostChunks++
		w.stats.LostBytes += uint64(len(b))
	} else {
		w.fill.add(t, d, b)
		w.stats.Records++
	}
	half := w.fill.size() > QueueMax/2
	w.mu.Unlock()
	if half {
		w.kick()
	}
}

// Remark writes words of ours between the bytes.
func (w *Writer) Remark(t time.Duration, words string) { w.Record(t, Remark, []byte(words)) }

// Stats returns the counts so far.
func (w *Writer) Stats() Stats {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.stats
}

// Close writes what waits and returns the first error of the tape, or ctx's if
// the disk does not answer in time. It does not close the file. What is recorded
// after Close is counted as lost.
func (w *Writer) Close(ctx context.Context) error {
	w.mu.Lock()
	w.closing = true
	w.mu.Unlock()
	w.kick()
	select {
	case <-w.done:
	case <-ctx.Done():
		return fmt.Errorf("tape: the disk does not answer, the end of the tape is missing: %w", ctx.Err())
	}
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.err
}

func (w *Writer) kick() {
	select {
	case w.wake <- struct{}{}:
	default:
	}
}

func (w *Writer) run() {
	defer close(w.done)
	tick := time.NewTicker(FlushEvery)
	defer tick.Stop()
	for {
		select {
		case <-tick.C:
		case <-w.wake:
		}
		last := w.swap()
		if err := w.flush(); err != nil {
			w.fail(err)
			return
		}
		if last {
			return
		}
	}
}

// swap takes over what the callers have queued and formats it.
func (w *Writer) swap() (last bool) {
	w.mu.Lock()
	w.work, w.fill = w.fill, w.work
	w.fill.reset()
	chunks, bytes, at := w.lostChunks, w.lostBytes, w.lostTime
	w.lostChunks, w.lostBytes = 0, 0
	last = w.closing
	w.mu.Unlock()
	w.work.each(func(t time.Duration, d Dir, b []byte) {
		w.text = appendRecord(w.text, t, d, b)
	})
	if chunks > 0 {
		w.text = appendRecord(w.text, at, Loss, fmt.Appendf(nil, "lost %d chunks %d bytes", chunks, bytes))
	}
	return last
}

func (w *Writer) flush() error {
	if len(w.text) == 0 {
		return nil
	}
	n, err := w.out.Write(w.text)
	if err == nil && n < len(w.text) {
		err = io.ErrShortWrite
	}
	if s, ok := w.out.(interface{ Sync() error }); ok && err == nil {
		err = s.Sync()
	}
	if err == nil {
		w.mu.Lock()
		w.stats.Flushed += uint64(n)
		w.mu.Unlock()
	}
	w.text = w.text[:0]
	return err
}

func (w *Writer) fail(err error) {
	err = fmt.Errorf("tape cannot be written, recording has ended: %w; make room on the disk and start a new session", err)
	w.mu.Lock()
	w.err = err
	w.mu.Unlock()
	if w.cfg.OnError != nil {
		w.cfg.OnError(err)
	}
}
