package linktest_test

import (
	"errors"
	"io"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/linktest"
)

// Every harmless wrapper keeps the contract, and a fault that is switched off is
// harmless.
func TestWrappersKeepTheContract(t *testing.T) {
	off := &linktest.Switch{}
	for name, wrap := range map[string]func(link.Port) link.Port{
		"drop off":    func(p link.Port) link.Port { return linktest.Drop(p, 1, 1, off) },
		"garble off":  func(p link.Port) link.Port { return linktest.Garble(p, 1, 1, off) },
		"mute off":    func(p link.Port) link.Port { return linktest.Mute(p, off) },
		"deaf off":    func(p link.Port) link.Port { return linktest.Deaf(p, off) },
		"stall off":   func(p link.Port) link.Port { return linktest.Stall(p, off) },
		"half off":    func(p link.Port) link.Port { return linktest.HalfWrite(p, off) },
		"flood off":   func(p link.Port) link.Port { return linktest.Flood(p, []byte("x"), off) },
		"one byte on": func(p link.Port) link.Port { return linktest.OneByte(p, nil) },
		"delay 20 ms": func(p link.Port) link.Port { return linktest.Delay(p, 20*time.Millisecond) },
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			if err := linktest.CheckPort(open(wrap)); err != nil {
				t.Error(err)
			}
		})
	}
}

// A port with a fault must fail the contract, or the contract checks nothing.
func TestContractCatchesFaults(t *testing.T) {
	for name, c := range map[string]struct {
		wrap func(link.Port) link.Port
		want string // in the error
	}{
		"drop":        {func(p link.Port) link.Port { return linktest.Drop(p, 1, 0.1, nil) }, "bytes arrive in order"},
		"garble":      {func(p link.Port) link.Port { return linktest.Garble(p, 1, 0.1, nil) }, "bytes arrive in order"},
		"mute":        {func(p link.Port) link.Port { return linktest.Mute(p, nil) }, "bytes arrive in order"},
		"deaf":        {func(p link.Port) link.Port { return linktest.Deaf(p, nil) }, "bytes arrive in order"},
		"half":        {func(p link.Port) link.Port { return linktest.HalfWrite(p, nil) }, "bytes arrive in order"},
		"flood":       {func(p link.Port) link.Port { return linktest.Flood(p, []byte("x"), nil) }, "bytes arrive in order"},
		"echo":        {func(p link.Port) link.Port { return &echo{Port: p} }, "idle read"},
		"never shuts": {func(p link.Port) link.Port { return leaky{p} }, "closed port"},
	} {
		t.Run(name, func(t *testing.T) {
			synctest.Test(t, func(t *testing.T) {
				err := linktest.CheckPort(open(c.wrap))
				if err == nil || !strings.Contains(err.Error(), c.want) {
					t.Errorf("contract gives %v, want a complaint about %q", err, c.want)
				}
			})
		})
	}
}

func open(wrap func(link.Port) link.Port) func() (link.Port, link.Port, error) {
	return func() (link.Port, link.Port, error) {
		a, b := link.Pipe()
		return wrap(a), b, nil
	}
}

// echo gives one byte of its own on the first idle read.
type echo struct {
	link.Port
	done bool
}

func (e *echo) Read(p []byte) (int, error) {
	n, err := e.Port.Read(p)
	if n == 0 && err == nil && !e.done {
		e.done = true
		return copy(p, "?"), nil
	}
	return n, err
}

// leaky takes writes after it was closed.
type leaky struct{ link.Port }

func (l leaky) Write(p []byte) (int, error) {
	if n, err := l.Port.Write(p); err == nil {
		return n, nil
	}
	return len(p), nil
}

func TestFaultsAreTheSameForTheSameSeed(t *testing.T) {
	once := func(seed uint64) string {
		a, b := link.Pipe()
		p := linktest.Drop(linktest.Garble(a, seed, 0.2, nil), seed, 0.2, nil)
		b.Write([]byte(strings.Repeat("0123456789", 10)))
		b.Close()
		got, _ := io.ReadAll(p)
		return string(got)
	}
	if first, again := once(1), once(1); first != again {
		t.Error("seed 1 gave two different streams")
	}
	if once(1) == once(2) {
		t.Error("seeds 1 and 2 gave the same stream")
	}
	if n := len(once(1)); n < 60 || n > 95 {
		t.Errorf("%d of 100 bytes left at a loss of 0.2", n)
	}
}

func TestDelayIsExact(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		a, b := link.Pipe()
		p := linktest.Delay(a, 30*time.Millisecond)
		start := time.Now()
		b.Write([]byte("ab"))
		buf := make([]byte, 8)
		n, err := p.Read(buf)
		if string(buf[:n]) != "ab" || err != nil || time.Since(start) != 30*time.Millisecond {
			t.Errorf("read gives %q, %v after %v", buf[:n], err, time.Since(start))
		}
		b.Close()
		if _, err := p.Read(buf); !errors.Is(err, io.EOF) {
			t.Errorf("after close: %v", err)
		}
	})
}

// 11 520 bytes a second at 115 200 baud with ten bit times a byte, so the last
// bit of a full 4096-byte buffer leaves after 355.6 ms.
func TestWireIsAsSlowAsALine(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		w := linktest.NewWire(115200)
		w.Write(make([]byte, 4096))
		if w.Now() != 0 {
			t.Errorf("a write into the buffer took %v", w.Now())
		}
		w.Write([]byte("stop"))
		if got := w.Now(); got < 347*time.Microsecond || got > 348*time.Microsecond {
			t.Errorf("a write into a full buffer waited %v, want four bytes = 347 µs", got)
		}
		last := w.Sent()[1].Last
		if last < 355900*time.Microsecond || last > 355905*time.Microsecond {
			t.Errorf("stop had left after %v, want 4100 bytes = 355.9 ms", last)
		}
		w.Close()
		if _, err := w.Read(nil); err != io.EOF {
			t.Errorf("read after close: %v", err)
		}
	})
}
