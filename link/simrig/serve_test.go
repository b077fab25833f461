package simrig

import (
	"bytes"
	"io"
	"net"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/protocol"
)

// TestServe runs a served rig in a bubble of virtual time: the cut byte acts as
// soon as it is read, and closing ends both goroutines.
func TestServe(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		near, far := net.Pipe()
		start := time.Now()
		s := Serve(New(benchConfig(), 1), far, func() time.Duration { return time.Since(start) })
		got := make(chan []byte)
		go func() {
			b, _ := io.ReadAll(near)
			got <- b
		}()
		time.Sleep(100 * time.Millisecond)
		if _, err := near.Write([]byte("id\n")); err != nil {
			t.Fatal(err)
		}
		time.Sleep(200 * time.Millisecond)
		if _, err := near.Write([]byte{protocol.Cut}); err != nil {
			t.Fatal(err)
		}
		time.Sleep(20 * time.Millisecond)
		s.Do(func(r *Rig) {
			if r.board.cuts != 1 {
				t.Errorf("%d cuts", r.board.cuts)
			}
		})
		if err := s.Close(); err != nil {
			t.Error(err)
		}
		if err := s.Wait(); err != nil {
			t.Error(err)
		}
		b := <-got
		for _, want := range []string{"ev boot 42 power", "id proto 1.0", "cut 1 "} {
			if !bytes.Contains(b, []byte(want)) {
				t.Errorf("no %q in %q", want, b)
			}
		}
	})
}

// TestServeOutlivesAFarEndThatDoesNotRead: the board's own timeout works on.
func TestServeOutlivesAFarEndThatDoesNotRead(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		near, far := net.Pipe()
		start := time.Now()
		r := New(benchConfig(), 1)
		r.Advance(100 * time.Millisecond)
		r.board.arm = arming{armed: true, token: 7, beatAt: r.now, driveAt: r.now}
		r.board.state = protocol.Armed
		r.Receive(protocol.AppendRequest(nil, "rate", 1, "200 x t"))
		r.Receive(protocol.AppendDriveVolts(nil, 1, 7, 6))
		s := Serve(r, far, func() time.Duration { return 100*time.Millisecond + time.Since(start) })
		time.Sleep(200 * time.Millisecond)
		s.Do(func(r *Rig) {
			if !r.Powered() {
				t.Error("not driving")
			}
		})
		time.Sleep(30 * time.Second) // nobody reads, nobody beats
		s.Do(func(r *Rig) {
			if r.Powered() || r.board.trip != protocol.CauseBeat {
				t.Errorf("powered %v, trip %v", r.Powered(), r.board.trip)
			}
			if n := len(r.board.tx.pending) + len(r.board.tx.sent); n > ringMax+sentMax+ringMax {
				t.Errorf("%d bytes wait", n)
			}
		})
		near.Close()
		s.Wait()
	})
}
