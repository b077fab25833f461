package link

import (
	"errors"
	"fmt"
	"io"
	"runtime/debug"
	"time"
)

// Port carries bytes to and from one board.
//
// Read may return 0, nil when nothing arrived within the port's own time-out,
// so a Port must not be wrapped in a bufio.Reader. A Port's Write may block
// without limit, and its Close need not free a blocked Write; Writer is made
// for that. Read and Write may be called at the same time from two goroutines,
// and Close from a third.
type Port interface {
	io.ReadWriteCloser
}

// PortError says that a port no longer carries bytes: the cable is out, the
// board has lost its power, the device is gone.
type PortError struct {
	Op  string // "read" or "write"
	Err error
}

func (e *PortError) Error() string {
	return fmt.Sprintf("port %s failed: %v; check cable and power, then connect again", e.Op, e.Err)
}

// Unwrap returns the error of the port.
func (e *PortError) Unwrap() error { return e.Err }

// errNoProgress is the cause in a PortError when a port takes no bytes and
// gives no reason.
var errNoProgress = errors.New("port takes no bytes and reports no error")

// WithPanicHook calls f. If f panics it calls hook with the panic value and the
// stack first, so that a stop can leave before anything else happens, and then
// lets the panic go on: a fault of ours ends the program, loudly.
func WithPanicHook(hook func(v any, stack []byte), f func()) {
	if hook == nil {
		f()
		return
	}
	defer func() {
		if v := recover(); v != nil {
			hook(v, debug.Stack())
			panic(v)
		}
	}()
	f()
}

// LineTime returns how long n bytes occupy a line of baud bit/s at ten bit
// times a byte. A baud of 0 or less means a line without a rate and gives 0.
func LineTime(n, baud int) time.Duration {
	if baud <= 0 || n <= 0 {
		return 0
	}
	return time.Duration(int64(n) * 10 * int64(time.Second) / int64(baud))
}

// sinceNow returns a clock that counts from the call on.
func sinceNow() func() time.Duration {
	start := time.Now()
	return func() time.Duration { return time.Since(start) }
}
