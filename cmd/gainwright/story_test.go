package main

import (
	"fmt"
	"path/filepath"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tui"
	"gainwright/tune/bench"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// person works the console by keys alone, as somebody who reads the screen: the
// whole program but for terminal and port, under a virtual clock.
type person struct {
	t      *testing.T
	live   *bench.Live
	screen tui.Screen
	sim    *bench.Served
	keys   int
	left   bool
}

// newPerson sits down at a rig. It is called inside a bubble.
func newPerson(t *testing.T, cfg simrig.Config) *person {
	t.Helper()
	return sitDown(t, cfg, true)
}

// sitDown is newPerson with or without a rig file.
func sitDown(t *testing.T, cfg simrig.Config, withRig bool) *person {
	t.Helper()
	r, text, err := bench.RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	if !withRig {
		text = nil
	}
	return sitAt(t, cfg, r, text)
}

// sitAt sits down at a rig with a rig file; without text the console asks for it.
func sitAt(t *testing.T, cfg simrig.Config, r rig.Rig, text []byte, also ...func(*bench.Options)) *person {
	t.Helper()
	return sitBent(t, &cfg, r, text, also...)
}

// sitBent is sitAt at a rig that options may bend before it is there.
func sitBent(t *testing.T, cfg *simrig.Config, r rig.Rig, text []byte, also ...func(*bench.Options)) *person {
	t.Helper()
	p := &person{t: t, screen: tui.New(tui.Look{})}
	dir := t.TempDir() + "/sheet"
	o := bench.Options{Simulated: true, Program: "gainwright test", Hand: func() { p.sim.Hand() }, Cycle: func() { p.sim.Cycle() }, Work: func(set []job.InputBit) { p.sim.Work(set) },
		Ports: func() []job.PortView { return []job.PortView{{Path: "memory", Name: cfg.Name}} },
		Open: func(string) (bench.Opened, error) {
			return bench.Opened{Port: p.sim.Port(), Baud: cfg.Board.Baud}, nil
		},
		NewSheet: func(board string, r rig.Rig) (*sheet.Sheet, error) {
			return sheet.Create(dir, sheet.Header{Rig: r.Name, BoardID: board, Program: "gainwright test", Start: "2026-01-02T08:00:00Z", Simulated: true})
		},
		OnPanic: func(v any, stack []byte) { t.Errorf("panic: %v\n%s", v, stack) },
	}
	if text != nil {
		o.Job.Rig, o.Job.RigText = r, text
	}
	for _, f := range also {
		f(&o)
	}
	p.sim = bench.ServePipe(simrig.New(*cfg, 1))
	p.live = bench.NewLive(o)
	p.wait(500 * time.Millisecond)
	return p
}

// leave ends the session and the rig and returns the record's folder.
func (p *person) leave() string {
	if p.left {
		return ""
	}
	p.left = true
	dir, err := p.live.Close()
	if err != nil {
		p.t.Errorf("the record: %v", err)
	}
	p.sim.Close()
	return dir
}

// wait lets time pass; frames reach the screen meanwhile.
func (p *person) wait(d time.Duration) {
	for end := time.Now().Add(d); time.Now().Before(end); {
		time.Sleep(30 * time.Millisecond)
		p.live.Alive()
	}
}

// until waits for something on screen, a minute at most.
func (p *person) until(what string, ok func(v *job.View) bool) {
	p.t.Helper()
	for range 4000 {
		if ok(p.live.View()) {
			return
		}
		p.wait(30 * time.Millisecond)
	}
	p.t.Fatalf("waited two minutes for %s:\n%s", what, p.see())
}

func (p *person) see() string { return p.screen.Draw(p.live.View(), 80, 24) }

// press presses a key: the tap sees it first, then the screens.
func (p *person) press(key string) {
	p.keys++
	if key == " " {
		p.live.Stop(safety.ByStopKey)
	} else {
		p.live.Key(key == "m")
	}
	var in []job.Intent
	p.screen, in = p.screen.Update(key, p.live.View())
	for _, i := range in {
		p.live.Post(i)
	}
	p.wait(100 * time.Millisecond)
}

func phase(word string) func(*job.View) bool {
	return func(v *job.View) bool { return v.Drive.Phase == word }
}

// step does the step that is offered, arming where a plan is shown.
func (p *person) step(id job.StepID) {
	p.t.Helper()
	p.until("the offer of "+string(id), func(v *job.View) bool { return v.Current == id && !v.Doing })
	// A key does nothing while the shaft still coasts from the run before.
	for range 50 {
		p.press("enter")
		v := p.live.View()
		if v.Doing || v.Current != id {
			return
		}
		for _, s := range v.Steps {
			if s.ID == id && s.Status == job.Done {
				return
			}
		}
		p.wait(200 * time.Millisecond)
	}
	p.t.Fatalf("enter does not begin %s:\n%s", id, p.see())
}

func (p *person) runs() {
	p.t.Helper()
	for ticking := true; ticking; {
		p.until("a plan, or a line to tick", func(v *job.View) bool {
			ticking = v.Ask != nil && v.Ask.Kind == job.AskYesNo
			return ticking || v.Plan != nil && v.Drive.Phase == "DISARMED"
		})
		if ticking {
			p.press("y")
		}
	}
	for range 20 { // a stop a moment ago, or a shaft still turning, holds the arm off
		p.press("a")
		if ph := p.live.View().Drive.Phase; ph == "ARMED" || ph == "ARMING" {
			break
		}
		p.wait(200 * time.Millisecond)
	}
	p.until("armed", phase("ARMED"))
	p.wait(safety.ClearWait)
	p.press("y")
	p.press("g")
	p.until("running", phase("RUNNING"))
}

// runsAll arms and starts every run of a step: some make more than one.
func (p *person) runsAll(id job.StepID) {
	p.t.Helper()
	for range 8 {
		p.runs()
		over := false
		p.until("the next plan or the end of "+string(id), func(v *job.View) bool {
			for _, s := range v.Steps {
				over = over || s.ID == id && s.Status != job.Doing
			}
			return over || v.Plan != nil && v.Drive.Phase == "DISARMED"
		})
		if over {
			return
		}
	}
}

// again presses a key until it has done what it is for: none does anything while
// the shaft still turns.
func (p *person) again(key string, ok func(*job.View) bool) {
	p.t.Helper()
	for range 50 {
		p.press(key)
		if ok(p.live.View()) {
			return
		}
		p.wait(200 * time.Millisecond)
	}
	p.t.Fatalf("%q does nothing:\n%s", key, p.see())
}

func (p *person) done(id job.StepID) {
	p.t.Helper()
	p.until(string(id)+" done", func(v *job.View) bool {
		for _, s := range v.Steps {
			if s.ID == id {
				if s.Status == job.Refused {
					p.t.Fatalf("%s refused: %s\n%s", id, s.Reason, p.see())
				}
				return s.Status == job.Done
			}
		}
		return false
	})
}

// turnedByHand answers the questions on ambient and load before that about the shaft.
func (p *person) turnedByHand() {
	p.t.Helper()
	for _, kind := range []job.QuestionKind{job.AskNumber, job.AskText} {
		p.until("the question before the hand, or its own", func(v *job.View) bool { return asked(kind)(v) || asked(job.AskHandTurn)(v) })
		if asked(kind)(p.live.View()) {
			p.answers("")
		}
	}
	p.until("the question about the shaft", asked(job.AskHandTurn))
}

func (p *person) answerHand() {
	p.turnedByHand()
	p.press("t")
	p.wait(3 * time.Second)
	p.press("enter")
	p.until("the question about the stop key", func(v *job.View) bool { return v.Ask != nil && v.Ask.Kind == job.AskStopKey })
	p.press(" ")
}

// limitTrip has the provoked trip of the limit check, and clears it.
func (p *person) limitTrip() {
	p.t.Helper()
	p.runs()
	p.until("the trip", phase("TRIPPED"))
	p.again("e", func(v *job.View) bool { return v.Drive.Acked })
	p.again("z", phase("DISARMED"))
}

// upTo goes down the path to before the given step.
func (p *person) upTo(last job.StepID) { p.t.Helper(); p.upToFrom(job.Path[0].ID, last) }

// upToFrom goes down the path from one step to before another.
func (p *person) upToFrom(first, last job.StepID) {
	p.t.Helper()
	begun := false
	for _, s := range job.Path {
		if begun = begun || s.ID == first; !begun {
			continue
		}
		if s.ID == last {
			return
		}
		if s.Optional || s.ID == job.StepInterlocks {
			continue // nobody asks for it, or the demo has no inputs
		}
		if s.ID != job.StepIdentity { // comes with the port
			p.step(s.ID)
		}
		switch s.ID {
		case job.StepCount:
			p.answerHand()
		case job.StepStop:
			p.runs()
			p.wait(time.Second)
			p.press(" ")
		case job.StepLimits:
			p.limitTrip()
		case job.StepSign, job.StepSilence, job.StepBreakaway, job.StepStaircase, job.StepStep, job.StepSecond, job.StepFound, job.StepFirstLoop, job.StepVerify:
			p.runsAll(s.ID)
		case job.StepPush:
			p.until("the word to type", func(v *job.View) bool { return v.Ask != nil && v.Ask.Kind == job.AskWord })
			for _, c := range p.live.View().Ask.Want {
				p.press(string(c))
			}
			p.press("enter")
		case job.StepStore:
			p.until("the question about the power", func(v *job.View) bool { return v.Ask != nil && v.Ask.Kind == job.AskPower })
			p.press("o")
		}
		p.done(s.ID)
	}
}

// demoRig is the rig of the demo.
func demoRig(t *testing.T) simrig.Config {
	cfg, err := demoConfig("")
	if err != nil {
		t.Fatal(err)
	}
	return cfg
}

func TestConsoleFromCableToCard(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		began := time.Now()
		p.upTo("")
		took := time.Since(began)
		v := p.live.View()
		if !strings.Contains(v.Card, "SPEED LOOP CARD") || v.Verify == nil || !v.Verify.Passed {
			t.Errorf("no card, or verify not passed:\n%s", p.see())
		}
		if !strings.Contains(p.see(), "SPEED LOOP CARD") {
			t.Errorf("the card is not on screen at the end:\n%s", p.see())
		}
		// Under five minutes for somebody who reads the screen.
		if took > 5*time.Minute {
			t.Errorf("the job took %v", took)
		}
		t.Logf("%d keys, %v of console time", p.keys, took)
		p.sim.Rig(func(r *simrig.Rig) {
			if e := r.Extremes(); len(e.Violations) > 0 {
				t.Errorf("out of the nameplate's envelope: %+v", e.Violations)
			}
		})
		dir := p.leave()
		if problems, sum := sheet.Check(dir); len(problems) > 0 {
			t.Errorf("the record: %v (%+v)", problems, sum)
		}
	})
}

// In motion every key but the listed ones stops, and the shaft is at rest soon
// after; the job offers the step again.
func TestEveryKeyStopsInMotion(t *testing.T) {
	for _, key := range []string{" ", "x", "enter", "q", "1", "up"} {
		t.Run(fmt.Sprintf("%q", key), func(t *testing.T) {
			synctest.Test(t, func(t *testing.T) {
				p := newPerson(t, demoRig(t))
				defer p.leave()
				p.upTo(job.StepStop)
				p.step(job.StepStop)
				p.runs()
				p.wait(800 * time.Millisecond)
				p.press(key)
				var powered bool
				p.sim.Rig(func(r *simrig.Rig) { powered = r.Powered() })
				if powered {
					t.Errorf("100 ms after the key the board still drives")
				}
				p.until("disarmed", phase("DISARMED"))
			})
		})
	}
}

func TestMarkDoesNotStop(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.upTo(job.StepStop)
		p.step(job.StepStop)
		p.runs()
		p.wait(500 * time.Millisecond)
		p.press("m")
		if v := p.live.View(); v.Drive.Phase != "RUNNING" || len(v.Live.Marks) != 1 {
			t.Errorf("phase %s, marks %v", v.Drive.Phase, v.Live.Marks)
		}
		p.press(" ")
	})
}

// A screen that is no longer drawn stops the motor by its lease.
func TestFrozenScreenStops(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.upTo(job.StepStop)
		p.step(job.StepStop)
		p.runs()
		p.wait(500 * time.Millisecond)
		time.Sleep(1500 * time.Millisecond) // no frame reaches the terminal
		v := p.live.View()
		if v.Drive.Phase != "TRIPPED" || !strings.Contains(v.Drive.Trip, "screen is frozen") {
			t.Errorf("phase %s, trip %q", v.Drive.Phase, v.Drive.Trip)
		}
		p.sim.Rig(func(r *simrig.Rig) {
			if r.Powered() {
				t.Error("the board still drives")
			}
		})
	})
}

// The supply dips while the shaft turns: the board restarts, the console says
// so, is disarmed, and nothing is resumed.
func TestBoardRestartEndsDisarmed(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.upTo(job.StepStop)
		p.step(job.StepStop)
		p.runs()
		p.wait(500 * time.Millisecond)
		p.sim.Rig(func(r *simrig.Rig) { r.Restart("brownout") })
		p.wait(time.Second)
		v := p.live.View()
		if v.Drive.Phase != "TRIPPED" {
			t.Errorf("phase %s", v.Drive.Phase)
		}
		said := false
		for _, l := range v.Log {
			said = said || strings.Contains(l.Text, "the board restarted")
		}
		if !said {
			t.Error("the restart was not said")
		}
		p.wait(3 * time.Second)
		p.sim.Rig(func(r *simrig.Rig) {
			if r.Powered() || r.Speed() != 0 {
				t.Error("the shaft turns")
			}
		})
	})
}

// Nothing that moves goes out in the first two seconds after a port is opened.
func TestOpeningIsReadOnly(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.press("enter")
		p.wait(2 * time.Second)
		p.sim.Rig(func(r *simrig.Rig) {
			if e := r.Extremes(); e.PoweredS != 0 || e.Speed != 0 {
				t.Errorf("powered %v s, speed %v", e.PoweredS, e.Speed)
			}
		})
		if got := p.live.View().Found; got == nil {
			t.Error("no as-found")
		}
	})
}

// Without a rig file the console asks for the nameplate, offers what the board
// says of itself, and keeps the answers as a rig file.
func TestConsoleAsksForTheNameplate(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := sitDown(t, demoRig(t), false)
		defer p.leave()
		p.press("enter")
		typed := map[string]string{"rpm": "3000", "A": "8"}
		for n := 0; ; n++ {
			p.until("a question or the end of them", func(v *job.View) bool { return v.Ask != nil || v.Found != nil })
			q := p.live.View().Ask
			if q == nil {
				if n != 9 {
					t.Errorf("%d questions, want 9", n)
				}
				break
			}
			if q.Default == "" {
				for _, c := range typed[q.Unit] {
					p.press(string(c))
				}
			}
			p.press("enter")
			p.until("the next question", func(v *job.View) bool { return v.Ask == nil || v.Ask.ID != q.ID })
		}
		p.done(job.StepIdentity)
		files, _ := filepath.Glob(filepath.Join(p.live.View().Sheet, "*-rig-*.toml"))
		if len(files) != 1 {
			t.Fatalf("rig files in the record: %v", files)
		}
		r, _, err := readRig(files[0])
		if err != nil || r.Motor.SpeedMax != 3000 || r.Motor.CurrentMax != 8 || r.Encoder.CountsPerTurn != 2000 {
			t.Errorf("%+v, %v", r, err)
		}
	})
}

// A plan is made smaller by key before the arm, its forecast follows at once, sizes
// end where the envelope or their range does, and the record holds what was run.
func TestAPlanIsResizedByKey(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.upTo(job.StepStep)
		p.step(job.StepStep)
		p.until("a plan", func(v *job.View) bool { return v.Plan != nil && v.Plan.Resize })
		top := func() float64 {
			m := 0.0
			for _, x := range p.live.View().Plan.Drive {
				m = max(m, x.V)
			}
			return m
		}
		was, length := top(), p.live.View().Live.Length
		for range 3 {
			p.press("j")
			p.wait(100 * time.Millisecond)
		}
		v := p.live.View()
		if v.Plan.Size != 0.7 || top() >= was || !strings.Contains(p.see(), "size 70 %") || v.Live.Length == 0 || length == 0 {
			t.Fatalf("size %v, top %v of %v:\n%s", v.Plan.Size, top(), was, p.see())
		}
		for range 9 {
			p.press("j")
			p.wait(100 * time.Millisecond)
		}
		if v := p.live.View(); v.Plan.Size != 0.3 || v.Refusal == nil || v.Refusal.Number != 728 {
			t.Errorf("at the end: size %v, %+v", v.Plan.Size, v.Refusal)
		}
		for range 4 {
			p.press("k")
			p.wait(100 * time.Millisecond)
		}
		p.runsAll(job.StepStep)
		p.done(job.StepStep)
		if v := p.live.View(); !strings.Contains(resultOf(v, job.StepStep), "±") {
			t.Errorf("result %q", resultOf(v, job.StepStep))
		}
		p.press("j") // nothing waits: a row down, not a size
		p.upToFrom(job.StepSecond, job.StepDesign)
		p.step(job.StepDesign)
		p.done(job.StepDesign)
	})
}

func resultOf(v *job.View, id job.StepID) string {
	for _, s := range v.Steps {
		if s.ID == id {
			return s.Result
		}
	}
	return ""
}
