package link

import (
	"errors"
	"fmt"
	"sync"
	"time"
)

// StallGrace is how long a Write may last beyond the time its bytes need on the
// line. A port that takes longer has stopped taking bytes.
const StallGrace = 50 * time.Millisecond

// Errors of the lanes.
var (
	// ErrFull says that the request queue has no room.
	ErrFull = errors.New("request queue is full; the line is not being emptied")
	// ErrLength says that a line is empty or longer than LineMax.
	ErrLength = errors.New("line length is out of range")
	// ErrVoided says that a stop came between the decision and the line.
	ErrVoided = errors.New("a stop came first")
	// ErrOver says that the writer has ended; only a new session writes again.
	ErrOver = errors.New("link is over; connect again")
	// ErrStalled is the sentinel inside a StallError.
	ErrStalled = errors.New("port write has stalled")
)

// StallError says that a Write did not end in time. The goroutine that hangs in
// it is left behind and the session is over.
type StallError struct {
	Bytes int           // length of the line that hangs
	After time.Duration // how long the Write had lasted when it was given up
}

func (e *StallError) Error() string {
	return fmt.Sprintf("port took no byte of a %d-byte line for %v; use the hardware stop if the shaft turns, then unplug and connect again",
		e.Bytes, e.After)
}

// Unwrap returns ErrStalled.
func (e *StallError) Unwrap() error { return ErrStalled }

// Config of a Writer. The zero value writes without pacing.
type Config struct {
	// Baud is the line rate in bit/s; 0 = the port has no rate (no pacing).
	Baud int
	// Clock is the console's monotonic time since the session began; nil =
	// counted from NewWriter. It must run at the rate of package time.
	Clock func() time.Duration
	// OnWrote is called after every Write with the time at which it returned.
	// It runs between two lines: it must not block and must not keep line.
	OnWrote func(t time.Duration, line []byte)
	// OnStall is called once, from a goroutine of its own, when a Write hangs.
	OnStall func(*StallError)
	// OnPanic is called first if the writer's goroutine panics.
	OnPanic func(v any, stack []byte)
}

// Stats counts what a Writer did since it was made.
type Stats struct {
	StopsAsked uint64 // calls of Stop
	StopsSent  uint64 // stops that left; several calls may leave as one
	Lines      uint64 // motion, heartbeat and request lines that left
	Bytes      uint64 // all bytes that left
	Voided     uint64 // lines that a stop threw away or refused
	Superseded uint64 // motion and heartbeat lines that a newer one replaced
}

// Writer is the only caller of Port.Write. Its methods may be called from any
// goroutine; none of them waits for the port.
type Writer struct {
	port Port
	cfg  Config
	wake chan struct{}

	mu       sync.Mutex
	lanes    lanes
	free     time.Duration // when the line in flight will have left
	writing  int           // bytes of the Write that is going on; 0 = none
	began    time.Time     // start of that Write
	deadline time.Time     // when that Write counts as stalled; written by loop
	watching bool          // watch is running
	over     bool
	stallErr *StallError
	stalled  chan struct{}

	cur   [LineMax]byte // the line that is being written; owned by loop
	watch *time.Timer   // calls checkStall
}

// NewWriter returns a Writer for port. Nothing is written before Run.
func NewWriter(port Port, cfg Config) *Writer {
	if cfg.Clock == nil {
		cfg.Clock = sinceNow()
	}
	w := &Writer{port: port, cfg: cfg, wake: make(chan struct{}, 1), stalled: make(chan struct{})}
	w.lanes.stop = make([]byte, 0, StopMax)
	return w
}

// Stop sends b before everything else and throws away every line that waits.
// It never blocks, may be called from any goroutine and any number of times; a
// stop that is still pending is not sent twice. An empty b only voids. It
// returns the number of stops so far, which is the stamp of what comes after.
// b longer than StopMax is a fault of the caller and panics.
func (w *Writer) Stop(b []byte) (stamp uint64) {
	if len(b) > StopMax {
		panic("link: stop is longer than StopMax")
	}
	w.mu.Lock()
	w.lanes.putStop(b)
	stamp = w.lanes.stats.StopsAsked
	w.mu.Unlock()
	w.kick()
	return stamp
}

// Stamp returns the number of stops asked for so far. A decision that is taken
// now and written with MotionAt or RequestAt and this stamp is refused if a stop
// comes between.
func (w *Writer) Stamp() uint64 {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.lanes.stats.StopsAsked
}

// Motion offers a motion line; a newer one replaces one that still waits.
func (w *Writer) Motion(b []byte) error { return w.put(toMotion, nil, b) }

// MotionAt is Motion for a line that was decided on when Stamp was stamp. It
// returns ErrVoided if a stop has been asked for since.
func (w *Writer) MotionAt(stamp uint64, b []byte) error {
	return w.put(toMotion, &stamp, b)
}

// Heartbeat offers a heartbeat; a newer one replaces one that still waits. A
// heartbeat neither replaces nor is replaced by a motion line.
func (w *Writer) Heartbeat(b []byte) error { return w.put(toHeartbeat, nil, b) }

// Request queues b behind the requests that wait. It returns ErrFull when
// RequestsMax lines wait: the caller decides what to give up.
func (w *Writer) Request(b []byte) error { return w.put(toRequests, nil, b) }

// RequestAt is Request for a line that was decided on when Stamp was stamp.
func (w *Writer) RequestAt(stamp uint64, b []byte) error {
	return w.put(toRequests, &stamp, b)
}

// put adds b to a lane. A nil stamp means: whatever stops there were.
func (w *Writer) put(to lane, stamp *uint64, b []byte) error {
	if len(b) == 0 || len(b) > LineMax {
		return fmt.Errorf("%w: %d bytes, 1 to %d allowed", ErrLength, len(b), LineMax)
	}
	w.mu.Lock()
	defer w.mu.Unlock()
	switch {
	case w.over:
		return ErrOver
	case stamp != nil && *stamp != w.lanes.stats.StopsAsked:
		w.lanes.stats.Voided++
		return ErrVoided
	}
	if err := w.lanes.put(to, b); err != nil {
		return err
	}
	w.kick()
	return nil
}

// Stats returns the counts so far.
func (w *Writer) Stats() Stats {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.lanes.stats
}

func (w *Writer) kick() {
	select {
	case w.wake <- struct{}{}:
	default: // a wake-up is already pending
	}
}
