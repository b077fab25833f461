package bench

import (
	"bytes"
	"fmt"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety/rig"
	"gainwright/tune/job"
)

// withKe is the bench rig with a back-EMF constant in its rig file.
func withKe(t *testing.T, ke float64) (simrig.Config, rig.Rig, []byte) {
	t.Helper()
	cfg := benchtop(t)
	_, text, err := RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	text = bytes.Replace(text, []byte("[motor]\n"), fmt.Appendf(nil, "[motor]\nke_V_s_per_rad = %g\n", ke), 1)
	r, err := rig.Parse("bench", text)
	if err != nil {
		t.Fatal(err)
	}
	return cfg, r, text
}

// A motor that is not the one of the rig file is refused, and nobody but a person can
// go on; with a typed reason plans keep to half of the limits.
func TestAMotorThatIsNotTheRigFilesIsRefused(t *testing.T) {
	cfg, r, text := withKe(t, cfg0045/1.5)
	d := DryRun{Config: cfg, Rig: r, RigText: text, Seed: 1, Program: "test", Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC)}
	rep, err := d.Do()
	if err != nil || rep.Outcome != Refused || !strings.Contains(rep.Reason, "motor check") || !strings.Contains(rep.Reason, "x1.5") {
		t.Fatalf("%v, %s: %s", err, rep.Outcome, rep.Reason)
	}
	_, r, text = withKe(t, cfg0045*1.2) // within what makers allow and a warm magnet does
	d.Rig, d.RigText = r, text
	if rep, err := d.Do(); err != nil || rep.Outcome != Accepted {
		t.Errorf("%v, %s: %s", err, rep.Outcome, rep.Reason)
	}
	cfg, r, text = withKe(t, cfg0045/1.5)
	v := NewVirtual(simrig.New(cfg, 1), d.Start)
	v.op.says = func(q *job.Question) *job.Answer {
		if q.Override {
			return &job.Answer{Yes: true, Text: "rewound on purpose"}
		}
		return nil
	}
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Version: "test"})
	for _, p := range job.Path {
		if p.Optional {
			continue
		}
		if p.ID == job.StepFound {
			break
		}
		if err := j.Do(p.ID); err != nil {
			t.Fatal(err)
		}
	}
	if top := float64(j.Env.VoltsMax); top != float64(r.Envelope().VoltsMax)/2 {
		t.Errorf("plans may go to %g V of %g", top, float64(r.Envelope().VoltsMax))
	}
	if b := j.Bias + j.Amplitude; b > 0.5*float64(r.Envelope().VoltsMax) {
		t.Errorf("the step test goes to %g V", b)
	}
}

const cfg0045 = 0.045 // V·s/rad, of testdata/rigs/benchtop.toml
