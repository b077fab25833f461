package serialport

import (
	"fmt"
	"os"
	"sync"
	"sync/atomic"
	"time"

	"go.bug.st/serial"
)

// Lines says what to do with the modem lines DTR and RTS.
type Lines int

const (
	// LinesQuiet disturbs the board as little as the system allows: DTR and
	// RTS are not driven, hang-up on close is switched off.
	LinesQuiet Lines = iota
	// LinesLeave leaves everything as the system does it.
	LinesLeave
	// LinesAssert raises DTR, as boards with native USB want that stay silent
	// without it, and switches hang-up on close off.
	LinesAssert
)

// Options of OpenWith.
type Options struct {
	Baud  int // bit/s, > 0; 8 data bits, no parity, 1 stop bit, no flow control
	Lines Lines
}

// Opened says what Open found and did.
type Opened struct {
	Path   string // as asked for
	Device string // what it is a name of: links resolved
	Baud   int    // bit/s
	Lines  string // a sentence: what happened to DTR, RTS and HUPCL
}

// Port is an open serial port. Read returns 0, nil after ReadTimeout. Write
// blocks for as long as the device takes no bytes, and Close does not free it.
type Port struct {
	Opened
	port   serial.Port
	lock   *lock
	use    sync.RWMutex // held by a Write for as long as it lasts
	closed atomic.Bool
	once   sync.Once
}

// Open opens path at baud bit/s with LinesQuiet. Every error is an *OpenError.
func Open(path string, baud int) (*Port, error) {
	return OpenWith(path, Options{Baud: baud})
}

// OpenWith opens path. Every error is an *OpenError.
func OpenWith(path string, o Options) (*Port, error) {
	if o.Baud <= 0 {
		return nil, &OpenError{Path: path, Err: ErrBaud, Detail: fmt.Sprintf("%d bit/s", o.Baud)}
	}
	device, err := resolve(path)
	if err != nil {
		return nil, classify(path, err)
	}
	lock, err := acquire(device)
	if err != nil {
		return nil, classify(path, err)
	}
	ctl, err := openControl(device)
	if err != nil {
		lock.release()
		return nil, classify(path, err)
	}
	defer ctl.close()
	port, err := serial.Open(device, &serial.Mode{BaudRate: o.Baud, DataBits: 8, InitialStatusBits: initialBits(o.Lines)})
	if err == nil {
		if err = port.SetReadTimeout(ReadTimeout); err != nil {
			port.Close()
		}
	}
	if err != nil {
		lock.release()
		return nil, classify(path, err)
	}
	p := &Port{Opened: Opened{Path: path, Device: device, Baud: o.Baud}, port: port, lock: lock}
	p.Lines = settleLines(o.Lines, ctl, port)
	return p, nil
}

// Read reads what has arrived, or returns 0, nil after ReadTimeout.
func (p *Port) Read(b []byte) (int, error) {
	if p.closed.Load() {
		return 0, os.ErrClosed
	}
	n, err := p.port.Read(b)
	return n, p.explain(err)
}

// Write gives b to the system, which may take less than all of it.
func (p *Port) Write(b []byte) (int, error) {
	p.use.RLock()
	defer p.use.RUnlock()
	if p.closed.Load() {
		return 0, os.ErrClosed
	}
	n, err := p.port.Write(b)
	return n, p.explain(err)
}

func (p *Port) explain(err error) error {
	switch {
	case err == nil:
		return nil
	case p.closed.Load():
		return os.ErrClosed
	default:
		return fmt.Errorf("%w: %w", ErrGone, err)
	}
}

// closePatience is how long Close waits for a Write that is going on.
const closePatience = 100 * time.Millisecond

// Close closes the port and gives the lock back. The library writes to a bare
// file number, which the system may hand out again as soon as it is closed; so
// Close first waits for a Write that is going on. One that lasts longer than
// closePatience hangs inside the system, where it can do no such harm.
func (p *Port) Close() error {
	var err error
	p.once.Do(func() {
		p.closed.Store(true)
		for end := time.Now().Add(closePatience); !p.use.TryLock(); {
			if time.Now().After(end) {
				err = p.port.Close()
				p.lock.release()
				return
			}
			time.Sleep(time.Millisecond)
		}
		defer p.use.Unlock()
		err = p.port.Close()
		p.lock.release()
	})
	return err
}
