package job

import (
	"math"
	"strings"
	"testing"
)

// Without a measured current the motor equations say what is known in volts, from
// which speed to which the linear model is to be used, and what is not identifiable.
func TestWithoutACurrentTheRangeIsSaid(t *testing.T) {
	rec, err := ExperimentSettings{Experiment: StepMotor, Numbers: map[string]float64{"gain": 21, "tau": 0.08,
		"coulomb_volts_forward": 1.1, "speed_low": 12, "speed_high": 250}}.Analyse(nil)
	if err != nil {
		t.Fatal(err)
	}
	for name, want := range map[string]float64{"gain": 21, "mechanical time constant": 0.08, "sliding friction forward": 1.1, "linear model from": 12, "linear model to": 250} {
		if v, _, ok := paramOf(rec, name); !ok || math.Abs(v-want) > 1e-12 {
			t.Errorf("%s: %v (known %v), want %v", name, v, ok, want)
		}
	}
	for _, name := range []string{"R", "Ke", "J", "L", "Coulomb friction forward"} {
		if _, _, ok := paramOf(rec, name); ok {
			t.Errorf("%s came out without a current", name)
		}
	}
	if said := strings.Join(rec.Reasons, "; "); !strings.Contains(said, "not identifiable without a measured current: R, L, Ke, Kt, J") || !strings.Contains(said, "L/R") {
		t.Errorf("said %q", said)
	}
}
