package linktest

import (
	"sync"
	"time"

	"gainwright/link"
)

// Delay lets every byte from the board arrive d later, in order. It reads ahead
// in a goroutine of its own, which ends when the port's Read fails.
func Delay(port link.Port, d time.Duration) link.Port {
	l := &delay{Port: port, by: d, arrived: make(chan struct{}, 1)}
	go l.pump()
	return l
}

type late struct {
	due time.Time
	b   []byte
	err error
}

type delay struct {
	link.Port
	by      time.Duration
	mu      sync.Mutex
	queue   []late
	arrived chan struct{}
}

func (l *delay) pump() {
	for {
		b := make([]byte, link.ChunkMax)
		n, err := l.Port.Read(b)
		if n == 0 && err == nil {
			continue
		}
		l.mu.Lock()
		l.queue = append(l.queue, late{time.Now().Add(l.by), b[:n], err})
		l.mu.Unlock()
		select {
		case l.arrived <- struct{}{}:
		default:
		}
		if err != nil {
			return
		}
	}
}

func (l *delay) Read(p []byte) (int, error) {
	idle := time.NewTimer(link.PipeTimeout)
	defer idle.Stop()
	for {
		n, wait, err := l.take(p)
		if n > 0 || err != nil {
			return n, err
		}
		select {
		case <-time.After(wait):
		case <-l.arrived:
		case <-idle.C:
			return 0, nil
		}
	}
}

// take copies what is due; otherwise it says how long to wait.
func (l *delay) take(p []byte) (n int, wait time.Duration, err error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if len(l.queue) == 0 {
		return 0, link.PipeTimeout, nil
	}
	first := &l.queue[0]
	if wait = time.Until(first.due); wait > 0 {
		return 0, wait, nil
	}
	n = copy(p, first.b)
	first.b = first.b[n:]
	if len(first.b) > 0 {
		return n, 0, nil
	}
	if err = first.err; err == nil {
		l.queue = l.queue[1:]
	}
	return n, 0, err
}
