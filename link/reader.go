package link

import (
	"context"
	"io"
	"time"
)

// ChunkMax is the most bytes that one call of OnBytes carries: what the kernel
// keeps for a terminal device.
const ChunkMax = 4096

// idleMin is the shortest pause after a Read that returned nothing. A port with
// a time-out of its own never gets near it; one that returns 0, nil at once must
// not burn a core.
const idleMin = time.Millisecond

// ReaderConfig of a Reader. OnBytes is required.
type ReaderConfig struct {
	// Clock is the console's monotonic time since the session began; nil =
	// counted from NewReader.
	Clock func() time.Duration
	// OnBytes takes the bytes of one Read and the time at which it returned.
	// It runs in the reader's goroutine: it must not block, and must copy what
	// it keeps.
	OnBytes func(t time.Duration, chunk []byte)
	// Pause, if set, says how long to wait before the next Read after one of n
	// bytes. What the kernel gathers meanwhile costs one wake-up instead of many;
	// it has to have room for that.
	Pause func(n int) time.Duration
	// OnPanic is called first if the reader's goroutine, OnBytes included,
	// panics.
	OnPanic func(v any, stack []byte)
}

// Reader reads a port and pushes what arrives. It keeps nothing, so it grows by
// nothing however much a board sends.
type Reader struct {
	port io.Reader
	cfg  ReaderConfig
	buf  [ChunkMax]byte
}

// NewReader returns a Reader for port.
func NewReader(port io.Reader, cfg ReaderConfig) *Reader {
	if cfg.OnBytes == nil {
		panic("link: ReaderConfig.OnBytes is nil")
	}
	if cfg.Clock == nil {
		cfg.Clock = sinceNow()
	}
	return &Reader{port: port, cfg: cfg}
}

// Run reads until the port fails or ctx is done, and returns a *PortError or
// ctx.Err(). ctx is looked at between two Reads; a Read that blocks without a
// time-out is freed by closing the port. A link that falls silent is no error
// here: some systems never report an unplugged adapter, so silence is judged
// by whoever expects telemetry.
func (r *Reader) Run(ctx context.Context) (err error) {
	WithPanicHook(r.cfg.OnPanic, func() { err = r.loop(ctx) })
	return err
}

func (r *Reader) loop(ctx context.Context) error {
	for ctx.Err() == nil {
		began := time.Now()
		n, err := r.port.Read(r.buf[:])
		if n > 0 {
			r.cfg.OnBytes(r.cfg.Clock(), r.buf[:n])
			if r.cfg.Pause != nil {
				r.wait(ctx, r.cfg.Pause(n))
			}
		}
		if err != nil {
			if ctx.Err() != nil {
				break // we closed the port ourselves
			}
			return &PortError{Op: "read", Err: err}
		}
		if n == 0 && time.Since(began) < idleMin {
			time.Sleep(idleMin)
		}
	}
	return ctx.Err()
}

// wait lets d pass, or less if ctx ends.
func (r *Reader) wait(ctx context.Context, d time.Duration) {
	if d <= 0 {
		return
	}
	select {
	case <-ctx.Done():
	case <-time.After(d):
	}
}
