package bench

import (
	"errors"
	"strings"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/simrig"
	"gainwright/protocol"
	"gainwright/tune/job"
)

// otherRate is a port at a rate that is not the board's: what passes is noise.
type otherRate struct{ link.Port }

func (o otherRate) Read(b []byte) (int, error) {
	n, err := o.Port.Read(b)
	for i := range b[:n] {
		b[i] = b[i]*7 | 0x80
	}
	return n, err
}

func (o otherRate) Write(b []byte) (int, error) { return len(b), nil }

// listened notes what goes out.
type listened struct {
	link.Port
	mu  sync.Mutex
	out strings.Builder
}

func (l *listened) Write(b []byte) (int, error) {
	l.mu.Lock()
	l.out.Write(b)
	l.mu.Unlock()
	return l.Port.Write(b)
}

func findRig(t *testing.T, id string) simrig.Config {
	cfg := trialRig(t)
	cfg.Board.ID = id
	return cfg
}

func trialRig(t *testing.T) simrig.Config {
	t.Helper()
	cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	return cfg
}

func waitFor(t *testing.T, l *Live, what string, ok func(*job.View) bool) {
	t.Helper()
	for range 1200 {
		if ok(l.View()) {
			return
		}
		time.Sleep(50 * time.Millisecond)
		l.Alive()
	}
	v := l.View()
	t.Fatalf("waited a minute for %s: link %v %v, refusal %+v, log %v", what, v.Link.State, v.Link.Why, v.Refusal, v.Log)
}

func logged(v *job.View, words string) bool {
	for _, l := range v.Log {
		if strings.Contains(l.Text, words) {
			return true
		}
	}
	return false
}

// A board at another line rate is found by trying the usual ones, and then works
// as if its rate had been given; nothing but its identity is asked for meanwhile.
func TestTheLineRateIsFound(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		cfg := findRig(t, "7A31-22")
		cfg.Board.Baud = 38400
		r, text, err := RigOf(cfg)
		if err != nil {
			t.Fatal(err)
		}
		sim := newSocket(cfg, 1)
		var rates []int
		heard := &listened{}
		at := func(_ string, baud int) (Opened, error) {
			rates = append(rates, baud)
			if baud != cfg.Board.Baud {
				return Opened{Port: otherRate{sim.open()}, Baud: baud}, nil
			}
			heard.Port = sim.open()
			return Opened{Port: heard, Baud: baud}, nil
		}
		o := Options{Open: func(p string) (Opened, error) { return at(p, 115200) }, OpenAt: at, Simulated: true}
		o.Job.Rig, o.Job.RigText = r, text
		l := NewLive(o)
		defer sim.Close()
		defer l.Close()
		l.Connect("memory")
		waitFor(t, l, "the identity", func(v *job.View) bool { return v.Found != nil && v.Link.State == job.Fresh })
		if got := rates[len(rates)-1]; got != 38400 || !logged(l.View(), "a board answers at 38400 bit/s") {
			t.Errorf("tried %v; log %v", rates, l.View().Log)
		}
		heard.mu.Lock()
		defer heard.mu.Unlock()
		if s := heard.out.String(); strings.Contains(s, " "+protocol.VerbArm) || strings.Contains(s, "arm ") {
			t.Errorf("sent: %q", s)
		}
		if v := l.View(); v.Drive.Phase != "DISARMED" {
			t.Errorf("it is %s", v.Drive.Phase)
		}
	})
}

// A board that went and came back under another name is found by its id, another
// board that came first is passed over, and what was there before is not opened.
func TestABoardIsFoundByItsID(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		cfg, other := findRig(t, "7A31-22"), findRig(t, "0000-99")
		r, text, err := RigOf(cfg)
		if err != nil {
			t.Fatal(err)
		}
		mine, theirs := newSocket(cfg, 1), newSocket(other, 2)
		var mu sync.Mutex
		present := map[string]*socket{"usb0": mine, "printer": theirs}
		opened := map[string]int{}
		set := func(f func()) { mu.Lock(); f(); mu.Unlock() }
		o := Options{Simulated: true,
			Ports: func() (ports []job.PortView) {
				set(func() {
					for p := range present {
						ports = append(ports, job.PortView{Path: p})
					}
				})
				return ports
			},
			Open: func(path string) (Opened, error) {
				mu.Lock()
				defer mu.Unlock()
				opened[path]++
				s := present[path]
				if s == nil {
					return Opened{}, errors.New("no such port")
				}
				return Opened{Port: s.open(), Baud: 115200}, nil
			}}
		o.Job.Rig, o.Job.RigText = r, text
		l := NewLive(o)
		defer mine.Close()
		defer theirs.Close()
		defer l.Close()
		l.Connect("usb0")
		waitFor(t, l, "the identity", func(v *job.View) bool { return v.Found != nil && v.Link.State == job.Fresh })

		waitFor(t, l, "the end of the step", func(v *job.View) bool { return !v.Doing && v.Current != job.StepIdentity })

		// The plug is pulled; another board comes first, then this one elsewhere.
		set(func() { delete(present, "usb0"); present["usb1"] = theirs })
		mine.pull()
		waitFor(t, l, "LINK LOST", func(v *job.View) bool { return v.Link.State == job.LinkLost })
		if v := l.View(); v.Refusal == nil || v.Refusal.What != "LINK LOST" || !strings.Contains(v.Refusal.Remedy, "by its id") {
			t.Errorf("the screen says %+v", v.Refusal)
		}
		waitFor(t, l, "the word on the other board", func(v *job.View) bool { return logged(v, "usb1 has another board, 0000-99") })
		set(func() { present["usb2"] = mine })
		waitFor(t, l, "the board", func(v *job.View) bool { return v.Link.State == job.Fresh && v.Port == "usb2" })
		if v := l.View(); v.Drive.Phase != "DISARMED" && v.Drive.Phase != "TRIPPED" {
			t.Errorf("it is %s", v.Drive.Phase)
		}
		if opened["printer"] != 0 {
			t.Error("a port that was there all the time was opened")
		}
	})
}

// A stop that is asked for while a board is looked for goes out on the port that is
// looked at.
func TestAStopGoesOutWhileABoardIsLookedFor(t *testing.T) {
	near, far := link.Pipe()
	got := make(chan byte, 64)
	go func() {
		b := make([]byte, 64)
		for {
			n, err := far.Read(b)
			for _, c := range b[:n] {
				got <- c
			}
			if err != nil {
				close(got)
				return
			}
		}
	}()
	l := &Live{}
	l.cut() // no line is open
	if _, err := probe(near, 9, l.owesCut); err != nil {
		t.Fatal(err)
	}
	near.Close()
	cuts := 0
	for c := range got {
		if c == protocol.Cut {
			cuts++
		}
	}
	if cuts != 1 {
		t.Errorf("%d cuts went out", cuts)
	}
}
