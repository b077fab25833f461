package simrig

import (
	"errors"
	"io"
	"sync"
	"time"
)

// Server runs a rig in real time behind a connection.
type Server struct {
	mu    sync.Mutex
	rig   *Rig
	clock func() time.Duration
	conn  io.ReadWriteCloser

	once sync.Once
	quit chan struct{}
	done chan struct{}
	err  error
}

// pace is how often a served rig is carried on when nothing comes in.
const pace = time.Millisecond

// Serve runs r behind conn until the connection ends or Close is called. clock
// is the time since the rig's power came on; it must not run backwards. The rig
// belongs to the server from here on: reach it through Do.
func Serve(r *Rig, conn io.ReadWriteCloser, clock func() time.Duration) *Server {
	s := &Server{rig: r, clock: clock, conn: conn, quit: make(chan struct{}), done: make(chan struct{})}
	wrote := make(chan error, 1)
	go func() { wrote <- s.write() }()
	go func() {
		defer close(s.done)
		err := s.read()
		s.stop()
		if werr := <-wrote; err == nil {
			err = werr
		}
		select {
		case <-s.quit:
		default:
			s.err = err
		}
	}()
	return s
}

// Do calls f with the rig carried to the present. f must not keep it.
func (s *Server) Do(f func(*Rig)) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.rig.Advance(s.clock())
	f(s.rig)
}

// Close ends the serving and closes the connection; it waits for both.
func (s *Server) Close() error {
	s.stop()
	<-s.done
	return nil
}

// Wait returns once the serving has ended, with the reason unless that was Close
// or an ordinary end of the connection.
func (s *Server) Wait() error {
	<-s.done
	return s.err
}

func (s *Server) stop() {
	s.once.Do(func() {
		close(s.quit)
		s.conn.Close()
	})
}

// read hands to the board what comes in, at once: a cut byte waits for nothing.
func (s *Server) read() error {
	buf := make([]byte, 4096)
	for {
		n, err := s.conn.Read(buf)
		if n > 0 {
			s.Do(func(r *Rig) { r.Receive(buf[:n]) })
		}
		switch {
		case errors.Is(err, io.EOF):
			return nil
		case err != nil:
			return err
		}
		select {
		case <-s.quit:
			return nil
		default:
		}
	}
}

// write carries the rig on and sends what has left the board. A far end that
// does not read stalls this goroutine, never the board: what waits is bounded by
// the board's own transmit ring.
func (s *Server) write() error {
	tick := time.NewTicker(pace)
	defer tick.Stop()
	for {
		var out []byte
		s.Do(func(r *Rig) { out = r.Output() })
		if len(out) > 0 {
			if _, err := s.conn.Write(out); err != nil {
				s.stop()
				return err
			}
		}
		select {
		case <-s.quit:
			return nil
		case <-tick.C:
		}
	}
}
