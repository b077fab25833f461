package main

import (
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// drilled sits down at a drill. Nothing is said of what will go wrong.
func drilled(t *testing.T, id string) (*person, *bench.Drill) {
	t.Helper()
	scene, err := bench.SceneOf(id, 1)
	if err != nil {
		t.Fatal(err)
	}
	cfg := demoRig(t)
	r, text := rigFileOf(t, cfg)
	var d *bench.Drill
	p := sitBent(t, &cfg, r, text, func(o *bench.Options) { d = bench.NewDrill(scene, 1, &cfg, o) })
	d.Serve(p.sim, p.live)
	return p, d
}

// onward does the next step as far as it goes, for a person who does not know that it
// will not end well.
func (p *person) onward(id job.StepID) {
	p.t.Helper()
	p.step(id)
	p.runs()
}

// broughtAbout waits until the scene has begun.
func broughtAbout(p *person, d *bench.Drill) {
	p.t.Helper()
	p.until("the scene", func(*job.View) bool { return d.Record().Began != "" })
}

// The failure walks, by keys, each with what the screen has to say, what the person
// does, and what the record has of it afterwards.
func TestFailureWalksByKeys(t *testing.T) {
	in := func(step job.StepID, words ...string) func(*testing.T, *person, *bench.Drill) {
		return func(t *testing.T, p *person, d *bench.Drill) {
			p.upTo(step)
			p.onward(step)
			broughtAbout(p, d)
			p.until("the end of the run", func(v *job.View) bool { return v.Drive.Phase == "TRIPPED" || v.Drive.Phase == "DISARMED" })
			p.wait(1500 * time.Millisecond)
			shown := p.see()
			p.press("f")
			shown += p.see()
			for _, w := range words {
				if !strings.Contains(shown, w) {
					t.Errorf("the screens do not say %q:\n%s", w, shown)
				}
			}
			if v := p.live.View(); v.Drive.Phase == "TRIPPED" && v.Link.State != job.LinkLost {
				p.again("e", func(v *job.View) bool { return v.Drive.Acked })
				p.again("z", phase("DISARMED"))
			}
		}
	}
	motion := func(words ...string) func(*testing.T, *person, *bench.Drill) { return in(job.StepStaircase, words...) }
	inLoop := func(words ...string) func(*testing.T, *person, *bench.Drill) { return in(job.StepFound, words...) }
	for _, c := range []struct {
		id    string
		do    func(*testing.T, *person, *bench.Drill)
		judge func(*testing.T, sheet.DrillRecord)
	}{
		{"F1", func(t *testing.T, p *person, d *bench.Drill) {
			p.upTo(job.StepStaircase)
			p.onward(job.StepStaircase)
			broughtAbout(p, d)
			p.until("the trip", phase("TRIPPED"))
			p.until("the lost link", func(v *job.View) bool { return v.Link.State == job.LinkLost })
			if s := p.see(); !strings.Contains(s, "LINK LOST") || !strings.Contains(s, "watch the shaft") {
				t.Errorf("the screen:\n%s", s)
			}
			p.sim.Rig(func(r *simrig.Rig) {
				if r.Powered() {
					t.Error("the shaft is under power after the link was lost")
				}
			})
		}, stoppedBy("limiter")},
		{"F2", func(t *testing.T, p *person, d *bench.Drill) {
			p.upTo(job.StepCount)
			p.step(job.StepCount)
			p.turnedByHand()
			p.press("t")
			p.wait(3 * time.Second)
			p.press("enter")
			p.until("the refusal", func(v *job.View) bool { return v.Refusal != nil })
			if r := p.live.View().Refusal; !strings.Contains(r.Cause, "the wrong way") || !strings.Contains(r.Remedy, "swap the encoder channels") {
				t.Errorf("%+v", r)
			}
		}, nil},
		{"F3", motion("no counts"), stoppedBy("counts")},
		{"F4", motion("stalled"), stoppedBy("")},
		{"F5", inLoop("disagree"), stoppedBy("disagree")},
		{"F6", motion("supply folds back"), stoppedBy("bus under limit")},
		{"F7", func(t *testing.T, p *person, d *bench.Drill) {
			p.upTo(job.StepStaircase)
			p.onward(job.StepStaircase)
			broughtAbout(p, d)
			p.until("the call", func(v *job.View) bool { return v.Call != "" })
			if s := p.see(); !strings.Contains(s, "SOMEBODY STEPS UP") {
				t.Errorf("the screen:\n%s", s)
			}
			p.press("x") // any key, no aim needed
			p.until("at rest", phase("DISARMED"))
			p.until("the question why", asked(job.AskChoice))
			p.press("1")
		}, func(t *testing.T, r sheet.DrillRecord) {
			if r.KeyS == nil || *r.KeyS > 1 || !strings.Contains(r.StoppedBy, "key") {
				t.Errorf("%+v", r)
			}
		}},
		{"F8", motion("slept"), stoppedBy("slept")},
		{"F9", func(t *testing.T, p *person, d *bench.Drill) {
			p.upTo(job.StepLimits)
			p.step(job.StepLimits)
			p.runs()
			p.until("the refusal", func(v *job.View) bool { return v.Refusal != nil })
			if r := p.live.View().Refusal; r.Number != 789 || !strings.Contains(r.Cause, "slower than the rig file says") || !strings.Contains(r.Remedy, "is it the file of this motor") {
				t.Errorf("%+v", r)
			}
		}, nil},
		{"F10", func(t *testing.T, p *person, d *bench.Drill) {
			p.press("enter")
			p.until("the refusal", func(v *job.View) bool { return v.Refusal != nil })
			if s := p.see(); !strings.Contains(s, "another console") {
				t.Errorf("the screen:\n%s", s)
			}
			p.again("enter", func(v *job.View) bool { return v.Link.State == job.Fresh || v.Link.State == job.Opening })
			p.done(job.StepIdentity)
		}, nil},
		{"F11", motion("restarted"), stoppedBy("")},
		{"F12", motion("E-stop input"), stoppedBy("E-stop input")},
		{"F13", motion("no fresh telemetry"), stoppedBy("telemetry")},
	} {
		t.Run(c.id, func(t *testing.T) {
			t.Parallel()
			synctest.Test(t, func(t *testing.T) {
				p, d := drilled(t, c.id)
				defer p.leave()
				c.do(t, p, d)
				p.wait(10 * time.Second) // what passes by itself has passed
				dir := p.leave()
				r, problems := sheet.Open(dir)
				if len(problems) > 0 {
					t.Fatal(problems)
				}
				var rec sheet.DrillRecord
				if err := r.LastJSON(sheet.KindEvent, sheet.NameDrill, &rec); err != nil || rec.Scene != c.id || rec.Began == "" {
					t.Fatalf("%v, %+v", err, rec)
				}
				if c.judge != nil {
					c.judge(t, rec)
				}
				if words := strings.Join(rec.Words(), "\n"); !strings.Contains(words, "nothing real moved") {
					t.Error(words)
				}
			})
		})
	}
}

// stoppedBy wants the motor stopped by the limiter with those words, quickly, and
// what the person did afterwards in the record.
func stoppedBy(words string) func(*testing.T, sheet.DrillRecord) {
	return func(t *testing.T, r sheet.DrillRecord) {
		if !strings.Contains(r.StoppedBy, words) || !strings.HasPrefix(r.StoppedBy, "the limiter: ") {
			t.Errorf("stopped by %q", r.StoppedBy)
		}
		if r.StoppedS == nil || *r.StoppedS > 1.5 {
			t.Errorf("stopped after %v", r.StoppedS)
		}
		if r.OffS == nil && r.Scene != "F1" {
			t.Errorf("the output is never off: %+v", r)
		}
	}
}
