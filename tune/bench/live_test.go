package bench

import (
	"context"
	"runtime"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// A fault in any goroutine of ours puts the cut byte on the wire before anybody
// is told of it.
func TestAFaultCutsFirst(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		near, far := link.Pipe()
		var mu sync.Mutex
		var got strings.Builder
		all := func() string { mu.Lock(); defer mu.Unlock(); return got.String() }
		go func() {
			buf := make([]byte, 256)
			for {
				n, err := far.Read(buf)
				mu.Lock()
				got.Write(buf[:n])
				mu.Unlock()
				if err != nil {
					return
				}
			}
		}()
		told := ""
		l := NewLive(Options{
			Open:    func(string) (Opened, error) { return Opened{Port: near, Baud: 115200}, nil },
			OnPanic: func(v any, _ []byte) { synctest.Wait(); told = all() },
		})
		l.Connect("memory")
		time.Sleep(100 * time.Millisecond)
		if strings.IndexByte(all(), protocol.Cut) >= 0 {
			t.Fatalf("a stop without a reason: %q", all())
		}
		l.panicked("a fault", nil)
		if strings.IndexByte(told, protocol.Cut) < 0 {
			t.Errorf("when the fault was told the line had %q", told)
		}
		l.Post(job.Quit{})
		if _, err := l.Close(); err != nil {
			t.Error(err)
		}
		far.Close()
	})
}

// brittle is a port in which one thing panics, once it is told to.
type brittle struct {
	link.Port
	read, write atomic.Bool
}

func (b *brittle) Read(p []byte) (int, error) {
	if b.read.Load() {
		panic("read")
	}
	return b.Port.Read(p)
}

func (b *brittle) Write(p []byte) (int, error) {
	if b.write.Swap(false) { // the first only
		panic("write")
	}
	return b.Port.Write(p)
}

// Whichever goroutine breaks, the cut byte leaves before anybody is told.
func TestAFaultInAnyGoroutineCutsFirst(t *testing.T) {
	for name, fault := range map[string]func(l *Live, b *brittle){
		"reader":     func(_ *Live, b *brittle) { b.read.Store(true) },
		"writer":     func(l *Live, b *brittle) { b.write.Store(true); l.Post(job.DoStep{Step: job.StepIdentity}) },
		"supervisor": func(l *Live, _ *brittle) { l.post(func(*session) { panic("supervisor") }) },
		"job":        func(l *Live, _ *brittle) { l.steps <- func(*job.Job) { panic("job") } },
		"tape": func(l *Live, _ *brittle) {
			l.late.mu.Lock()
			l.late.out = new(sheet.Stream) // writing into it is a fault
			l.late.mu.Unlock()
			l.Post(job.DoStep{Step: job.StepIdentity}) // so that there is something to write
		},
	} {
		t.Run(name, func(t *testing.T) {
			synctest.Test(t, func(t *testing.T) {
				near, far := link.Pipe()
				b := &brittle{Port: near}
				var mu sync.Mutex
				var got strings.Builder
				go func() {
					buf := make([]byte, 256)
					for {
						n, err := far.Read(buf)
						mu.Lock()
						got.Write(buf[:n])
						mu.Unlock()
						if err != nil {
							return
						}
					}
				}()
				told := make(chan string, 8)
				l := NewLive(Options{
					Open: func(string) (Opened, error) { return Opened{Port: b, Baud: 115200}, nil },
					OnPanic: func(v any, _ []byte) {
						synctest.Wait()
						mu.Lock()
						told <- got.String()
						mu.Unlock()
						runtime.Goexit() // a real program ends here
					},
				})
				l.Connect("memory")
				time.Sleep(300 * time.Millisecond)
				mu.Lock()
				got.Reset()
				mu.Unlock()
				fault(l, b)
				select {
				case s := <-told:
					if strings.IndexByte(s, protocol.Cut) < 0 {
						t.Errorf("when the fault was told the line had %q", s)
					}
				case <-time.After(time.Minute):
					t.Error("nobody was told of the fault")
				}
				l.overOnce.Do(func() { close(l.over) })
				if line := l.line.Load(); line != nil {
					line.cancel()
				}
				far.Close()
				ctx, cancel := context.WithTimeout(context.Background(), time.Second)
				defer cancel()
				_ = l.tape.Close(ctx)
				time.Sleep(5 * time.Second)
			})
		})
	}
}

// A disk that takes nothing any more holds up the tape and nothing else: the stop
// leaves.
func TestAStopDoesNotWaitForTheDisk(t *testing.T) {
	near, far := link.Pipe()
	cut := make(chan struct{})
	go func() {
		buf := make([]byte, 256)
		for {
			n, err := far.Read(buf)
			if strings.IndexByte(string(buf[:n]), protocol.Cut) >= 0 {
				close(cut)
				return
			}
			if err != nil {
				return
			}
		}
	}()
	opened := make(chan struct{})
	l := NewLive(Options{Open: func(string) (Opened, error) {
		defer close(opened)
		return Opened{Port: near, Baud: 115200}, nil
	}})
	l.late.mu.Lock() // the disk stalls: whoever writes the tape waits here
	l.Connect("memory")
	<-opened
	for l.line.Load() == nil {
		runtime.Gosched()
	}
	for range 5000 { // more than the tape's goroutine could have written meanwhile
		l.tape.Record(l.now(), tape.FromBoard, []byte("T00000000000000000000000\n"))
	}
	l.Stop(safety.ByStopKey)
	<-cut // a stop that waited for the disk would never come
	l.late.mu.Unlock()
	if _, err := l.Close(); err != nil {
		t.Error(err)
	}
	far.Close()
}

// Where the stop key asks for a ramp first and the session takes nothing any more,
// the cut byte leaves instead.
func TestAStopThatNobodyTakesIsACut(t *testing.T) {
	near, far := link.Pipe()
	l := &Live{urgent: make(chan func(*session), 1)}
	l.urgent <- func(*session) {} // no room is left, and nobody makes any
	l.style.Store(1)
	w := link.NewWriter(near, link.Config{Baud: 115200})
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	go w.Run(ctx)
	l.line.Store(&liveLine{port: near, writer: w, cancel: cancel})
	l.Stop(safety.ByStopKey)
	buf := make([]byte, 16)
	for {
		n, err := far.Read(buf)
		if err != nil {
			t.Fatal(err)
		}
		if n > 0 {
			if buf[0] != protocol.Cut {
				t.Errorf("on the wire is %q", buf[:n])
			}
			return
		}
	}
}
