package bench

import (
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/safety/safetytest"
	"gainwright/tune/job"
)

// refereed watches a virtual bench with the referee, who sees events, effects and
// the simulated shaft, and counts the time in which the motor may move.
type refereed struct {
	ref    *safetytest.Referee
	active time.Duration
	last   time.Duration
}

func referee(v *Virtual, obeys, truthful bool) *refereed {
	w := &refereed{ref: safetytest.New(safety.Envelope{})}
	core := v.s.core
	core.Watch = func(e safety.Event, out []safety.Effect) {
		switch x := e.(type) {
		case *safety.Sample:
			e = *x
		case safety.RigChanged:
			w.ref.Under(core.Envelope())
		case safety.Tick:
			if ph := core.Phase(); ph.ArmHeld() || ph == safety.Stopping {
				w.active += x.At - w.last
			}
			w.last = x.At
			w.ref.Shaft(v.s.now, v.rig.Speed(), v.rig.Powered(), obeys, truthful)
		}
		w.ref.Saw(e, out)
	}
	return w
}

// The referee of the seeded worlds watches whole jobs on the simulated rigs, whose
// physics and board are another party's: at least twenty minutes in which the
// motor may move.
func TestRefereeWatchesWholeJobs(t *testing.T) {
	files, err := filepath.Glob("../../testdata/rigs/*.toml")
	if err != nil || len(files) < 20 {
		t.Fatalf("%d rigs: %v", len(files), err)
	}
	var active time.Duration
	jobs := 0
	for _, f := range files {
		if strings.HasSuffix(f, ".rig.toml") {
			continue
		}
		cfg, err := simrig.Load(f)
		if err != nil {
			t.Fatal(err)
		}
		if cfg.Expect == "refused" {
			continue // what it does wrong is judged elsewhere; here the shaft obeys
		}
		for _, seed := range []uint64{2} {
			d := DryRun{Config: cfg, Seed: seed, Start: time.Date(2026, 1, 5, 8, 0, 0, 0, time.UTC)}
			r, text, err := RigOf(cfg)
			if err != nil {
				t.Fatal(err)
			}
			v := NewVirtual(simrig.New(cfg, seed), d.Start)
			w := referee(v, true, true)
			j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Seed: uint32(seed)})
			d.Dir = "none" // no card is made
			_, _, _ = d.steps(v, j)
			for _, x := range w.ref.Violations() {
				t.Errorf("%s, seed %d: %v", filepath.Base(f), seed, x)
			}
			active += w.active
			jobs++
		}
	}
	t.Logf("%d jobs, %v in which the motor may move", jobs, active)
	if least := 20 * time.Minute; !testing.Short() && active < least {
		t.Errorf("%v, wanted are %v", active, least)
	}
}
