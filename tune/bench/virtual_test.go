package bench

import (
	"math"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/tune/job"
)

// Every step of the path is done in its order, in under five minutes, and the
// model is that of the rig's own physics.
func TestWholeJobInVirtualTime(t *testing.T) {
	cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	r, text, err := RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	rig := simrig.New(cfg, 1)
	v := NewVirtual(rig, time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Version: "test"})
	for _, s := range job.Path {
		if s.ID == job.StepCard {
			break // needs a record
		}
		if s.Optional || j.StatusOf(s.ID) == job.Skipped {
			continue // nobody asks for it, or there is no input to check
		}
		if next := j.Next(); next != s.ID {
			t.Errorf("next is %s, want %s", next, s.ID)
		}
		if err := j.Do(s.ID); err != nil {
			t.Fatalf("%s: %v", s.ID, err)
		}
		if st := j.StatusOf(s.ID); st != job.Done {
			t.Errorf("%s: %s", s.ID, st)
		}
	}
	if v.Now() > 5*time.Minute {
		t.Errorf("the job took %v", v.Now())
	}
	gain, _, _ := j.Fit.Best().Value("gain")
	if want := rig.Truth(j.VerifySpeed()).Gain; math.Abs(gain/want-1) > 0.03 {
		t.Errorf("gain %.4g rad/s per V, the rig's own is %.4g", gain, want)
	}
	if n := len(rig.Extremes().Violations); n > 0 {
		t.Errorf("%d times out of the nameplate's envelope", n)
	}
	if !j.Running.Equal(j.Stored) || j.Running.Equal(j.Found) {
		t.Error("the new gains are not both running and stored")
	}
}

// A step whose needs are not met is refused and changes nothing.
func TestStepsAskForWhatTheyNeed(t *testing.T) {
	cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	r, text, err := RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	rig := simrig.New(cfg, 1)
	v := NewVirtual(rig, time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Version: "test"})
	for _, s := range []job.StepID{job.StepSign, job.StepStaircase, job.StepPush, job.StepVerify, job.StepStore} {
		if err := j.Do(s); err == nil {
			t.Errorf("%s was done out of the blue", s)
		}
	}
	if e := rig.Extremes(); e.PoweredS != 0 {
		t.Errorf("the drive was on for %v s", e.PoweredS)
	}
}
