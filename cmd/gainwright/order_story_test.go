package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

func orderOf(t *testing.T, text string) *job.Order {
	t.Helper()
	path := filepath.Join(t.TempDir(), "job.toml")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	o, err := readOrder(path)
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// A job file is followed by keys: its steps are offered in its order, its checklist is
// ticked line by line before the first arm, and every arm still needs its keys.
func TestAJobFileIsFollowedByKeys(t *testing.T) {
	o := orderOf(t, `name = "check after transport"
checklist = ["clamp tight", "guard closed"]
[[step]]
do = "identity"
[[step]]
do = "count"
note = "by the coupling, not by the belt"
[[step]]
do = "sign"
[[step]]
do = "as-left"
[[step]]
do = "card"
`)
	synctest.Test(t, func(t *testing.T) {
		cfg := demoRig(t)
		r, text, err := bench.RigOf(cfg)
		if err != nil {
			t.Fatal(err)
		}
		p := sitAt(t, cfg, r, text, func(b *bench.Options) { b.Job.Order = o })
		defer p.leave()
		p.step(job.StepPort)
		p.done(job.StepIdentity)
		p.until("the offer of the count check", func(v *job.View) bool { return v.Current == job.StepCount && !v.Doing })
		if s := p.see(); !strings.Contains(s, "by the coupling") {
			t.Errorf("the note is not on screen:\n%s", s)
		}
		p.step(job.StepCount)
		p.answerHand()
		p.done(job.StepCount)
		p.step(job.StepSign)
		p.until("the checklist", func(v *job.View) bool { return v.Ask != nil && v.Ask.Kind == job.AskYesNo })
		if v := p.live.View(); v.Ask.Text != "clamp tight" || v.Drive.Phase != "DISARMED" {
			t.Errorf("%q, %s", v.Ask.Text, v.Drive.Phase)
		}
		p.runsAll(job.StepSign)
		p.done(job.StepSign)
		p.step(job.StepAsLeft) // and not the stop check
		p.done(job.StepAsLeft)
		p.step(job.StepCard)
		p.done(job.StepCard)
		card := p.live.View().Card
		if !strings.Contains(card, "check after transport: 5 of 5 steps done") {
			t.Errorf("the card:\n%s", card)
		}
		dir := p.leave()
		rd, problems := sheet.Open(dir)
		if len(problems) > 0 {
			t.Fatal(problems)
		}
		var rec sheet.OrderRecord
		if err := rd.LastJSON(sheet.KindJob, sheet.NameOutcome, &rec); err != nil || !rec.Complete || len(rec.Steps) != 5 {
			t.Errorf("%v, %+v", err, rec)
		}
	})
}

// A look-only job runs with nobody at the terminal, and nothing on the board is
// changed by it; one that drives is refused there.
func TestALookOnlyJobRunsUnattended(t *testing.T) {
	o := orderOf(t, "name = \"look\"\nmode = \"look-only\"\n[[step]]\ndo = \"identity\"\n[[step]]\ndo = \"as-left\"\n[[step]]\ndo = \"card\"\n")
	synctest.Test(t, func(t *testing.T) {
		cfg := demoRig(t)
		r, text, err := bench.RigOf(cfg)
		if err != nil {
			t.Fatal(err)
		}
		sim := bench.ServePipe(simrig.New(cfg, 1))
		defer sim.Close()
		dir := filepath.Join(t.TempDir(), "sheet")
		b := bench.Options{Open: func(string) (bench.Opened, error) { return bench.Opened{Port: sim.Port(), Baud: cfg.Board.Baud}, nil }, Program: "test"}
		b.Job = job.Options{Rig: r, RigText: text, Order: o, Version: "test"}
		f := consoleFlags{out: dir}
		b.NewSheet = f.newSheet(&b)
		rec, at, err := lookAt("memory", b)
		if err != nil || !rec.Complete || len(rec.Steps) != 3 || at != dir {
			t.Fatalf("%v, %+v, %s", err, rec, at)
		}
		sim.Rig(func(r *simrig.Rig) {
			if r.LimitsInUse() {
				t.Error("limits were written")
			}
		})
		if problems, _ := sheet.Check(dir); len(problems) > 0 {
			t.Error(problems)
		}
		time.Sleep(time.Second)
	})
	code, _, errs := command("look", "--port", "/dev/null", "--rig", "../../testdata/rigs/benchtop.rig.toml", "--job", "../../testdata/jobs/retune.toml")
	if code != exitRefused || !strings.Contains(errs, "no script arms a board") {
		t.Errorf("a job that drives: %d, %s", code, errs)
	}
}
