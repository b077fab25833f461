package bench

import (
	"errors"
	"math"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// everything does a whole job with all optional steps and returns the record.
func everything(t *testing.T, cfg simrig.Config) (Report, *sheet.Reader) {
	t.Helper()
	d := DryRun{Config: cfg, Seed: 1, Dir: filepath.Join(t.TempDir(), "sheet"), Program: "test", Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC)}
	for _, p := range job.Path {
		if p.Optional {
			d.Also = append(d.Also, p.ID)
		}
	}
	rep, err := d.Do()
	if err != nil {
		t.Fatal(err)
	}
	r, problems := sheet.Open(d.Dir)
	if len(problems) > 0 {
		t.Fatal(problems)
	}
	return rep, r
}

// found reads the numbers of an experiment from a record, NaN where there is none.
func found(t *testing.T, r *sheet.Reader, step job.StepID, name string) (v, sd float64) {
	t.Helper()
	l, ok := r.Last(sheet.KindExperiment, string(step))
	if !ok {
		t.Fatalf("no experiment %s", step)
	}
	var x sheet.ExperimentRecord
	if err := r.JSON(l, &x); err != nil {
		t.Fatal(err)
	}
	for _, q := range x.Params {
		if q.Name == name && q.Value != nil {
			if q.PlusMinus != nil {
				sd = *q.PlusMinus / 1.96
			}
			return *q.Value, sd
		}
	}
	t.Fatalf("%s has no %s", step, name)
	return 0, 0
}

// Every optional experiment is done on a bench rig and finds the rig's own numbers,
// which are those of its file; and all of it comes out again from the record, bit for
// bit.
func TestOptionalExperimentsFindTheRigsOwnNumbers(t *testing.T) {
	cfg, err := simrig.Load(rigs + "/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	rep, r := everything(t, cfg)
	if rep.Outcome != Accepted || rep.Violations != 0 {
		t.Fatalf("%s: %s, %d violations", rep.Outcome, rep.Reason, rep.Violations)
	}
	m, inertia := cfg.Motor, cfg.Motor.Inertia+cfg.Load.Inertia
	rev := cfg.Friction.Reverse
	gain := m.K / (m.K*m.K + m.Ohms*cfg.Friction.Forward.Viscous)
	tau := inertia * m.Ohms / (m.K*m.K + m.Ohms*cfg.Friction.Forward.Viscous)
	for _, c := range []struct {
		step  job.StepID
		name  string
		want  float64
		share float64 // of want that it may be off
	}{
		{job.StepTiming, "loop period, quick telemetry", float64(cfg.Board.LoopUS) * 1e-6, 1e-6},
		{job.StepTiming, "bus at rest", cfg.Supply.Volts, 0.005},
		{job.StepResistance, "resistance at 25 °C", m.Ohms, 0.03},
		{job.StepCoast, "dry friction over inertia forward", cfg.Friction.Forward.Coulomb / inertia, 0.03},
		{job.StepCoast, "dry friction over inertia reverse", rev.Coulomb / inertia, 0.03},
		{job.StepCoast, "viscous friction over inertia forward", cfg.Friction.Forward.Viscous / inertia, 0.25},
		{job.StepRelay, "gain", gain, 0.03},
		{job.StepRelay, "time constant", tau, 0.05},
		{job.StepFrequency, "gain", gain, 0.03},
		{job.StepFrequency, "time constant", tau, 0.05},
		{job.StepNoise, "speed step", 2 * math.Pi / float64(cfg.Encoder.PerTurn) / (float64(cfg.Board.Window*cfg.Board.LoopUS) * 1e-6), 1e-6},
		{job.StepMethods, "lost by the driver, reverse", cfg.Driver.DeadBand, 0.5},
		{job.StepMotor, "R", m.Ohms, 0.04},
		{job.StepMotor, "Ke", m.K, 0.01},
		{job.StepMotor, "J", inertia, 0.05},
		{job.StepMotor, "Coulomb friction forward", cfg.Friction.Forward.Coulomb, 0.15},
		{job.StepMotor, "Coulomb friction reverse", rev.Coulomb, 0.15},
		{job.StepMap, "believed to", 0.7 * 0.8 * cfg.Nameplate.SpeedMax, 0.1},
	} {
		if got, sd := found(t, r, c.step, c.name); !(math.Abs(got/c.want-1) <= c.share) {
			t.Errorf("%s: %s is %.4g ± %.2g, the rig's own is %.4g", c.step, c.name, got, 1.96*sd, c.want)
		}
	}
	if lost, sd := found(t, r, job.StepReversal, "lost motion"); math.Abs(lost) > 4*sd {
		t.Errorf("lost motion %.3g ± %.2g rad of a rig without any", lost, 1.96*sd)
	}
	again, err := job.Recompute(r)
	if err != nil || !again.Identical {
		t.Errorf("recomputed: %v, differences %v", err, again.Differences)
	}
}

// The rules of the ultimate point stand in the table of rules a second time, with
// what the relay found, and give nearly the same gains.
func TestRelayFeedsTheRules(t *testing.T) {
	v, j := onBench(t, "benchtop", job.StepFit)
	if err := j.Do(job.StepRelay); err != nil {
		t.Fatal(err)
	}
	if err := j.Do(job.StepDesign); err != nil {
		t.Fatal(err)
	}
	kp := map[string]float64{}
	pairs := 0
	for _, r := range v.s.view.Design.Rules {
		if x, err := strconv.ParseFloat(r.Kp, 64); err == nil {
			kp[r.Rule] = x
		}
	}
	for rule, x := range kp {
		if own, ok := kp[strings.TrimSuffix(rule, ", relay")]; ok && strings.HasSuffix(rule, ", relay") {
			pairs++
			if math.Abs(x/own-1) > 0.15 {
				t.Errorf("%s: Kp %.4g, by the fit %.4g", rule, x, own)
			}
		}
	}
	if pairs < 1 {
		t.Errorf("%d rules with the relay's numbers: %v", pairs, kp)
	}
}

// A board without a current sensor refuses what needs one, in words, and the job
// goes on.
func TestExperimentsThatCannotBeDone(t *testing.T) {
	_, j := onBench(t, "geared", job.StepFit)
	for _, id := range []job.StepID{job.StepResistance, job.StepReversal} {
		var r *job.RefusedError
		if err := j.Do(id); !errors.As(err, &r) || r.Cause == "" || r.Remedy == "" {
			t.Errorf("%s: %v", id, err)
		}
	}
	if err := j.Do(job.StepDesign); err != nil {
		t.Errorf("afterwards: %v", err)
	}
}

// Where three repeats leave the time constant too wide the steps are run once more,
// and that run ends by itself when enough is known; where they do not, it is not.
func TestStepsEndWhenEnoughIsKnown(t *testing.T) {
	cfg, err := simrig.Load(rigs + "/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		counts int
		more   bool
	}{{2000, false}, {48, true}} {
		cfg.Encoder.PerTurn, cfg.Board.Capture = c.counts, 0
		cfg.Board.Window = 10
		r, text, err := RigOf(cfg)
		if err != nil {
			t.Fatal(err)
		}
		v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
		j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Version: "test"})
		for _, s := range job.Path {
			if s.Optional {
				continue
			}
			if err := j.Do(s.ID); err != nil {
				t.Fatalf("%d counts: %s: %v", c.counts, s.ID, err)
			}
			if s.ID == job.StepStep {
				break
			}
		}
		more, enough := false, false
		for _, l := range v.s.view.Log {
			more = more || strings.Contains(l.Text, "is asked for: once more")
			enough = enough || strings.Contains(l.Text, "enough is known")
		}
		if more != c.more || enough != c.more {
			t.Errorf("%d counts: more %v, ended by what is known %v", c.counts, more, enough)
		}
		if l := v.s.view.Live; l == nil || !strings.Contains(l.Learn, "one more") {
			t.Errorf("%d counts: the screen does not say what one more repeat would buy", c.counts)
		}
	}
}
