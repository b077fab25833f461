package bench

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/job"
)

// Drives that turn one way only are never planned to reverse, and one that cannot
// brake is never given a setpoint that falls: every plan of a whole job is looked
// at as it is shown, and the simulated rig at the end.
func TestOneWayDrivesAreNeverPlannedToReverseOrBrake(t *testing.T) {
	for _, quadrants := range []int{1, 2} {
		t.Run(fmt.Sprint(quadrants), func(t *testing.T) {
			cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
			if err != nil {
				t.Fatal(err)
			}
			cfg.Driver.Quadrants = quadrants
			r, text, err := RigOf(cfg)
			if err != nil {
				t.Fatal(err)
			}
			v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
			j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text})
			seen := map[string]bool{}
			v.each = func() {
				if v.s.run == nil || seen[v.s.run.spec.Plan.Name] {
					return
				}
				p := v.s.run.spec.Plan
				seen[p.Name] = true
				was := 0.0
				for i, s := range p.Segments {
					if s.From < 0 || s.To < 0 {
						t.Errorf("%s, segment %d drives backwards: %g to %g", p.Name, i+1, s.From, s.To)
					}
					if quadrants == 1 && s.Mode == safety.ModeSpeed && (s.To < s.From || s.From < was) {
						t.Errorf("%s, segment %d: the setpoint falls from %g by %g to %g", p.Name, i+1, was, s.From, s.To)
					}
					was = s.To
				}
			}
			for _, s := range job.Path {
				if s.ID == job.StepCard || j.StatusOf(s.ID) == job.Skipped {
					continue
				}
				err := j.Do(s.ID)
				if v.s.core.State().Phase == safety.Tripped {
					t.Fatalf("%s trips: %v", s.ID, v.s.core.State().Trip.Cause)
				}
				if no, ok := errors.AsType[*job.RefusedError](err); ok {
					t.Logf("%s refused in words: %v", s.ID, no)
				} else if err != nil {
					t.Errorf("%s: %v", s.ID, err)
				}
			}
			if len(seen) < 6 {
				t.Errorf("only %d plans were shown: %v", len(seen), seen)
			}
			if n := v.rig.Extremes().Violations; len(n) > 0 {
				t.Errorf("out of the envelope: %v", n)
			}
		})
	}
}

// What this console cannot stand behind it refuses before anything is armed: a
// load that gravity can turn without a holding brake, and drives that take amperes,
// said by the rig file.
func TestWhatCannotBeStoodBehindIsRefused(t *testing.T) {
	for name, c := range map[string]struct {
		bend  func(*rig.Rig)
		words string
	}{
		"gravity":      {func(r *rig.Rig) { r.Load.Gravity = true }, "no holding brake is listed; fit a brake and list it"},
		"current mode": {func(r *rig.Rig) { r.Drive.Kind = "current" }, "current-mode drives are not driven by this console"},
	} {
		cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
		if err != nil {
			t.Fatal(err)
		}
		r, _, err := RigOf(cfg)
		if err != nil {
			t.Fatal(err)
		}
		c.bend(&r)
		v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
		j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: rig.Marshal(r)})
		var last error
		for _, s := range []job.StepID{job.StepPort, job.StepIdentity, job.StepCount, job.StepSign} {
			if last = j.Do(s); last != nil {
				break
			}
		}
		no, ok := errors.AsType[*job.RefusedError](last)
		if !ok || !strings.Contains(no.Error(), c.words) {
			t.Errorf("%s: %v", name, last)
		}
		if on := v.rig.Extremes().PoweredS; on != 0 {
			t.Errorf("%s: the drive was on for %v s", name, on)
		}
	}
}
