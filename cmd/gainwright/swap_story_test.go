package main

import (
	"math"
	"path/filepath"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety/rig"
	"gainwright/tune/bench"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// pressFeeder is the rig of the swap: its motor before, and the one that comes in its
// place, with an encoder of 1024 lines for one of 500 and a winding of its own.
func pressFeeder(t *testing.T) (before, after simrig.Config) {
	t.Helper()
	for name, to := range map[string]*simrig.Config{"before": &before, "after": &after} {
		cfg, err := simrig.Load("../../testdata/walks/press-feeder-" + name + ".toml")
		if err != nil {
			t.Fatal(err)
		}
		*to = cfg
	}
	return before, after
}

func rigFileOf(t *testing.T, cfg simrig.Config) (rig.Rig, []byte) {
	t.Helper()
	r, text, err := bench.RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	return r, text
}

// goTo begins a step from the path by keys.
func (p *person) goTo(id job.StepID) {
	p.t.Helper()
	p.press("1")
	v := p.live.View()
	want := -1
	for i, s := range v.Steps {
		if s.ID == id {
			want = i
		}
	}
	for range 2 * len(v.Steps) {
		p.press("k")
	}
	for range want {
		p.press("j")
	}
	p.press("enter")
	p.until("the step "+string(id), func(v *job.View) bool { return v.Current == id && v.Doing })
}

// answers waits for a question and types an answer to it.
func (p *person) answers(text string) {
	p.t.Helper()
	id := 0
	p.until("a question", func(v *job.View) bool {
		if v.Ask != nil {
			id = v.Ask.ID
		}
		return v.Ask != nil
	})
	switch p.live.View().Ask.Kind {
	case job.AskChoice, job.AskYesNo:
		p.press(text)
	default:
		for range len(p.live.View().Ask.Default) {
			if text != "" {
				p.press("backspace")
			}
		}
		for _, c := range text {
			p.press(string(c))
		}
		p.press("enter")
	}
	p.until("the next question", func(v *job.View) bool { return v.Ask == nil || v.Ask.ID != id })
}

// The walk after a part swap, from cable to card by keys: the board against how it
// was left, the parts and what their difference will do before anything moves,
// lockout and test run answered one by one, checks, the new motor against the old
// one, and what is offered.
func TestPartSwapByKeys(t *testing.T) {
	before, after := pressFeeder(t)
	records := t.TempDir()
	d := bench.DryRun{Config: before, Seed: 1, Dir: filepath.Join(records, "2025-press-feeder-0187"), Program: "gainwright test", Start: time.Date(2025, 11, 12, 9, 0, 0, 0, time.UTC)}
	if rep, err := d.Do(); err != nil || rep.Outcome != bench.Accepted {
		t.Fatalf("the earlier job: %v, %s", err, rep.Reason)
	}
	old := newestOf(records, "press-feeder", before.Board.ID, true)
	if old == nil {
		t.Fatal("the earlier record is not found")
	}
	var left sheet.Snapshot
	if err := old.LastJSON(sheet.KindAsLeft, "", &left); err != nil {
		t.Fatal(err)
	}
	synctest.Test(t, func(t *testing.T) {
		r, text := rigFileOf(t, after)
		p := sitAt(t, after, r, text, func(o *bench.Options) {
			o.Job.Earlier = func(rig, board string) *sheet.Reader { return newestOf(records, rig, board, true) }
		})
		defer p.leave()
		p.step(job.StepPort)
		p.done(job.StepIdentity)
		p.press("x")
		if s := p.see(); !strings.Contains(s, "4096") || !strings.Contains(s, "0187") {
			t.Errorf("the differences are not on screen:\n%s", s)
		}
		p.goTo(job.StepSwap)
		p.answers("1")      // motor
		p.answers("DM-52")  // type, old
		p.answers("DM-52E") // type, new
		p.answers("88412")  // serial, old
		p.answers("91007")  // serial, new
		p.answers("2000")   // counts, old
		p.answers("4096")   // counts, new
		p.answers("")       // gear, old
		p.answers("")       // gear, new
		p.until("lockout", func(v *job.View) bool {
			return v.Ask != nil && (v.Ask.Kind == job.AskYesNo || v.Ask.Text == "Your initials" || v.Ask.Kind == job.AskNumber)
		})
		for p.live.View().Ask != nil && p.live.View().Ask.Kind == job.AskNumber { // Ke and R, where the rig file has them
			p.answers("")
		}
		if v := p.live.View(); v.Drive.Phase != "DISARMED" || v.Ask == nil {
			t.Fatalf("%s:\n%s", v.Drive.Phase, p.see())
		}
		p.answers("KM")
		p.press("x")
		see := strings.Join(p.live.View().Earlier.Lines, "\n")
		for _, want := range []string{"speed reads                  2.048 x", "48.83 % of the setpoint", "phase margin before", "phase margin after"} {
			if !strings.Contains(see, want) {
				t.Errorf("%q is not said before anything moves:\n%s", want, see)
			}
		}
		for range 8 {
			p.answers("y")
		}
		p.done(job.StepSwap)
		p.step(job.StepCount)
		p.answers("21.5")
		p.answers("feeder, belt off")
		p.answerHand()
		p.done(job.StepCount)
		p.upToFrom(job.StepSign, job.StepPush)
		p.press("x")
		if see := strings.Join(p.live.View().Earlier.Lines, "\n"); !strings.Contains(see, "exact scaling is enough") || !strings.Contains(see, "exact scaling: phase margin") || !strings.Contains(see, "retune:        phase margin") {
			t.Errorf("the two offers with the margins of both:\n%s", see)
		}
		p.press("u")
		p.until("the old gains in hand", func(v *job.View) bool {
			return strings.Contains(strings.Join(v.Earlier.Lines, "\n"), "in hand")
		})
		p.press("b")
		p.upToFrom(job.StepPush, "")
		if v := p.live.View(); v.Verify == nil || !v.Verify.Passed {
			t.Errorf("verify:\n%s", p.see())
		}
		if n := len(p.live.View().Verify.Earlier); n < 50 {
			t.Errorf("last time's verify is not drawn over this one: %d points", n)
		}
		p.press("0")
		if s := p.see(); !strings.Contains(s, "thin: last time") {
			t.Errorf("the verify page:\n%s", s)
		}
		p.press("x")
		see = strings.Join(p.live.View().Earlier.Lines, "\n")
		for _, want := range []string{"counts per turn   1           2000      4096      +104.8%  equal        MISMATCH", "Ke ", "R at 25", "The gains left then, on this motor", "offer 1"} {
			if !strings.Contains(see, want) {
				t.Errorf("%q is not in the comparison:\n%s", want, see)
			}
		}
		t.Logf("%d keys\n%s", p.keys, see)
		dir := p.leave()
		rd, problems := sheet.Open(dir)
		if len(problems) > 0 {
			t.Fatal(problems)
		}
		var part sheet.PartRecord
		if err := rd.LastJSON(sheet.KindPart, "", &part); err != nil || len(part.Answers) != 8 || part.Answers[7].Initials != "KM" || part.New["serial"] != "91007" {
			t.Errorf("%v, %+v", err, part)
		}
		var is sheet.Snapshot
		if err := rd.LastJSON(sheet.KindAsLeft, "", &is); err != nil || string(is.Running) == "" {
			t.Fatal(err)
		}
		for _, d := range sheet.Differences(left, is) {
			if strings.HasPrefix(d.What, "running") || strings.HasPrefix(d.What, "stored") {
				t.Errorf("scaling is not exact: %+v", d)
			}
		}
		var run sheet.RunRecord
		if err := rd.LastJSON(sheet.KindRun, "verify", &run); err != nil || run.AmbientDegC == nil || *run.AmbientDegC != 21.5 || run.LoadState != "feeder, belt off" || is.AmbientDegC == nil {
			t.Errorf("ambient and load state of a run: %v, %+v", err, run)
		}
		if again, err := job.Recompute(rd); err != nil || !again.Identical {
			t.Errorf("computed again: %v, %v", err, again.Differences)
		}
		margins := map[string]float64{}
		for _, q := range part.Predicted {
			if q.Value != nil {
				margins[q.Name] = *q.Value
			}
		}
		if !(margins["phase margin after"] < margins["phase margin before"]-3) || math.Abs(margins["loop gain"]-2.048) > 1e-3 {
			t.Errorf("predicted: %v", margins)
		}
		if rows, err := sheet.CompareDirs(old.Dir(), dir); err != nil || rows[0].Verdict != sheet.Mismatch {
			t.Errorf("%v, %+v", err, rows)
		}
	})
}
