package bench

import (
	"bytes"
	"context"
	"errors"
	"io"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/linktest"
	"gainwright/protocol"
	"gainwright/safety"
)

// onAWire is a live bench on a line from which nothing is ever heard.
func onAWire(t *testing.T) (l *Live, wire *linktest.Wire) {
	t.Helper()
	wire = linktest.NewWire(115200)
	near, far := link.Pipe()
	go func() { // what the console sends goes nowhere but into wire
		_, _ = io.Copy(wire, far)
	}()
	l = NewLive(Options{Open: func(string) (Opened, error) { return Opened{Port: near, Baud: 115200}, nil }})
	l.Connect("memory")
	time.Sleep(100 * time.Millisecond)
	t.Cleanup(func() { far.Close() })
	return l, wire
}

// A stop is heeded before all that the session was sent before it, and is not lost
// where the mailbox has no room.
func TestAStopGoesAheadOfAFullMailbox(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		l, _ := onAWire(t)
		for range 20 { // what waits in two channels is taken from either by lot
			before := l.stopsSeen()
			busy := make(chan struct{})
			l.post(func(*session) { <-busy })
			synctest.Wait()
			waited, unheeded := 0, 0
			for l.post(func(s *session) {
				waited++
				if s.core.State().Stops == before {
					unheeded++
				}
			}) {
			}
			l.Stop(safety.ByStopKey)
			close(busy)
			after := l.stopsSeen()
			if waited < mailMax/2 || unheeded > 0 { // the job may have put something between
				t.Errorf("%d of %d were done before the stop was heeded", unheeded, waited)
			}
			if after == before {
				t.Error("the stop was lost")
			}
		}
		_, _ = l.Close()
		time.Sleep(5 * time.Second)
	})
}

func (l *Live) stopsSeen() (n uint) {
	l.do(func(s *session) { n = s.core.State().Stops })
	return n
}

// A line that the session decides on while a stop is on its way to it does not
// leave after the stop byte, drive value and request alike.
func TestNoLineFollowsAStopThatIsNotHeeded(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		l, wire := onAWire(t)
		for name, stop := range map[string]func(){
			"stop":  func() { l.Stop(safety.ByStopKey) },
			"paste": func() { l.phase.Store(int32(safety.Armed)); l.Paste() },
			"key":   func() { l.phase.Store(int32(safety.Running)); l.Key(false) },
		} {
			l.do(func(*session) {
				stop() // as if pressed in another goroutine just now
				w := liveWire{l}
				for _, err := range []error{w.Motion([]byte("drive\n")), w.Request([]byte("arm\n"))} {
					if !errors.Is(err, link.ErrVoided) {
						t.Errorf("%s: a line offered after it gives %v", name, err)
					}
				}
			})
			time.Sleep(100 * time.Millisecond)
		}
		l.do(func(*session) {
			if err := (liveWire{l}).Motion([]byte("later\n")); err != nil {
				t.Errorf("heeded, and still: %v", err)
			}
		})
		time.Sleep(100 * time.Millisecond)
		var all []byte
		for _, s := range wire.Sent() {
			all = append(all, s.Bytes...)
		}
		if bytes.Contains(all, []byte("drive")) || bytes.Contains(all, []byte("arm\n")) || !bytes.Contains(all, []byte("later")) || bytes.IndexByte(all, protocol.Cut) < 0 {
			t.Errorf("on the wire %q", all)
		}
		_, _ = l.Close()
		time.Sleep(5 * time.Second)
	})
}

// The second press of the stop key is a cut also where the session does not get to
// the first.
func TestTheSecondPressIsACutWhileTheSessionHangs(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		l := &Live{urgent: make(chan func(*session), urgentMax)} // nobody takes anything
		l.style.Store(1)
		w := link.NewWriter(wire, link.Config{Baud: 115200})
		ctx, cancel := context.WithCancel(context.Background())
		go w.Run(ctx)
		l.line.Store(&liveLine{port: wire, writer: w, cancel: cancel})
		l.Stop(safety.ByStopKey)
		time.Sleep(time.Second)
		if n := len(wire.Sent()); n != 0 {
			t.Errorf("the first press of a ramp and cut put %d writes on the wire", n)
		}
		l.Stop(safety.ByStopKey)
		time.Sleep(time.Second)
		if _, ok := wire.Find(string(rune(protocol.Cut))); !ok {
			t.Error("the second press left no cut")
		}
		cancel()
		time.Sleep(time.Second)
	})
}

// A session that hangs does not keep the program from ending, and what was asked
// of it has put the cut byte on the wire.
func TestClosingDoesNotWaitForASessionThatHangs(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		l, wire := onAWire(t)
		busy := make(chan struct{})
		l.post(func(*session) { <-busy })
		synctest.Wait()
		began := time.Now()
		closed := make(chan struct{})
		go func() { _, _ = l.Close(); close(closed) }()
		select {
		case <-closed:
			if took := time.Since(began); took > 5*time.Second {
				t.Errorf("closing took %v", took)
			}
		case <-time.After(time.Minute):
			t.Error("closing waits for the session")
		}
		if _, ok := wire.Find(string(rune(protocol.Cut))); !ok {
			t.Error("no cut on the wire")
		}
		close(busy)
		<-closed
		time.Sleep(5 * time.Second)
	})
}

// A laptop that slept is noticed also when the program itself was not run for
// long, before the sleep or after it.
func TestASleepWithAPauseIsSeen(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		l, _ := onAWire(t)
		woke := 0
		l.do(func(s *session) {
			s.core.Watch = func(e safety.Event, _ []safety.Effect) {
				if _, ok := e.(safety.Wake); ok {
					woke++
				}
			}
			l.monoWas = s.now - 2*time.Second
			l.wallWas = time.Now().Round(0).Add(-time.Hour)
			l.tick()
			s.core.Watch = nil
		})
		if woke != 1 {
			t.Errorf("an hour's sleep was told %d times", woke)
		}
		_, _ = l.Close()
		time.Sleep(5 * time.Second)
	})
}
