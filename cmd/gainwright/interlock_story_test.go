package main

import (
	"os"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety/rig"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// atInterlocks sits down at the rig with an E-stop, a guard and an enabling switch.
func atInterlocks(t *testing.T) *person {
	t.Helper()
	cfg, err := simrig.Load("../../testdata/rigs/interlocked.toml")
	if err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile("../../testdata/rigs/interlocked.rig.toml")
	if err != nil {
		t.Fatal(err)
	}
	r, err := rig.Parse("interlocked.rig.toml", text)
	if err != nil {
		t.Fatal(err)
	}
	return sitAt(t, cfg, r, text)
}

func asked(kind job.QuestionKind) func(*job.View) bool {
	return func(v *job.View) bool { return v.Ask != nil && v.Ask.Kind == kind }
}

// write types a text into the field that is open.
func (p *person) write(text string) {
	p.until("a field", asked(job.AskText))
	for _, c := range text {
		p.press(string(c))
	}
	p.press("enter")
}

// works does with the input what is asked, until no more is asked.
func (p *person) works(times int) {
	p.t.Helper()
	for range times {
		id := 0
		p.until("a question about an input", func(v *job.View) bool {
			if v.Ask == nil || v.Ask.Kind != job.AskInput {
				return false
			}
			id = v.Ask.ID
			return true
		})
		for range 50 { // no key does anything while the shaft still coasts
			p.press("o")
			p.wait(600 * time.Millisecond) // inputs are reported four times a second
			if v := p.live.View(); v.Ask == nil || v.Ask.ID != id {
				break
			}
		}
	}
}

// The interlock walk by keys: every state at rest, initials, then the shaft stopped
// by each input; then one bounded inch a press, and any other key disarms.
func TestInterlocksAndInchByKeys(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := atInterlocks(t)
		defer p.leave()
		p.upTo(job.StepInterlocks)
		if v := p.live.View(); v.Drive.Enabling != "held" || !strings.Contains(p.see(), "enabling switch: held") {
			t.Errorf("the enabling switch is %q:\n%s", v.Drive.Enabling, p.see())
		}
		p.interlockWalk()
		p.press("i")
		if see := p.see(); !strings.Contains(see, "passed") || !strings.Contains(see, "by the board") {
			t.Errorf("the interlocks page:\n%s", see)
		}
		p.press("b")
		p.step(job.StepLimits) // the rig file asks for it
		p.limitTrip()
		p.done(job.StepLimits)
		p.inches()

		r, problems := sheet.Open(p.leave())
		n := 0
		for _, l := range r.Find(sheet.KindInterlock, "") {
			var rec sheet.InterlockRecord
			if r.JSON(l, &rec) == nil && rec.Passed != nil && *rec.Passed && rec.Creep[0].Witness == "cd" {
				n++
			}
		}
		if n != 3 || len(problems) != 0 {
			t.Errorf("%d inputs passed in the record, want 3; problems %v", n, problems)
		}
		if report := sheet.Report(r.Dir()); !strings.Contains(report, "pressed through") || !strings.Contains(report, "witnessed by") {
			t.Error("the report has no interlock table")
		}
	})
}

// interlockWalk works every input in both states and stops the shaft by each.
func (p *person) interlockWalk() {
	p.t.Helper()
	p.step(job.StepInterlocks)
	p.works(2 + 2 + 3)
	p.write("cd")
	for range 2 { // E-stop, guard: trips
		p.runs()
		p.works(1) // somebody opened it in motion; back again
		p.again("e", func(v *job.View) bool { return v.Drive.Acked })
		p.again("z", phase("DISARMED"))
	}
	for range 2 { // the enabling switch stops, it does not trip
		p.runs()
		p.until("stopped", phase("DISARMED"))
		p.works(1)
	}
	p.write("cd")
	p.done(job.StepInterlocks)
}

// The commissioning walk by keys, from cable to signature: checklist, interlocks,
// silence and limit seen working, the run-up with its notes, experiments, gains,
// verify, acceptance list, card and report.
func TestCommissioningByKeys(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := atInterlocks(t)
		defer p.leave()
		p.upTo(job.StepInterlocks)
		p.interlockWalk()
		p.upToFrom(job.StepLimits, job.StepStep)
		p.goTo(job.StepRunUp)
		for i := range 5 {
			p.runs()
			p.until("the question for a note, at rest", func(v *job.View) bool { return asked(job.AskText)(v) && !v.Drive.Moving })
			if i == 4 {
				p.write("hums at this speed")
			} else {
				p.again("enter", func(v *job.View) bool { return v.Ask == nil || v.Ask.Kind != job.AskText })
			}
		}
		p.done(job.StepRunUp)
		p.press("b") // from the path, where it is still selected
		p.upToFrom(job.StepStep, job.StepAsLeft)
		p.goTo(job.StepAcceptance)
		p.write("CD")
		for _, key := range []string{"y", "y", "n"} {
			p.answers(key)
		}
		p.done(job.StepAcceptance)
		p.press("b")
		p.upToFrom(job.StepAsLeft, "")
		card := p.live.View().Card
		for _, want := range []string{"run-up in 5 levels", "acceptance list: 2 of 3 passed, witnessed by CD", "inputs at creep", "done by"} {
			if !strings.Contains(card, want) {
				t.Errorf("%q is not on the card:\n%s", want, card)
			}
		}
		t.Logf("%d keys", p.keys)
		r, problems := sheet.Open(p.leave())
		if len(problems) > 0 {
			t.Fatal(problems)
		}
		var up sheet.RunUpRecord
		if err := r.LastJSON(sheet.KindEvent, sheet.NameRunUp, &up); err != nil || len(up.Levels) != 5 || up.Levels[4].Note != "hums at this speed" || up.Levels[0].Note != "" {
			t.Errorf("%v, %+v", err, up)
		}
		for i := 1; i < len(up.Levels); i++ {
			if !(*up.Levels[i].SpeedRadS > *up.Levels[i-1].SpeedRadS) {
				t.Errorf("level %d is not faster than the one before: %+v", i+1, up.Levels)
			}
		}
		report := sheet.Report(r.Dir())
		for _, want := range []string{"hums at this speed", "Acceptance list of the rig file", "after a power dip the board starts disarmed"} {
			if !strings.Contains(report, want) {
				t.Errorf("%q is not in the report", want)
			}
		}
		if again, err := job.Recompute(r); err != nil || !again.Identical {
			t.Errorf("computed again: %v, %v", err, again.Differences)
		}
	})
}

// inches goes to the step that nobody asks for and makes three inches.
func (p *person) inches() {
	p.t.Helper()
	p.press("1")
	for range 30 {
		if v := p.live.View(); strings.Contains(p.see(), "one inch for each g") || v.Doing {
			break
		}
		p.press("k") // it stands before the step that is offered
	}
	p.press("enter")
	p.until("the way", asked(job.AskChoice))
	p.press("1")
	angle := func() (th float64) {
		p.sim.Rig(func(r *simrig.Rig) { th = r.Angle() })
		return th
	}
	p.runs()
	for n := 1; n <= 3; n++ {
		p.until("the end of the inch", func(v *job.View) bool { return v.Drive.Phase == "ARMED" && v.Drive.Inches == n && !v.Drive.Moving })
		before := angle()
		p.wait(2 * time.Second)
		if angle() != before {
			p.t.Errorf("the shaft turns between two presses")
		}
		if n < 3 {
			p.press("g")
		}
	}
	p.press("j")
	p.until("disarmed", phase("DISARMED"))
	p.done(job.StepInch)
}
