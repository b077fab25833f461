package tui

import (
	"bytes"
	"context"
	"errors"
	"io"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	tea "github.com/charmbracelet/bubbletea"

	"gainwright/protocol/si"
	"gainwright/tune/job"
)

// fakeSession is a session without anything behind it.
type fakeSession struct {
	mu    sync.Mutex
	posts []job.Intent
	stops []string
	view  atomic.Pointer[job.View]
	alive atomic.Int64
}

func (f *fakeSession) Stop(source string) {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.stops = append(f.stops, source)
}

func (f *fakeSession) Post(in job.Intent) {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.posts = append(f.posts, in)
}

func (f *fakeSession) View() *job.View { return f.view.Load() }

func (f *fakeSession) Alive() { f.alive.Add(1) }

// terminal keeps what was written.
type terminal struct {
	mu    sync.Mutex
	buf   bytes.Buffer
	sizes []int
}

func (t *terminal) Write(p []byte) (int, error) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.sizes = append(t.sizes, len(p))
	return t.buf.Write(p)
}

func (t *terminal) text() string {
	t.mu.Lock()
	defer t.mu.Unlock()
	return t.buf.String()
}

func (t *terminal) frames() (n, bytes int) {
	t.mu.Lock()
	defer t.mu.Unlock()
	for _, s := range t.sizes {
		bytes += s
	}
	return len(t.sizes), bytes
}

// console runs the root inside a synctest bubble and hands out its parts.
func console(t *testing.T, v *job.View, o Options, f func(s *fakeSession, keys io.Writer, term *terminal)) error {
	var err error
	synctest.Test(t, func(t *testing.T) {
		s := &fakeSession{}
		s.view.Store(v)
		in, keys := io.Pipe()
		term := &terminal{}
		o.Session, o.Input, o.Output = s, in, term
		ctx, cancel := context.WithCancel(t.Context())
		done := make(chan error, 1)
		go func() { done <- Run(ctx, o) }()
		time.Sleep(300 * time.Millisecond)
		f(s, keys, term)
		cancel()
		err = <-done
		keys.Close()
		time.Sleep(5 * time.Second) // whatever was left behind ends
	})
	return err
}

func TestRunShowsAndEnds(t *testing.T) {
	err := console(t, at(job.StepStop, false), Options{}, func(s *fakeSession, _ io.Writer, term *terminal) {
		text := term.text()
		for _, want := range []string{"\x1b[?1049h", "DISARMED", "Stop check"} {
			if !strings.Contains(text, want) {
				t.Errorf("the terminal did not get %q", want)
			}
		}
	})
	if err != nil {
		t.Errorf("Run: %v", err)
	}
}

func TestRunRestoresTheScreen(t *testing.T) {
	var term *terminal
	if err := console(t, at(job.StepStop, false), Options{}, func(_ *fakeSession, _ io.Writer, tm *terminal) { term = tm }); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"\x1b[?1049l", "\x1b[?25h"} {
		if !strings.Contains(term.text(), want) {
			t.Errorf("on leaving, %q was not written", want)
		}
	}
}

func TestKeysBecomeIntents(t *testing.T) {
	v := at(job.StepStop, false)
	_ = console(t, v, Options{}, func(s *fakeSession, keys io.Writer, _ *terminal) {
		for _, k := range []string{"q", "y", " ", "\x1b[A", "\r"} {
			_, _ = io.WriteString(keys, k)
			synctest.Wait()
		}
		s.mu.Lock()
		defer s.mu.Unlock()
		if len(s.posts) == 0 || s.posts[0] != (job.Quit{}) {
			t.Errorf("q and y mean %#v, want quit first", s.posts)
		}
		if len(s.stops) > 0 {
			t.Errorf("a stop came through the screen: %v", s.stops)
		}
	})
}

// TestAFastViewWins: a key that was pressed when the last drawn view was at
// rest means nothing if the newest one moves.
func TestAFastViewWins(t *testing.T) {
	rest := view(func(v *job.View) { v.Plan = stepPlan() })
	moves := view(func(v *job.View) { v.Plan = stepPlan(); v.Drive.Phase = running })
	r := &root{session: &fakeSession{}, screen: New(Look{}), view: rest}
	s := r.session.(*fakeSession)
	s.view.Store(moves)
	r.press("a", rest)
	if len(s.posts) != 1 {
		t.Fatalf("at rest the key means %v, want one arm", s.posts)
	}
	s.posts = nil
	r.keys(runes("a"))
	if len(s.posts) != 0 {
		t.Errorf("in motion the key means %v, want nothing", s.posts)
	}
}

// TestLeaseLivesWhileTheTerminalReads: on a screen where nothing changes the
// signs of life come several times a second.
func TestLeaseLivesWhileTheTerminalReads(t *testing.T) {
	_ = console(t, at(job.StepStop, false), Options{}, func(s *fakeSession, _ io.Writer, term *terminal) {
		before := s.alive.Load()
		time.Sleep(3 * time.Second)
		if n := s.alive.Load() - before; n < 9 {
			t.Errorf("%d signs of life in 3 s on a screen at rest, want 9 at least", n)
		}
	})
}

// stuckTerminal takes writes until it is told not to.
type stuckTerminal struct {
	wrote   chan struct{} // a write was taken
	stick   chan struct{} // closed: take no more
	entered chan struct{} // a write is being kept waiting
	release chan struct{}
}

func (t *stuckTerminal) Write(p []byte) (int, error) {
	select {
	case <-t.stick:
		select {
		case t.entered <- struct{}{}:
		default:
		}
		<-t.release
	default:
	}
	select {
	case t.wrote <- struct{}{}:
	default:
	}
	return len(p), nil
}

// TestStalledTerminal runs in real time, because the library waits for a lock
// while the terminal does not read. Nothing is asserted about how long it took.
func TestStalledTerminal(t *testing.T) {
	s := &fakeSession{}
	s.view.Store(at(job.StepStop, false))
	term := &stuckTerminal{make(chan struct{}, 1), make(chan struct{}), make(chan struct{}, 1), make(chan struct{})}
	in, keys := io.Pipe()
	defer keys.Close()
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan error, 1)
	go func() {
		done <- Run(ctx, Options{Session: s, Input: in, Output: term})
	}()
	for s.alive.Load() < 2 {
		select {
		case <-term.wrote:
		case <-time.After(20 * time.Second):
			t.Fatal("no second sign of life from a terminal that reads")
		}
	}
	close(term.stick)
	<-term.entered
	before := s.alive.Load()
	cancel()
	if err := <-done; !errors.Is(err, ErrStalled) {
		t.Errorf("Run on a stalled terminal: %v, want ErrStalled", err)
	}
	if n := s.alive.Load() - before; n != 0 {
		t.Errorf("%d signs of life from a terminal that does not read", n)
	}
	close(term.release)
}

// TestOnlyFramesAreSignsOfLife: the sequences that set a terminal up are no
// frames, and neither is a write that failed.
func TestOnlyFramesAreSignsOfLife(t *testing.T) {
	for _, tt := range []struct {
		name string
		to   io.Writer
		text string
		want int
	}{
		{"frame", io.Discard, "\x1b[HDISARMED", 1},
		{"hide cursor", io.Discard, "\x1b[?25l", 0},
		{"home alone", io.Discard, "\x1b[H", 0},
		{"failed", failing{}, "\x1b[HDISARMED", 0},
	} {
		n := 0
		o := &output{w: tt.to, alive: func() { n++ }, now: time.Now}
		_, _ = io.WriteString(o, tt.text)
		if n != tt.want {
			t.Errorf("%s: %d signs of life, want %d", tt.name, n, tt.want)
		}
	}
}

type failing struct{}

func (failing) Write([]byte) (int, error) { return 0, errors.New("gone") }

// moving changes the view n times a second, as a run does.
func moving(s *fakeSession, d time.Duration) {
	base := view(func(v *job.View) { v.Live = runningLive(2); v.Drive.Phase, v.Drive.Moving = running, true })
	const step = 10 * time.Millisecond
	for t := time.Duration(0); t < d; t += step {
		v := *base
		v.Now += t
		v.Link.Frames += uint64(t / step)
		v.Drive.Speed += 1 + 50*rate(t)
		s.view.Store(&v)
		time.Sleep(step)
	}
}

// TestThirtyFrames: with something new all the time, thirty frames a second are
// written, counted over two seconds of the bubble's own clock.
func TestThirtyFrames(t *testing.T) {
	_ = console(t, at(job.StepStop, false), Options{}, func(s *fakeSession, _ io.Writer, term *terminal) {
		before := s.alive.Load()
		moving(s, 2*time.Second)
		if n := s.alive.Load() - before; n < 57 || n > 61 {
			t.Errorf("%d frames in 2 s, want 60", n)
		}
	})
}

// TestBytesFollowWhatChanged: a frame in which only the top rows change costs
// a small part of a whole one.
func TestBytesFollowWhatChanged(t *testing.T) {
	_ = console(t, at(job.StepStop, false), Options{}, func(s *fakeSession, _ io.Writer, term *terminal) {
		moving(s, time.Second)
		n0, b0 := term.frames()
		moving(s, 2*time.Second)
		n1, b1 := term.frames()
		whole := len(New(Look{}).Draw(s.View(), 80, 24))
		if per := (b1 - b0) / (n1 - n0); per > whole/4 {
			t.Errorf("%d bytes a frame where a whole one has %d", per, whole)
		}
	})
}

// TestBoundOnBytes: on a slow line frames are left out, and the screen lives on.
func TestBoundOnBytes(t *testing.T) {
	_ = console(t, at(job.StepStop, false), Options{BytesPerSecond: 2000}, func(s *fakeSession, _ io.Writer, term *terminal) {
		moving(s, 4*time.Second) // the first whole frame is paid off
		_, b0 := term.frames()
		a0 := s.alive.Load()
		moving(s, 5*time.Second)
		_, b1 := term.frames()
		if per := (b1 - b0) / 5; per > 2200 {
			t.Errorf("%d bytes a second, want 2000 at most", per)
		}
		if n := s.alive.Load() - a0; n < 5 {
			t.Errorf("%d frames in 5 s: the screen does not live", n)
		}
	})
}

// TestSlowTerminal: where a write takes long, no frame is drawn for as long
// again, so that no queue of frames builds up in front of the newest.
func TestSlowTerminal(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r := &root{out: &output{}}
		if !r.afford() {
			t.Fatal("no frame although no write was slow")
		}
		r.out.took.Store(int64(100 * time.Millisecond))
		for _, wait := range []time.Duration{0, 50 * time.Millisecond, 49 * time.Millisecond} {
			time.Sleep(wait)
			if r.afford() {
				t.Error("a frame while the terminal still needs its time")
			}
		}
		time.Sleep(2 * time.Millisecond)
		if !r.afford() {
			t.Error("no frame although the terminal had its time")
		}
	})
}

func TestBellInTheCountDown(t *testing.T) {
	_ = console(t, at(job.StepStop, false), Options{}, func(s *fakeSession, _ io.Writer, term *terminal) {
		if strings.Contains(term.text(), "\a") {
			t.Error("a bell without a count-down")
		}
		for left := 3 * time.Second; left > 0; left -= 100 * time.Millisecond {
			s.view.Store(view(func(v *job.View) {
				v.Plan = stepPlan()
				v.Drive.Phase, v.Drive.CountLeft = countDown, left
			}))
			time.Sleep(100 * time.Millisecond)
		}
		if n := strings.Count(term.text(), "\a"); n != 3 {
			t.Errorf("%d bells in a count-down of 3 s, want 3", n)
		}
	})
}

// TestAFaultStopsFirst: a fault of the screens asks for a stop before anything
// else happens.
func TestAFaultStopsFirst(t *testing.T) {
	s := &fakeSession{}
	r := &root{session: s, screen: New(Look{}), w: 80, h: 24, dirty: true, view: at(job.StepStop, false)}
	func() {
		defer func() {
			if recover() == nil {
				t.Error("the fault was swallowed")
			}
		}()
		defer r.fault()
		panic("a fault")
	}()
	if len(s.stops) != 1 {
		t.Errorf("stops: %v, want one", s.stops)
	}
}

func TestResizeAtAnyMoment(t *testing.T) {
	var w, h atomic.Int64
	w.Store(80)
	h.Store(24)
	size := func() (int, int) { return int(w.Load()), int(h.Load()) }
	err := console(t, at(job.StepStop, false), Options{Size: size}, func(s *fakeSession, _ io.Writer, term *terminal) {
		for _, d := range [][2]int64{{1, 1}, {200, 50}, {0, 0}, {40, 10}, {80, 24}} {
			w.Store(d[0])
			h.Store(d[1])
			time.Sleep(500 * time.Millisecond)
		}
		if !strings.Contains(term.text(), "smaller than 80x24") {
			t.Error("the small window was never drawn")
		}
	})
	if err != nil {
		t.Errorf("Run: %v", err)
	}
}

// rate is the share of a second that t is into its second.
func rate(t time.Duration) si.RadPerSec { return si.RadPerSec((t % time.Second).Seconds()) }

func runes(s string) tea.Key { return tea.Key{Type: tea.KeyRunes, Runes: []rune(s)} }
