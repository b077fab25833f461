package job

import (
	"strings"
	"testing"

	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
)

// With half to three times the inertia to be expected, 95 % of the motors drawn
// keep the bound on Ms; with the gains for the motor of today alone they do not.
func TestAStatedRangeOfInertiaIsKept(t *testing.T) {
	f := identify.Fit{Model: model.FirstOrder(20, 0.05, 0.006)}
	s := DesignSettings{MsMax: 1.6, Overshoot: 10, DriveMax: 24, Seed: 1, Law: Law{Quadrants: 4, SampleTime: 0.002, Slots: []string{"kp", "ki", "b"}},
		InertiaMin: 0.5, InertiaMax: 3}
	worst := func() (float64, []string) {
		t.Helper()
		all, chosen, err := s.keeping(f.Model, f)
		if err != nil || chosen < 0 {
			t.Fatal(chosen, err)
		}
		w, err := design.WorstCase(f.Model, linear(all[chosen].Gains), s.spread(f, f.Model))
		if err != nil {
			t.Fatal(err)
		}
		return float64(w.Ms), all[chosen].Notes
	}
	if ms, _ := worst(); ms < 1.7 {
		t.Errorf("without care 95 %% keep Ms %.2f: nothing to be careful of", ms)
	}
	s.Keep95 = true
	if ms, notes := worst(); ms > 1.6*1.03 || !strings.Contains(strings.Join(notes, ";"), "95 %") {
		t.Errorf("95 %% keep Ms %.3f, the bound is 1.6: %v", ms, notes)
	}
}

// A bus that is not measured and may be low takes the gain down with it.
func TestALowBusIsInTheWorstCase(t *testing.T) {
	s := DesignSettings{BusLow: 0.75, GainMin: 0.9, GainMax: 1.1}
	if sp := s.spread(identify.Fit{}, model.FirstOrder(20, 0.05, 0)); sp.GainMin != 0.75*0.9 || sp.GainMax != 1.1 {
		t.Errorf("gain from %g to %g", sp.GainMin, sp.GainMax)
	}
}
