package bench

import (
	"errors"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/tune/job"
)

// onBench puts a rig of testdata on the bench and goes down the path to the given
// step.
func onBench(t *testing.T, rig string, upTo job.StepID) (*Virtual, *job.Job) {
	t.Helper()
	cfg, err := simrig.Load(rigs + "/" + rig + ".toml")
	if err != nil {
		t.Fatal(err)
	}
	r, text, err := RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Version: "test"})
	for _, s := range job.Path {
		if !s.Optional {
			if err := j.Do(s.ID); err != nil {
				t.Fatalf("%s: %v", s.ID, err)
			}
		}
		if s.ID == upTo {
			return v, j
		}
	}
	t.Fatalf("no step %s", upTo)
	return nil, nil
}

// A motor that does not do what its model says is stopped: here the model is made
// wrong by 40 % and the steps are run again.
func TestLeavingTheForecastStopsTheRun(t *testing.T) {
	v, j := onBench(t, "benchtop", job.StepFit)
	before := v.rig.Extremes().PoweredS
	if err := j.Do(job.StepStep); err != nil {
		t.Fatalf("with the right model: %v", err)
	}
	whole := v.rig.Extremes().PoweredS - before
	m := &j.Fit.Best().Model
	for i := range m.Num {
		m.Num[i] *= 1.4
	}
	before = v.rig.Extremes().PoweredS
	err := j.Do(job.StepStep)
	var r *job.RefusedError
	if !errors.As(err, &r) || r.Number != int(safety.CodeForecast) {
		t.Fatalf("the run ended with %v, want the forecast to stop it", err)
	}
	if got := v.rig.Extremes().PoweredS - before; got > whole/2 {
		t.Errorf("it drove for %.2f s of %.2f s", got, whole)
	}
	if v.s.core.State().Phase != safety.Tripped {
		t.Errorf("phase %v", v.s.core.State().Phase)
	}
}
