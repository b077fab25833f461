package bench

import (
	"errors"
	"math"
	"path/filepath"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/tune/sheet"
)

// A twin answers as the record says that its rig does: the whole job on it finds the
// model, the friction and the margins again.
func TestATwinIsItsRecordAgain(t *testing.T) {
	for _, c := range []struct {
		name       string
		gain, tau  float64 // share that they may be off
		dead, away float64 // s; share
	}{{"benchtop", 0.02, 0.03, 0.5e-3, 0.05}, {"interlocked", 0.02, 0.03, 0.5e-3, 0.05}} {
		cfg, err := simrig.Load(rigs + "/" + c.name + ".toml")
		if err != nil {
			t.Fatal(err)
		}
		cfg.Board.Inputs = nil // their checklist is not the point
		root := t.TempDir()
		d := DryRun{Config: cfg, Seed: 1, Dir: filepath.Join(root, "rig"), Program: "test", Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC)}
		if rep, err := d.Do(); err != nil || rep.Outcome != Accepted {
			t.Fatalf("%s: %v, %s: %s", c.name, err, rep.Outcome, rep.Reason)
		}
		r, _ := sheet.Open(d.Dir)
		twin, err := TwinOf(r)
		if err != nil {
			t.Fatalf("%s: %v\n%s", c.name, err, twin.Text)
		}
		again := DryRun{Config: twin.Config, Rig: twin.Rig, RigText: twin.RigText, Seed: 2, Dir: filepath.Join(root, "twin"), Program: "test", Start: d.Start}
		rep, err := again.Do()
		if err != nil || rep.Outcome != Accepted && rep.Outcome != NoAdjustment {
			t.Fatalf("%s: %v, %s: %s", c.name, err, rep.Outcome, rep.Reason)
		}
		r2, _ := sheet.Open(again.Dir)
		m, err := r.Motor()
		if err != nil {
			t.Fatal(err)
		}
		n, err := r2.Motor()
		if err != nil {
			t.Fatal(err)
		}
		off := func(what string, a, b *float64, share, abs float64) {
			if a == nil || b == nil || math.Abs(*a-*b) > share*math.Abs(*a)+abs {
				t.Errorf("%s: %s is %v, of the twin %v", c.name, what, value(a), value(b))
			}
		}
		off("gain", m.GainRadSPerV, n.GainRadSPerV, c.gain, 0)
		off("time constant", m.TauS, n.TauS, c.tau, 0)
		off("dead time", m.DeadTimeS, n.DeadTimeS, 0, c.dead)
		off("breakaway forward", m.BreakawayForwardV, n.BreakawayForwardV, c.away, 0)
		off("breakaway reverse", m.BreakawayReverseV, n.BreakawayReverseV, c.away, 0)
		off("R", m.ROhm, n.ROhm, 0.05, 0)
		off("Ke", m.KeVsPerRad, n.KeVsPerRad, 0.02, 0)
	}
	empty := filepath.Join(t.TempDir(), "none")
	d := DryRun{Config: benchtop(t), Seed: 1, Dir: empty, Program: "test", Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC)}
	d.Config.Faults = append(d.Config.Faults, simrig.FaultSpec{Kind: simrig.FaultReversed})
	if rep, err := d.Do(); err != nil || rep.Outcome != Refused {
		t.Fatalf("%v, %s", err, rep.Outcome)
	}
	r, _ := sheet.Open(empty)
	if _, err := TwinOf(r); !errors.Is(err, ErrNoTwin) {
		t.Errorf("a record without a model: %v", err)
	}
}

func value(p *float64) float64 {
	if p == nil {
		return math.NaN()
	}
	return *p
}
