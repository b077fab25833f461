package job

import (
	"math"
	"strings"
	"testing"

	"gainwright/tune/design"
	"gainwright/tune/model"
)

func slotted(slots ...string) DesignSettings {
	return DesignSettings{Feed: &Feed{}, Overshoot: 10, DriveMax: 24, Law: Law{Quadrants: 4, SampleTime: 0.001, Slots: append([]string{"kp", "ki", "b"}, slots...)}}
}

// A speed that stands needs ω/K volts (motor equation). Where the integral is slow
// to find them a feed-forward of a share of 1/K is worth it; where the loop is
// quick it acts like more setpoint weight, and is declined. Without a slot it is
// said and left.
func TestFeedForwardOfTheSpeedHasToBeWorthIt(t *testing.T) {
	m := model.FirstOrder(20, 0.2, 0.01)
	slow, quick := design.PI(0.01, 0.05, 0.001, 0), design.PI(0.5, 2.5, 0.001, 0)
	for _, tt := range []struct {
		name  string
		set   DesignSettings
		g     design.Gains
		given bool
		words string
	}{
		{"slow", slotted("kv", "ks"), slow, true, "settling"},
		{"quick", slotted("kv", "ks"), quick, false, "declined"},
		{"no slot", slotted(), slow, false, "no place"},
	} {
		p := design.Proposal{Gains: tt.g}
		tt.set.feedForward(m, &p)
		ff := p.Gains.Feedforward
		if (ff != nil && ff.Speed > 0) != tt.given || !strings.Contains(p.Notes[0], tt.words) {
			t.Errorf("%s: %+v: %q", tt.name, ff, p.Notes)
		}
		if ff != nil && ff.Speed > 1/20.0+1e-12 {
			t.Errorf("%s: %g V/(rad/s), the motor takes 1/K = 0.05", tt.name, ff.Speed)
		}
	}
}

// Friction that a slow integral has to find first is worth a feed-forward, as much
// as four fifths of the lesser direction; little friction is not.
func TestFeedForwardOfFrictionHasToBeWorthIt(t *testing.T) {
	m, g := model.FirstOrder(20, 0.05, 0.005), design.PI(0.05, 1, 0.001, 0)
	sticky := &Feed{Friction: design.Friction{CoulombForward: 3, CoulombReverse: 2.5, BreakawayForward: 4, BreakawayReverse: 3.5}, Start: 40}
	little := &Feed{Friction: design.Friction{CoulombForward: 0.05, BreakawayForward: 0.06}, Start: 40}
	for _, tt := range []struct {
		name  string
		set   DesignSettings
		feed  *Feed
		want  float64
		words string
	}{
		{"sticky", slotted("kv", "ks"), sticky, 0.8 * 2.5, "takes"},
		{"little", slotted("kv", "ks"), little, 0, "not worth it"},
		{"unknown", slotted("kv", "ks"), &Feed{Start: 40}, 0, "not known"},
		{"no slot", slotted(), sticky, 0, "no place"},
	} {
		p := design.Proposal{Gains: g}
		tt.set.Feed = tt.feed
		tt.set.feedForward(m, &p)
		got := 0.0
		if ff := p.Gains.Feedforward; ff != nil {
			got = ff.StaticForward
		}
		if math.Abs(got-tt.want) > 1e-12 || !strings.Contains(p.Notes[1], tt.words) {
			t.Errorf("%s: %g V, want %g: %q", tt.name, got, tt.want, p.Notes[1])
		}
		if f := feedFact(p.Gains, p.Notes); f.Value == "" || !strings.Contains(f.Why, tt.words) {
			t.Errorf("%s: %+v", tt.name, f)
		}
	}
}

// A board with back-calculation gets the time it needs: with 0 its integral would
// wind up, and the simulation has it so.
func TestBackCalculationGetsItsTime(t *testing.T) {
	s := slotted("tt")
	s.AntiWindup = design.AntiWindupBackCalculation
	p := design.Proposal{Gains: design.PI(0.3, 6, 0.001, 0)}
	s.tracking(&p)
	if got := p.Gains.TrackingTime; math.Abs(got-0.05) > 1e-12 {
		t.Errorf("%g s, want kp/ki = 0.05 s", got)
	}
	peak := func(tt float64) float64 {
		g := p.Gains
		lo, hi := -24.0, 24.0
		g.AntiWindup, g.TrackingTime, g.UMin, g.UMax, g.SetpointWeight = design.AntiWindupBackCalculation, tt, &lo, &hi, 1
		r, err := design.SimulateLoop(model.FirstOrder(20, 0.1, 0.002), g, design.Scenario{Parts: []design.Part{{From: 440, To: 440, Duration: 2}}})
		if err != nil {
			t.Fatal(err)
		}
		m := r.Measure(0, 0, 0, 440, 0.02)
		return float64(m.Overshoot)
	}
	if none, with := peak(0), peak(p.Gains.TrackingTime); none < 5 || with > 2 {
		t.Errorf("overshoot %.1f %% without, %.1f %% with back-calculation", none, with)
	}
	s.AntiWindup, p.Gains.TrackingTime = design.AntiWindupClamp, 0
	if s.tracking(&p); p.Gains.TrackingTime != 0 {
		t.Error("a board that clamps has no such time")
	}
}
