package link_test

import (
	"context"
	"errors"
	"io"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/linktest"
)

func TestReaderPushesBytesWithTheirTime(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		near, far := link.Pipe()
		start := time.Now()
		var got string
		var times []time.Duration
		r := link.NewReader(near, link.ReaderConfig{
			Clock:   func() time.Duration { return time.Since(start) },
			OnBytes: func(at time.Duration, b []byte) { got += string(b); times = append(times, at) },
		})
		done := make(chan error, 1)
		go func() { done <- r.Run(t.Context()) }()
		time.Sleep(3 * time.Second) // many idle reads
		far.Write([]byte("t 1\n"))
		time.Sleep(time.Second)
		far.Write([]byte("t 2\n"))
		synctest.Wait()
		far.Close()
		err := <-done
		var pe *link.PortError
		if !errors.As(err, &pe) || pe.Op != "read" || !errors.Is(err, io.EOF) {
			t.Errorf("Run gives %v, want a read PortError of EOF", err)
		}
		if got != "t 1\nt 2\n" || len(times) != 2 || times[0] != 3*time.Second || times[1] != 4*time.Second {
			t.Errorf("got %q at %v, want both lines at 3 s and 4 s", got, times)
		}
	})
}

func TestReaderEndsWithItsContext(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		near, far := link.Pipe()
		defer far.Close()
		ctx, cancel := context.WithTimeout(t.Context(), time.Second)
		defer cancel()
		r := link.NewReader(near, link.ReaderConfig{OnBytes: func(time.Duration, []byte) {}})
		if err := r.Run(ctx); !errors.Is(err, context.DeadlineExceeded) {
			t.Errorf("Run gives %v", err)
		}
	})
}

// nothing returns 0, nil at once: a port whose time-out is broken.
type nothing struct{ calls int }

func (n *nothing) Read([]byte) (int, error) { n.calls++; return 0, nil }

func TestReaderDoesNotSpinOnAPortThatReturnsNothing(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		port := &nothing{}
		ctx, cancel := context.WithTimeout(t.Context(), time.Second)
		defer cancel()
		link.NewReader(port, link.ReaderConfig{OnBytes: func(time.Duration, []byte) {}}).Run(ctx)
		if port.calls < 500 || port.calls > 1001 {
			t.Errorf("%d reads in a second, want about one a millisecond", port.calls)
		}
	})
}

func TestReaderPanicHookComesFirst(t *testing.T) {
	hooked := false
	defer func() {
		if v := recover(); v != "bug" || !hooked {
			t.Errorf("recovered %v, hook called %v; want the panic to go on after the hook", v, hooked)
		}
	}()
	port := linktest.Flood(failing{}, []byte("junk"), nil)
	link.NewReader(port, link.ReaderConfig{
		OnBytes: func(time.Duration, []byte) { panic("bug") },
		OnPanic: func(any, []byte) { hooked = true },
	}).Run(t.Context())
}

// A flood must cost no memory: the reader keeps nothing.
func TestReaderAllocatesNothingUnderAFlood(t *testing.T) {
	var cancel context.CancelFunc
	n := 0
	port := linktest.Flood(failing{}, []byte("t 1 2 3;ABCD\n"), nil)
	r := link.NewReader(port, link.ReaderConfig{OnBytes: func(_ time.Duration, b []byte) {
		if len(b) != link.ChunkMax {
			t.Errorf("chunk of %d bytes, want %d", len(b), link.ChunkMax)
		}
		if n++; n%1000 == 0 {
			cancel()
		}
	}})
	allocs := testing.AllocsPerRun(1, func() {
		var ctx context.Context
		ctx, cancel = context.WithCancel(t.Context())
		r.Run(ctx)
	})
	if allocs > 20 { // those of the context and of Run itself
		t.Errorf("%v allocations for 1000 chunks, want none of them by the chunk", allocs)
	}
}

// A reader that may pause does so after each read, and ends in the middle of one.
func TestReaderPauses(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		near, far := link.Pipe()
		defer near.Close()
		defer far.Close()
		start := time.Now()
		var came []time.Duration
		var bytes int
		r := link.NewReader(near, link.ReaderConfig{OnBytes: func(_ time.Duration, c []byte) {
			came, bytes = append(came, time.Since(start)), bytes+len(c)
		}, Pause: func(int) time.Duration { return 20 * time.Millisecond }})
		ctx, cancel := context.WithCancel(t.Context())
		ended := make(chan error, 1)
		go func() { ended <- r.Run(ctx) }()
		for range 10 { // a byte every 5 ms
			if _, err := far.Write([]byte("x")); err != nil {
				t.Fatal(err)
			}
			time.Sleep(5 * time.Millisecond)
		}
		at := time.Since(start)
		cancel()
		if err := <-ended; !errors.Is(err, context.Canceled) || time.Since(start) != at {
			t.Errorf("%v, %v after the end", err, time.Since(start)-at)
		}
		if len(came) != 3 || came[1]-came[0] != 20*time.Millisecond || came[2]-came[1] != 20*time.Millisecond || bytes < 8 {
			t.Errorf("reads at %v, %d bytes", came, bytes)
		}
	})
}
