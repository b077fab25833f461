package bench

import (
	"math"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/protocol/firmware/emulate"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/job"
)

// layerCeiling is the speed that the limiters are to keep, in rad/s; the plan that
// is driven would take the shaft to almost twice as much.
const (
	layerCeiling = 200.0
	layerVolts   = 17.0
)

// topSpeed drives a plan past the ceiling on a board and returns the highest speed
// that its telemetry shows. The board judges where its limit is the ceiling, the
// console where its envelope has it; where one does not, its limit is far away.
func topSpeed(t *testing.T, v *Virtual, r rig.Rig, l Layers) (top float64, end safety.RunEnded) {
	t.Helper()
	r.Limits.Speed = 0
	r.Motor.SpeedMax = 3800
	if l.Board {
		r.Motor.SpeedMax = layerCeiling * 60 / (2 * math.Pi)
	}
	text := job.NameplateText(r)
	r, err := rig.Parse("layers (nameplate)", text)
	if err != nil {
		t.Fatal(err)
	}
	h := trialHands{Hands: v.Hands(nil), console: l.Console, env: func(env safety.Envelope) safety.Envelope {
		if !l.Console {
			return permissive(env)
		}
		env.SpeedMax = layerCeiling
		return env
	}}
	j := job.New(h, job.Options{Rig: r, RigText: text, Version: "test"})
	for _, s := range []job.StepID{job.StepPort, job.StepIdentity, job.StepCount, job.StepSign, job.StepStop, job.StepSilence} {
		if err := j.Do(s); err != nil {
			t.Fatalf("%v: %s: %v", l, s, err)
		}
	}
	plan := safety.Plan{Name: "too far", Segments: []safety.Segment{
		{Mode: safety.ModeVolts, From: 0, To: layerVolts, Duration: 300 * time.Millisecond},
		{Mode: safety.ModeVolts, From: layerVolts, To: layerVolts, Duration: 700 * time.Millisecond}}}
	res, err := h.Run(job.Run{Plan: plan})
	if err != nil {
		t.Fatalf("%v: %v", l, err)
	}
	rest, err := h.Watch(time.Second)
	if err != nil {
		t.Fatal(err)
	}
	for _, s := range res.Samples {
		top = math.Max(top, math.Abs(float64(s.Speed)))
	}
	for _, s := range rest {
		top = math.Max(top, math.Abs(float64(s.Speed)))
	}
	return top, *v.s.lastEnd
}

// keepLayers runs the cases on boards that far makes.
func keepLayers(t *testing.T, baud int, far func() FarEnd, cases ...Layers) {
	t.Helper()
	r, _ := firmwareRig(t)
	for _, l := range cases {
		v := NewHosted(far(), baud, time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
		top, end := topSpeed(t, v, r, l)
		t.Logf("%-22s top %.1f of %.0f rad/s, %v %v", l, top, layerCeiling, end.Reason, end.Cause)
		if kept := top <= layerCeiling*(1+SlackAlone); kept != (l.Board || l.Console) {
			t.Errorf("%v: top %.1f rad/s, ceiling %.0f", l, top, layerCeiling)
		}
	}
}

// With either limiter alone a plan that goes too far is stopped at the ceiling and
// the wire's delay; with none it is not. On firmware, whose limiter is that of
// protocol/firmware, built for this machine and on an emulated chip.
func TestLayersOnTheHostBuild(t *testing.T) {
	t.Parallel()
	keepLayers(t, 115200, func() FarEnd { return emulate.Host(t, false) }, BothLayers, Layers{Board: true}, Layers{Console: true}, Layers{})
}

// Both together are left to the host build: the earlier of the two stops, which
// each of them shows here.
func TestLayersOnATmega328P(t *testing.T) {
	if testing.Short() {
		t.Skip("three starts of an emulated chip")
	}
	t.Parallel()
	keepLayers(t, 115200, func() FarEnd { return emulate.ATmega328P(t, "m328-sim") }, Layers{Board: true}, Layers{Console: true}, Layers{})
}

func TestLayersOnASimulatedRig(t *testing.T) {
	cfg := trialRig(t)
	r, _ := firmwareRig(t)
	for _, l := range []Layers{BothLayers, {Board: true}, {Console: true}, {}} {
		v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
		top, end := topSpeed(t, v, r, l)
		t.Logf("%-22s top %.1f of %.0f rad/s, %v %v", l, top, layerCeiling, end.Reason, end.Cause)
		if kept := top <= layerCeiling*(1+SlackAlone); kept != (l.Board || l.Console) {
			t.Errorf("%v: top %.1f rad/s, ceiling %.0f", l, top, layerCeiling)
		}
	}
}
