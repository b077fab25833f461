package bench

import (
	"encoding/json"
	"math"
	"testing"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// A board whose loop makes relay, sequence and steps itself is asked to, and the rig's
// own numbers come out of them; one that does not say so is driven from the console.
// The limit cycle of the loop is the shorter one: nothing waits for telemetry.
func TestPatternsInTheBoardsLoop(t *testing.T) {
	cfg, err := simrig.Load(rigs + "/integers.toml")
	if err != nil {
		t.Fatal(err)
	}
	var period [2]float64
	for i, onBoard := range []bool{true, false} {
		cfg.Board.Exper = onBoard
		rep, r := everything(t, cfg)
		if rep.Outcome != Accepted || rep.Violations != 0 {
			t.Fatalf("%v: %s: %s, %d violations", onBoard, rep.Outcome, rep.Reason, rep.Violations)
		}
		patterns := map[safety.PatternKind]int{}
		for _, l := range r.Find(sheet.KindRun, "") {
			var run sheet.RunRecord
			var plan safety.Plan
			if err := r.JSON(l, &run); err != nil {
				t.Fatal(err)
			}
			if err := json.Unmarshal(run.Plan, &plan); err != nil {
				t.Fatal(err)
			}
			if plan.HasPattern() {
				patterns[plan.Segments[len(plan.Segments)-1].Pattern.Kind]++
			}
		}
		if all := patterns[safety.PatternRelay] == 2 && patterns[safety.PatternSequence] == 1 && patterns[safety.PatternSquare] > 0; all != onBoard || !onBoard && len(patterns) > 0 {
			t.Errorf("%v: runs with patterns: %v", onBoard, patterns)
		}
		m, viscous := cfg.Motor, cfg.Friction.Forward.Viscous
		gain := m.K / (m.K*m.K + m.Ohms*viscous)
		tau := (m.Inertia + cfg.Load.Inertia) * m.Ohms / (m.K*m.K + m.Ohms*viscous)
		for _, c := range []struct {
			name        string
			want, share float64
		}{{"gain", gain, 0.02}, {"time constant", tau, 0.03}, {"forecast period over measured", 1, 0.1}} {
			if v, _ := found(t, r, job.StepRelay, c.name); math.Abs(v-c.want) > c.share*c.want {
				t.Errorf("%v: %s is %.5g, the rig's own %.5g", onBoard, c.name, v, c.want)
			}
		}
		period[i], _ = found(t, r, job.StepRelay, "period 1")
	}
	if period[0] > 0.75*period[1] {
		t.Errorf("the limit cycle takes %.4g s in the loop, %.4g s through the console", period[0], period[1])
	}
}
