package job

import (
	"errors"
	"strings"
	"testing"
	"time"

	"gainwright/safety"
	"gainwright/safety/rig"
)

const sizedRig = `name = "sized"
[motor]
voltage_rated_V = 24.0
speed_max_rpm = 3000.0
current_max_A = 8.0
[drive]
kind = "volts"
quadrants = 4
bus_nominal_V = 24.0
bus_max_V = 30.0
bus_min_V = 18.0
supply_can_sink = true
[encoder]
counts_per_turn = 2000.0
[load]
state = "bare"
`

// A plan whose forecast passes a limit is offered in the largest size that does
// not, with the reason; one that no size mends is refused.
func TestTheLargestSizeThatFitsIsOffered(t *testing.T) {
	r, err := rig.Parse("sized.toml", []byte(sizedRig))
	if err != nil {
		t.Fatal(err)
	}
	j := &Job{}
	j.Rig, j.Env = r, r.Envelope()
	j.Gain, j.Tau, j.StartForward, j.StartReverse = 20, 0.08, 1, 1
	plan := func(top float64) func(float64) safety.Plan {
		return func(size float64) safety.Plan {
			v := top * size
			return safety.Plan{Name: "push", Segments: []safety.Segment{
				{Mode: safety.ModeVolts, From: 0, To: v, Duration: time.Second}, {Mode: safety.ModeVolts, From: v, To: v, Duration: time.Second},
				{Mode: safety.ModeVolts, From: v, To: 0, Duration: time.Second}}}
		}
	}
	out, _, err := j.fitting(StepStep, Run{Sized: plan(10)})
	if err != nil || out.View.Size != 1 || len(out.View.Notes) != 0 {
		t.Fatalf("10 V: size %v, %q, %v", out.View.Size, out.View.Notes, err)
	}
	// 20 V would be (20 − 0.8)·20 = 384 rad/s of 314.
	out, _, err = j.fitting(StepStep, Run{Sized: plan(20)})
	if err != nil || out.View.Size > 0.81 || out.View.Size < 0.79 {
		t.Fatalf("20 V: size %v, %v", out.View.Size, err)
	}
	if n := out.View.Notes; len(n) != 1 || !strings.Contains(n[0], "80 % is the largest size that fits") || !strings.Contains(n[0], "top speed") {
		t.Errorf("said is %q", n)
	}
	if v := out.Plan.Segments[1].To; v < 15.9 || v > 16.1 {
		t.Errorf("the plan drives %v V", v)
	}
	_, _, err = j.fitting(StepStep, Run{Sized: plan(80)})
	var ref *RefusedError
	if !errors.As(err, &ref) {
		t.Errorf("80 V: %v", err)
	}
}
