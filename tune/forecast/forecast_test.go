package forecast

import (
	"errors"
	"math"
	"testing"
	"time"

	"gainwright/safety"
	"gainwright/tune/model"
)

func volts(from, to float64, d time.Duration) safety.Segment {
	return safety.Segment{Mode: safety.ModeVolts, From: from, To: to, Duration: d}
}

func plan(s ...safety.Segment) safety.Plan { return safety.Plan{Name: "test", Segments: s} }

func near(t *testing.T, what string, got model.Value, want, rel float64) {
	t.Helper()
	if !(math.Abs(float64(got)-want) <= rel*math.Abs(want)) {
		t.Errorf("%s: got %.8g, want %.8g", what, got, want)
	}
}

// The 12 V motor of a table of motor relations (synthetic numbers): R 2.3 Ω,
// Ke 0.0213 V·s/rad, J 7.1e-6 kg·m². The expected values are closed forms of the
// motor's equations with L and viscous friction left out:
//
//	ω(t) = V/Ke·(1 − e^(−t/τ)), i = V/R·e^(−t/τ), heat = V²τ/(2R), and as much
//	again is stored: ½Jω² = V²τ/(2R).
func TestAgainstClosedFormsOfTheMotor(t *testing.T) {
	const r, ke, j, v = 2.3, 0.0213, 7.1e-6, 12.0
	tau := j * r / (ke * ke)
	k := Known{Resistance: r, Ke: ke, Inertia: j, BusNominal: 12, BusCapacitance: 1e-3, CanBrake: true}
	f, err := Of(plan(volts(v, v, time.Second)), k)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "top speed", f.TopSpeed, v/ke, 1e-9)
	near(t, "peak current", f.PeakCurrent, v/r, 1e-12)
	near(t, "heat", f.Heat, v*v*tau/(2*r), 0.03) // steps of 1 ms against 36 ms
	near(t, "energy", f.Energy, v*v*tau/r, 0.03)
	near(t, "turns", f.Turns, v/ke*(1-tau)/(2*math.Pi), 1e-3)
	if f.BusRise != 0 { // nothing brakes, and off is a coast
		t.Errorf("bus rise %g V of a motor that only speeds up", f.BusRise)
	}
	if f.Duration != time.Second || f.Band != bandNameplate {
		t.Errorf("duration %v, band %g", f.Duration, f.Band)
	}
	for i, at := range f.Line.Time {
		want := v / ke * -math.Expm1(-at/tau)
		if math.Abs(f.Line.Speed[i]-want) > 1e-9*v/ke {
			t.Fatalf("line at %g s: got %.9g, want %.9g", at, f.Line.Speed[i], want)
		}
	}
	// The same motor as a fitted model gives the same, and finds the inertia.
	m := model.FirstOrder(1/ke, tau, 0)
	m.CI95 = map[string][2]float64{"gain": {0.9 / ke, 1.1 / ke}}
	g, err := Of(plan(volts(v, v, time.Second)), Known{Model: &m, Resistance: r, BusNominal: 12, BusCapacitance: 1e-3, CanBrake: true})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "top speed by model", g.TopSpeed, float64(f.TopSpeed), 1e-9)
	near(t, "bus rise by model", g.BusRise, float64(f.BusRise), 1e-9)
	near(t, "heat by model", g.Heat, float64(f.Heat), 1e-9)
	if math.Abs(g.Band-0.1) > 1e-12 {
		t.Errorf("band %g, want the ±10 %% of the fit", g.Band)
	}
}

// From the speed Ω at the drive Ke·Ω a drop to half of that drive gives back the
// most: ω(t) = Ω/2·(1 + e^(−t/τ)), i = −Ke·Ω/(2R)·e^(−t/τ), and ∫ u·|i| dt =
// Ke²Ω²τ/(4R) = ½·(½JΩ²). Down to no drive the winding is shorted and gives back
// nothing.
func TestBrakingGivesBackHalfAtMost(t *testing.T) {
	const r, ke, j, v, farads = 2.3, 0.0213, 7.1e-6, 12.0, 1e-3
	k := Known{Resistance: r, Ke: ke, Inertia: j, BusNominal: 12, BusCapacitance: farads, CanBrake: true}
	f, err := Of(plan(volts(v, v, time.Second), volts(v/2, v/2, time.Second)), k)
	if err != nil {
		t.Fatal(err)
	}
	energy := j * (v / ke) * (v / ke) / 4
	near(t, "bus rise", f.BusRise, math.Sqrt(144+2*energy/farads)-12, 0.03) // steps of 1 ms against 36 ms
	if f, err = Of(plan(volts(v, v, time.Second), volts(0, 0, time.Second)), k); err != nil || f.BusRise > 1e-9 {
		t.Errorf("to no drive: bus rise %g V, %v", f.BusRise, err)
	}
	k.Resistance = 0 // then all of ½JΩ² is the bound
	if f, err = Of(plan(volts(v, v, time.Second)), k); err != nil {
		t.Fatal(err)
	}
	near(t, "bound of the bus rise", f.BusRise, math.Sqrt(144+4*energy/farads)-12, 1e-9)
}

func TestFrictionLowersTheTopSpeedOnly(t *testing.T) {
	m := model.FirstOrder(50, 0.03, 0.002)
	k := Known{Model: &m, CoulombForward: 1, CoulombReverse: 1.5, BreakawayForward: 2, BreakawayReverse: 2, CanBrake: true, SupplyCanSink: true}
	f, err := Of(plan(volts(6, 6, time.Second)), k)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "top speed", f.TopSpeed, 250, 1e-9)
	near(t, "unloaded", f.TopSpeedUnloaded, 300, 1e-9)
	// From 250 rad/s at K·Fc/τ = 50·1/0.03 rad/s².
	near(t, "coasting", f.CoastTurns, 250*250/(2*50*1/0.03)/(2*math.Pi), 1e-9)
	if f.BusRise != 0 {
		t.Errorf("bus rise %g V at a supply that can sink", f.BusRise)
	}
	for what, v := range map[string]model.Value{"peak current": f.PeakCurrent, "heat": f.Heat, "energy": f.Energy} {
		if v.Known() {
			t.Errorf("%s is %g without a resistance", what, v)
		}
	}
	still, err := Of(plan(volts(1.9, 1.9, time.Second)), k)
	if err != nil {
		t.Fatal(err)
	}
	if still.TopSpeed != 0 || still.Turns != 0 || still.TopSpeedUnloaded == 0 {
		t.Errorf("below breakaway: %+v", still)
	}
}

// A breakaway ramp ends at the first counts; the unloaded forecast does not
// count on that.
func TestUntilMotionEndsTheRamp(t *testing.T) {
	m := model.FirstOrder(50, 0.03, 0)
	k := Known{Model: &m, CoulombForward: 0.8, BreakawayForward: 1, RadPerCount: 2 * math.Pi / 2000}
	ramp := volts(0, 5, 5*time.Second)
	ramp.Until = safety.Until{Kind: safety.UntilMotion, Counts: 20}
	f, err := Of(plan(ramp), k)
	if err != nil {
		t.Fatal(err)
	}
	if f.TopSpeed > 15 || f.TopSpeed == 0 {
		t.Errorf("top speed %g rad/s of a ramp that ends at 20 counts", f.TopSpeed)
	}
	if f.TopSpeedUnloaded < 200 {
		t.Errorf("unloaded top speed %g rad/s: the whole ramp brings 250", f.TopSpeedUnloaded)
	}
}

func TestClosedLoopPlan(t *testing.T) {
	m := model.FirstOrder(50, 0.03, 0)
	k := Known{Model: &m, Resistance: 2, LoopTau: 0.02, LoopOvershoot: 0.1, CoulombForward: 0.5}
	f, err := Of(plan(safety.Segment{Mode: safety.ModeSpeed, From: 100, To: 100, Duration: time.Second}), k)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "top speed", f.TopSpeed, 110, 1e-9)
	near(t, "turns", f.Turns, 100*(1-0.02)/(2*math.Pi), 1e-3)
	// In the steady state i·R is the friction voltage.
	last := f.Line.Drive[len(f.Line.Drive)-1]
	near(t, "steady drive", model.Value(last), 100/50.0+0.5, 1e-6)
}

func TestLockedPlanHeats(t *testing.T) {
	p := plan(volts(3, 3, 2*time.Second))
	p.Locked = true
	f, err := Of(p, Known{Resistance: 1.5, Ke: 0.02})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "heat", f.Heat, 3*3/1.5*2, 1e-9)
	near(t, "peak current", f.PeakCurrent, 2, 1e-12)
	if f.TopSpeed != 0 || f.Turns != 0 {
		t.Errorf("a held shaft turns: %+v", f)
	}
	near(t, "top speed if the lock slips", f.TopSpeedUnloaded, 3/0.02, 1e-6)
}

func TestForecastRefuses(t *testing.T) {
	good := plan(volts(1, 1, time.Second))
	if _, err := Of(good, Known{}); !errors.Is(err, ErrUnknown) {
		t.Errorf("nothing known: got %v", err)
	}
	amps := model.FirstOrder(1, 1, 0)
	amps.InputUnit = model.InputAmps
	if _, err := Of(good, Known{Model: &amps}); !errors.Is(err, ErrUnknown) {
		t.Errorf("model in A: got %v", err)
	}
	k := Known{Ke: 0.02}
	for name, p := range map[string]safety.Plan{
		"empty": plan(), "no duration": plan(volts(1, 1, 0)), "not finite": plan(volts(math.Inf(1), 1, time.Second)),
		"no mode": plan(safety.Segment{From: 1, To: 1, Duration: time.Second}),
	} {
		if _, err := Of(p, k); err == nil {
			t.Errorf("%s: not refused", name)
		}
	}
}

// Without inertia the current is bounded by a stalled start and a reversal.
func TestNameplateBoundsTheCurrent(t *testing.T) {
	f, err := Of(plan(volts(6, 6, 100*time.Millisecond), volts(-6, -6, 100*time.Millisecond)), Known{VoltsRated: 12, SpeedMax: 600, Resistance: 2})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "peak current", f.PeakCurrent, 6, 0.01) // (6 + Ke·300)/2 with Ke = 12/600
	if f.BusRise != 0 || !f.TopSpeed.Known() {
		t.Errorf("%+v", f)
	}
}
