package conformance

import (
	"time"

	"gainwright/link"
)

// PortLine is a Line over an open port, in real time.
type PortLine struct {
	port  link.Port
	start time.Time
	in    chan []byte
	fault chan error
	quit  chan struct{}
}

// OnPort reads the port from here on; Close ends that. The port stays the
// caller's to close.
func OnPort(p link.Port) *PortLine {
	l := &PortLine{port: p, start: time.Now(), in: make(chan []byte, 64), fault: make(chan error, 1), quit: make(chan struct{})}
	go l.read()
	return l
}

// Close ends the reading.
func (l *PortLine) Close() { close(l.quit) }

func (l *PortLine) read() {
	for {
		buf := make([]byte, link.ChunkMax)
		n, err := l.port.Read(buf)
		if n > 0 {
			select {
			case l.in <- buf[:n]:
			case <-l.quit:
				return
			}
		}
		if err != nil {
			l.fault <- err
			return
		}
		select {
		case <-l.quit:
			return
		default:
		}
	}
}

// Now is the time since OnPort.
func (l *PortLine) Now() time.Duration { return time.Since(l.start) }

// Write hands bytes to the port.
func (l *PortLine) Write(p []byte) error {
	_, err := l.port.Write(p)
	return err
}

// Read waits for bytes until the time given.
func (l *PortLine) Read(until time.Duration) ([]byte, error) {
	timer := time.NewTimer(until - l.Now())
	defer timer.Stop()
	select {
	case b := <-l.in:
		return b, nil
	case err := <-l.fault:
		return nil, err
	case <-timer.C:
		return nil, nil
	}
}
