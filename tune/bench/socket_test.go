package bench

import (
	"errors"
	"sync"
	"time"

	"gainwright/link"
	"gainwright/link/simrig"
)

// socket is where a simulated board can be plugged in and out: its port can be
// opened again and again, and what comes while nobody has it open is lost.
type socket struct {
	*Served
	mu  sync.Mutex
	cur *plug
}

func newSocket(cfg simrig.Config, seed uint64) *socket {
	s := &socket{Served: ServePipe(simrig.New(cfg, seed))}
	go func() {
		b := make([]byte, 4096)
		for {
			n, err := s.far.Read(b)
			if err != nil {
				return
			}
			s.mu.Lock()
			if s.cur != nil && n > 0 {
				s.cur.add(b[:n])
			}
			s.mu.Unlock()
		}
	}()
	return s
}

// open gives the port to somebody; who had it loses it.
func (s *socket) open() link.Port {
	p := &plug{far: s.far, more: make(chan struct{}, 1)}
	s.mu.Lock()
	s.cur = p
	s.mu.Unlock()
	return p
}

// pull takes the plug out: whoever has the port open sees it go.
func (s *socket) pull() {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.cur != nil {
		s.cur.Close()
		s.cur = nil
	}
}

type plug struct {
	far  link.Port
	mu   sync.Mutex
	buf  []byte
	gone bool
	more chan struct{}
}

var errPulled = errors.New("the device is gone")

func (p *plug) add(b []byte) {
	p.mu.Lock()
	p.buf = append(p.buf, b...)
	p.mu.Unlock()
	select {
	case p.more <- struct{}{}:
	default:
	}
}

func (p *plug) Read(b []byte) (int, error) {
	for range 2 {
		p.mu.Lock()
		n, gone := copy(b, p.buf), p.gone
		p.buf = p.buf[n:]
		p.mu.Unlock()
		if gone {
			return 0, errPulled
		}
		if n > 0 {
			return n, nil
		}
		select {
		case <-p.more:
		case <-time.After(link.PipeTimeout):
			return 0, nil
		}
	}
	return 0, nil
}

func (p *plug) Write(b []byte) (int, error) {
	p.mu.Lock()
	gone := p.gone
	p.mu.Unlock()
	if gone {
		return 0, errPulled
	}
	return p.far.Write(b)
}

func (p *plug) Close() error {
	p.mu.Lock()
	p.gone = true
	p.mu.Unlock()
	select {
	case p.more <- struct{}{}:
	default:
	}
	return nil
}
