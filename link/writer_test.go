package link_test

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/linktest"
)

var cut = []byte{0x18} // the ASCII CAN control byte

// run starts w and returns a function that ends it and gives Run's error.
func run(t *testing.T, w *link.Writer) (end func() error) {
	t.Helper()
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan error, 1)
	go func() { done <- w.Run(ctx) }()
	return func() error { cancel(); return <-done }
}

func lines(wire *linktest.Wire) []string {
	var got []string
	for _, s := range wire.Sent() {
		got = append(got, string(s.Bytes))
	}
	return got
}

func wantLines(t *testing.T, wire *linktest.Wire, want ...string) {
	t.Helper()
	if got := lines(wire); !slices.Equal(got, want) {
		t.Errorf("on the wire:\n got %q\nwant %q", got, want)
	}
}

// The line rates of the trade; the two-line-time bound is that of the project's
// own promise. 10 bit times a byte: start bit, eight data bits, stop bit.
func TestStopIsOnTheWireWithinTwoLineTimes(t *testing.T) {
	for _, baud := range []int{38400, 115200, 921600} {
		t.Run(fmt.Sprint(baud), func(t *testing.T) {
			rng := rand.New(rand.NewPCG(uint64(baud), 7))
			worst := time.Duration(0)
			for range 50 {
				synctest.Test(t, func(t *testing.T) {
					worst = max(worst, stopUnderLoad(t, baud, rng))
				})
			}
			lineTime := link.LineTime(128, baud)
			t.Logf("worst stop: %v of a line time of %v", worst, lineTime)
			if worst > 2*lineTime {
				t.Errorf("stop was on the wire after %v, want within two line times = %v", worst, 2*lineTime)
			}
			if worst < lineTime/2 {
				t.Errorf("worst stop took only %v: no line was ever in its way, so this test shows nothing", worst)
			}
		})
	}
}

// stopUnderLoad keeps every lane full of the longest lines and returns the time
// from a stop at a random moment to its last bit.
func stopUnderLoad(t *testing.T, baud int, rng *rand.Rand) time.Duration {
	wire := linktest.NewWire(baud)
	w := link.NewWriter(wire, link.Config{Baud: baud})
	end := run(t, w)
	long := []byte(strings.Repeat("l", 127) + "\n")
	for range link.RequestsMax {
		if err := w.Request(long); err != nil {
			t.Fatal(err)
		}
	}
	until := time.Duration(rng.Int64N(int64(40 * link.LineTime(128, baud))))
	for wire.Now() < until {
		w.Motion(long)
		w.Heartbeat(long)
		w.Request(long) // full now and then: that is the load
		time.Sleep(min(link.LineTime(32, baud), until-wire.Now()))
	}
	asked := wire.Now()
	w.Stop(cut)
	time.Sleep(4 * link.LineTime(128, baud))
	end()
	stop, ok := wire.Find(string(cut))
	if !ok {
		t.Fatal("stop never left")
	}
	if last := wire.Sent()[len(wire.Sent())-1]; !bytes.Equal(last.Bytes, cut) {
		t.Fatalf("%q left after the stop that should have voided it", last.Bytes)
	}
	return stop.Last - asked
}

func TestStopVoidsWhatWasQueued(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		w := link.NewWriter(wire, link.Config{Baud: 115200})
		w.Request([]byte("r1\n"))
		w.Motion([]byte("m1\n"))
		w.Heartbeat([]byte("h1\n"))
		w.Request([]byte("r2\n"))
		w.Stop(cut)
		w.Request([]byte("r3\n"))
		end := run(t, w)
		time.Sleep(time.Second)
		wantLines(t, wire, "\x18", "r3\n")
		if s := w.Stats(); s.Voided != 4 || s.StopsSent != 1 || s.Lines != 1 || s.Bytes != 4 {
			t.Errorf("stats %+v, want 4 voided, 1 stop, 1 line, 4 bytes", s)
		}
		if err := end(); !errors.Is(err, context.Canceled) {
			t.Errorf("Run gives %v, want context.Canceled", err)
		}
	})
}

func TestStampRefusesLinesOlderThanTheStop(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		w := link.NewWriter(wire, link.Config{Baud: 115200})
		end := run(t, w)
		decided := w.Stamp()
		after := w.Stop(cut) // the key tap is faster than the one who decided
		if err := w.MotionAt(decided, []byte("old\n")); !errors.Is(err, link.ErrVoided) {
			t.Errorf("motion from before the stop gives %v, want ErrVoided", err)
		}
		if err := w.RequestAt(decided, []byte("arm\n")); !errors.Is(err, link.ErrVoided) {
			t.Errorf("request from before the stop gives %v, want ErrVoided", err)
		}
		if err := w.MotionAt(after, []byte("new\n")); err != nil {
			t.Errorf("motion from after the stop gives %v", err)
		}
		time.Sleep(time.Second)
		wantLines(t, wire, "\x18", "new\n")
		end()
	})
}

func TestLanesAndTheirOrder(t *testing.T) {
	for _, c := range []struct {
		name, why string
		offer     func(w *link.Writer)
		want      []string
	}{
		{"newest wins", "an old setpoint is worth nothing", func(w *link.Writer) {
			w.Motion([]byte("m1"))
			w.Heartbeat([]byte("h1"))
			w.Motion([]byte("m2"))
			w.Heartbeat([]byte("h2"))
		}, []string{"m2", "h2"}},
		{"a heartbeat is not starved", "a busy motion lane keeps its place, not more", func(w *link.Writer) {
			w.Heartbeat([]byte("h1"))
			w.Motion([]byte("m1"))
			w.Heartbeat([]byte("h2"))
		}, []string{"h2", "m1"}},
		{"heartbeat before requests", "a board times out, a request is repeated", func(w *link.Writer) {
			w.Request([]byte("r1"))
			w.Request([]byte("r2"))
			w.Heartbeat([]byte("h1"))
		}, []string{"h1", "r1", "r2"}},
		{"a pending stop is sent once", "the caller repeats it until the board answers", func(w *link.Writer) {
			w.Stop(cut)
			w.Stop(cut)
		}, []string{"\x18"}},
		{"two kinds of stop both leave", "a cut after a ramp and cut must not be lost", func(w *link.Writer) {
			w.Stop([]byte("ramp\n"))
			w.Stop(cut)
		}, []string{"ramp\n\x18"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			synctest.Test(t, func(t *testing.T) {
				wire := linktest.NewWire(115200)
				w := link.NewWriter(wire, link.Config{Baud: 115200})
				c.offer(w)
				end := run(t, w)
				time.Sleep(time.Second)
				wantLines(t, wire, c.want...)
				end()
			})
		})
	}
}

func TestLinesAreSpacedByTheirTimeOnTheLine(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		w := link.NewWriter(wire, link.Config{Baud: 115200})
		end := run(t, w)
		for i := range link.RequestsMax {
			w.Request(bytes.Repeat([]byte{'a' + byte(i)}, 10+i))
		}
		time.Sleep(time.Second)
		sent := wire.Sent()
		if len(sent) != link.RequestsMax {
			t.Fatalf("%d lines left, want %d", len(sent), link.RequestsMax)
		}
		for i, s := range sent {
			if s.Written != s.First {
				t.Errorf("line %d was written at %v but waited for the line until %v: two in flight", i, s.Written, s.First)
			}
			if i > 0 && s.Written-sent[i-1].Last > time.Microsecond {
				t.Errorf("line %d left %v after the line was free", i, s.Written-sent[i-1].Last)
			}
		}
		end()
	})
}

// A stop does not wait for the line before it, but the line after it waits for
// both.
func TestLineAfterAStopWaitsForAllAheadOfIt(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(9600)
		w := link.NewWriter(wire, link.Config{Baud: 9600})
		end := run(t, w)
		w.Request(make([]byte, 96)) // 100 ms
		time.Sleep(time.Millisecond)
		w.Stop(cut)
		time.Sleep(time.Millisecond)
		w.Request([]byte("next"))
		time.Sleep(time.Second)
		sent := wire.Sent()
		if len(sent) != 3 || sent[1].Written != time.Millisecond || sent[2].Written != sent[1].Last {
			t.Errorf("sent %+v, want the stop written at 1 ms and the next line when the stop's last bit has left", sent)
		}
		end()
	})
}

func TestBoundsAreReported(t *testing.T) {
	w := link.NewWriter(linktest.NewWire(115200), link.Config{}) // never run: nothing leaves
	for i := range link.RequestsMax {
		if err := w.Request([]byte("r")); err != nil {
			t.Fatalf("request %d: %v", i, err)
		}
	}
	if err := w.Request([]byte("r")); !errors.Is(err, link.ErrFull) {
		t.Errorf("request %d gives %v, want ErrFull", link.RequestsMax, err)
	}
	for _, n := range []int{0, link.LineMax + 1} {
		if err := w.Motion(make([]byte, n)); !errors.Is(err, link.ErrLength) {
			t.Errorf("line of %d bytes gives %v, want ErrLength", n, err)
		}
	}
	if err := w.Motion(make([]byte, link.LineMax)); err != nil {
		t.Errorf("line of LineMax bytes gives %v", err)
	}
}

// Pending stops of different kinds must not grow without bound, and the last
// one asked for must be among those that leave.
func TestManyStopsStayBounded(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		w := link.NewWriter(wire, link.Config{Baud: 115200})
		var last string
		for i := range 1000 {
			last = fmt.Sprintf("stop %d\n", i)
			w.Stop([]byte(last))
		}
		end := run(t, w)
		time.Sleep(time.Second)
		got := strings.Join(lines(wire), "")
		if len(got) > link.StopMax || !strings.HasSuffix(got, last) {
			t.Errorf("%d bytes of stop, the end of them %q, want at most %d and %q", len(got), got[max(0, len(got)-20):], link.StopMax, last)
		}
		end()
	})
}

func TestStalledWriteEndsTheSession(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var hang linktest.Switch
		port := linktest.Stall(linktest.NewWire(115200), &hang)
		reported := make(chan time.Duration, 2)
		start := time.Now()
		w := link.NewWriter(port, link.Config{Baud: 115200, OnStall: func(*link.StallError) { reported <- time.Since(start) }})
		done := make(chan error, 1)
		go func() { done <- w.Run(t.Context()) }()
		hang.Set(true)
		w.Request([]byte("0123456789"))
		err := <-done
		var stall *link.StallError
		if !errors.As(err, &stall) || !errors.Is(err, link.ErrStalled) || stall.Bytes != 10 {
			t.Fatalf("Run gives %v, want a StallError of 10 bytes", err)
		}
		want := link.StallGrace + link.LineTime(10, 115200)
		if got := <-reported; got < want || got > want+time.Millisecond {
			t.Errorf("stall reported after %v, want %v", got, want)
		}
		if err := w.Motion([]byte("m")); !errors.Is(err, link.ErrOver) {
			t.Errorf("motion after the stall gives %v, want ErrOver", err)
		}
		w.Stop(cut) // must not block nor panic
		hang.Set(false)
		time.Sleep(time.Second)
		synctest.Wait()
		port.Close() // frees the goroutine that was left behind, if it still hung
		if len(reported) != 0 {
			t.Error("stall was reported twice")
		}
	})
}

// A write that is slow but not stalled is no reason to end a session.
func TestSlowWriteIsNoStall(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var hang linktest.Switch
		wire := linktest.NewWire(115200)
		w := link.NewWriter(linktest.Stall(wire, &hang), link.Config{Baud: 115200})
		end := run(t, w)
		for range 20 {
			hang.Set(true)
			w.Motion([]byte("m"))
			time.Sleep(link.StallGrace - 10*time.Millisecond)
			hang.Set(false)
			time.Sleep(20 * time.Millisecond)
		}
		if err := end(); !errors.Is(err, context.Canceled) {
			t.Errorf("Run gives %v", err)
		}
		if n := len(wire.Sent()); n != 20 {
			t.Errorf("%d lines left, want 20", n)
		}
	})
}

func TestHalfWritesAreCompleted(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		w := link.NewWriter(linktest.HalfWrite(wire, nil), link.Config{Baud: 115200})
		end := run(t, w)
		w.Request([]byte("a whole line\n"))
		time.Sleep(time.Second)
		w.Stop(cut)
		time.Sleep(time.Second)
		if got := strings.Join(lines(wire), ""); got != "a whole line\n\x18" {
			t.Errorf("on the wire %q", got)
		}
		end()
	})
}

type failing struct {
	n   int
	err error
}

func (f failing) Read([]byte) (int, error)  { return 0, f.err }
func (f failing) Write([]byte) (int, error) { return f.n, f.err }
func (f failing) Close() error              { return nil }

func TestWriteErrorEndsTheSession(t *testing.T) {
	unplugged := errors.New("input/output error")
	for _, c := range []struct {
		name string
		port failing
		want error
	}{
		{"error", failing{0, unplugged}, unplugged},
		{"takes nothing, says nothing", failing{0, nil}, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			w := link.NewWriter(c.port, link.Config{})
			w.Request([]byte("x"))
			err := w.Run(t.Context())
			var pe *link.PortError
			if !errors.As(err, &pe) || pe.Op != "write" || c.want != nil && !errors.Is(err, c.want) {
				t.Errorf("Run gives %v, want a write PortError of %v", err, c.want)
			}
			if err := w.Request([]byte("x")); !errors.Is(err, link.ErrOver) {
				t.Errorf("request afterwards gives %v, want ErrOver", err)
			}
		})
	}
}

func TestStopPendingWhenLeavingIsWritten(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		w := link.NewWriter(wire, link.Config{}) // not paced: nothing but leaving holds the request back
		ctx, cancel := context.WithCancel(t.Context())
		cancel()
		w.Stop(cut)
		w.Request([]byte("too late\n"))
		if err := w.Run(ctx); !errors.Is(err, context.Canceled) {
			t.Errorf("Run gives %v", err)
		}
		wantLines(t, wire, "\x18")
	})
}

func TestOnWroteSeesEveryByteInOrder(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		wire := linktest.NewWire(115200)
		var seen []string
		var last time.Duration
		w := link.NewWriter(wire, link.Config{Baud: 115200, Clock: wire.Now, OnWrote: func(at time.Duration, b []byte) {
			if at < last {
				t.Errorf("time went back from %v to %v", last, at)
			}
			last = at
			seen = append(seen, string(b))
		}})
		end := run(t, w)
		for i := range 5 {
			w.Request(fmt.Appendf(nil, "r%d", i))
			w.Motion(fmt.Appendf(nil, "m%d", i))
			time.Sleep(10 * time.Millisecond)
		}
		w.Stop(cut)
		time.Sleep(10 * time.Millisecond)
		end()
		if !slices.Equal(seen, lines(wire)) {
			t.Errorf("seen %q, on the wire %q", seen, lines(wire))
		}
	})
}

func TestPanicHookComesFirst(t *testing.T) {
	var order []string
	func() {
		defer func() { order = append(order, fmt.Sprint("recovered ", recover())) }()
		link.WithPanicHook(func(v any, stack []byte) {
			order = append(order, fmt.Sprintf("hook %v %v", v, len(stack) > 0))
		}, func() { panic("ours") })
	}()
	if want := []string{"hook ours true", "recovered ours"}; !slices.Equal(order, want) {
		t.Errorf("got %q, want %q", order, want)
	}
}

// None of the lanes may wait while a Write hangs: it is called from the one
// goroutine that must stay alive then.
func TestLanesNeverWaitForThePort(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		hang := linktest.On()
		port := linktest.Stall(linktest.NewWire(9600), hang)
		w := link.NewWriter(port, link.Config{Baud: 9600})
		done := make(chan error, 1)
		go func() { done <- w.Run(t.Context()) }()
		w.Request([]byte("x"))
		time.Sleep(time.Millisecond)
		before := time.Now()
		for range 1000 {
			w.Stop(cut)
			w.Motion([]byte("m"))
			w.Heartbeat([]byte("h"))
			w.Request([]byte("r"))
			w.Stats()
		}
		if waited := time.Since(before); waited != 0 {
			t.Errorf("the lanes waited %v of virtual time", waited)
		}
		<-done
		port.Close()
	})
}

func TestHotPathAllocatesNothing(t *testing.T) {
	w := link.NewWriter(failing{}, link.Config{})
	line := []byte("u 17 1234;ABCD\n")
	if n := testing.AllocsPerRun(100, func() {
		w.Motion(line)
		w.Heartbeat(line)
		w.RequestAt(w.Stamp(), line)
		w.Stop(cut)
	}); n != 0 {
		t.Errorf("%v allocations for motion, heartbeat, request and stop, want 0", n)
	}
}

var _ io.ReadWriteCloser = failing{}
