package design

import (
	"math"
	"testing"

	"gainwright/tune/model"
)

// Without limits, counts and friction the forecast is the linear loop, whose
// metrics are checked against the reference elsewhere.
func TestSimulateLoopIsTheLinearLoop(t *testing.T) {
	for _, delay := range []float64{0, 0.0004} {
		g := PI(0.12, 8, 0.001, delay)
		want, err := Judge(bench, g)
		if err != nil {
			t.Fatal(err)
		}
		r, err := SimulateLoop(bench, g, Scenario{Parts: []Part{{100, 100, 1}}})
		if err != nil {
			t.Fatal(err)
		}
		got := r.Measure(0, 0, 0, 100, 2)
		for what, pair := range map[string][2]Value{
			"overshoot": {got.Overshoot, want.Step.Overshoot}, "rise": {got.RiseTime, want.Step.RiseTime},
			"settling": {got.SettlingTime, want.Step.SettlingTime}, "IAE": {got.IAE, want.Step.IAE},
		} {
			if math.Abs(float64(pair[0]-pair[1])) > 1e-6*(1e-3+math.Abs(float64(pair[1]))) {
				t.Errorf("delay %g: %s: got %.9g, want %.9g", delay, what, pair[0], pair[1])
			}
		}
	}
}

func TestSimulateLoopStartsAtRestAtSpeed(t *testing.T) {
	f := Friction{CoulombForward: 0.4, CoulombReverse: 0.5, BreakawayForward: 0.6, BreakawayReverse: 0.7}
	for _, disc := range []string{BackwardEuler, Tustin, Incremental} {
		for _, speed := range []float64{150, -80} {
			g := PI(0.12, 8, 0.001, 0.0003)
			g.Discretisation, g.SetpointWeight = disc, 0.4
			g.Feedforward = &Feedforward{Speed: 0.01, StaticForward: 0.3, StaticReverse: 0.2}
			r, err := SimulateLoop(bench, g, Scenario{Parts: []Part{{speed, speed, 0.3}}, StartSpeed: speed, Friction: f})
			if err != nil {
				t.Fatal(err)
			}
			for i, y := range r.Speed {
				if math.Abs(y-speed) > 1e-6 {
					t.Fatalf("%s at %g rad/s: sample %d has %.9g", disc, speed, i, y)
				}
			}
		}
	}
}

// A proportional loop against friction: the closed form of the first order.
// With u = kp·(r − y) − Fc the steady speed is K(kp·r − Fc)/(1 + K·kp).
func TestSimulateLoopWithFriction(t *testing.T) {
	const k, kp, r, fc = 20.0, 0.3, 50.0, 2.0
	m := model.FirstOrder(k, 0.05, 0)
	g := PI(kp, 0, 0.001, 0)
	run, err := SimulateLoop(m, g, Scenario{Parts: []Part{{r, r, 1}}, Friction: Friction{CoulombForward: fc, CoulombReverse: fc}})
	if err != nil {
		t.Fatal(err)
	}
	want := k * (kp*r - fc) / (1 + k*kp)
	if got := run.Speed[len(run.Speed)-1]; math.Abs(got-want) > 1e-9*want {
		t.Errorf("steady speed %.9g rad/s, want %.9g", got, want)
	}
	// Below breakaway nothing moves; kp·r is 1.5 V against 2 V.
	run, err = SimulateLoop(m, g, Scenario{Parts: []Part{{5, 5, 0.5}}, Friction: Friction{CoulombForward: 1, BreakawayForward: 2}})
	if err != nil {
		t.Fatal(err)
	}
	for i, y := range run.Speed {
		if y != 0 {
			t.Fatalf("the shaft moved at sample %d under a drive below breakaway", i)
		}
	}
}

// With an integral, breakaway above Coulomb friction and a setpoint near zero a
// loop hunts (stick-slip), which it must not do without friction.
func TestSimulateLoopHunts(t *testing.T) {
	g := PI(0.05, 3, 0.001, 0)
	still := Scenario{Parts: []Part{{3, 3, 4}}}
	run, err := SimulateLoop(bench, g, still)
	if err != nil {
		t.Fatal(err)
	}
	if rms := run.SteadyRMS(3); rms > 1e-3 {
		t.Errorf("without friction the steady RMS is %.3g rad/s", rms)
	}
	still.Friction = Friction{CoulombForward: 0.3, CoulombReverse: 0.3, BreakawayForward: 0.6, BreakawayReverse: 0.6}
	still.RadPerCount, still.Window = 2*math.Pi/2000, 0.001
	run, err = SimulateLoop(bench, g, still)
	if err != nil {
		t.Fatal(err)
	}
	if rms := run.SteadyRMS(3); !(rms > 1e-3) {
		t.Errorf("with stick and counts the steady RMS is %.3g rad/s: nothing hunts", rms)
	}
}

func TestSimulateLoopKeepsLimitsAndWindup(t *testing.T) {
	lo, hi := -6.0, 6.0
	g := PI(0.12, 8, 0.001, 0)
	g.UMin, g.UMax = &lo, &hi
	sc := Scenario{Parts: []Part{{250, 250, 0.5}, {0, 0, 0.5}}}
	over := map[string]float64{}
	for _, aw := range []string{AntiWindupNone, AntiWindupClamp, AntiWindupBackCalculation} {
		g.AntiWindup, g.TrackingTime = aw, 0.015
		run, err := SimulateLoop(bench, g, sc)
		if err != nil {
			t.Fatal(err)
		}
		for i, u := range run.Drive {
			if u > hi || u < lo {
				t.Fatalf("%s: drive %g V at sample %d", aw, u, i)
			}
		}
		over[aw] = float64(run.Measure(0, 0.5, 0, 250, 5).Overshoot)
	}
	if !(over[AntiWindupClamp] < over[AntiWindupNone]-3 && over[AntiWindupBackCalculation] < over[AntiWindupNone]-3) {
		t.Errorf("overshoot %v: anti-windup brings nothing", over)
	}
}

// Counting must not lose angle: the sum of what the loop sees is the angle to
// within one count.
func TestCounterKeepsTheAngle(t *testing.T) {
	c := counter{perSpeed: 0.001 / (2 * math.Pi / 500)}
	var seen, real float64
	for k := range 5000 {
		v := 40 * math.Sin(float64(k)*0.01)
		seen += c.see(v)
		real += v
	}
	if math.Abs(seen-real)*c.perSpeed > 1 {
		t.Errorf("%.3g counts were lost", (seen-real)*c.perSpeed)
	}
}

func TestSimulateBandHoldsTheNominalRun(t *testing.T) {
	m := bench
	m.CI95 = map[string][2]float64{"gain": {44, 49}, "tau": {0.033, 0.0375}, "dead_time": {0.0012, 0.0018}}
	g := PI(0.12, 8, 0.001, 0)
	sc := Scenario{Parts: []Part{{100, 100, 0.4}}}
	run, err := SimulateLoop(m, g, sc)
	if err != nil {
		t.Fatal(err)
	}
	b, err := SimulateBand(m, g, sc, Spread{Seed: 4}, 200, 0, 0, 0, 100, 2)
	if err != nil {
		t.Fatal(err)
	}
	step := run.Measure(0, 0, 0, 100, 2)
	if !(b.OvershootLow < float64(step.Overshoot) && float64(step.Overshoot) < b.OvershootTop) {
		t.Errorf("overshoot %.4g %% outside its band %.4g to %.4g", step.Overshoot, b.OvershootLow, b.OvershootTop)
	}
	for k, y := range run.Speed {
		if y < b.Low[k]-1e-9 || y > b.High[k]+1e-9 {
			t.Fatalf("sample %d: %.6g outside %.6g to %.6g", k, y, b.Low[k], b.High[k])
		}
	}
}

func TestScenarioRefuses(t *testing.T) {
	g := PI(0.1, 1, 0.001, 0)
	for name, sc := range map[string]Scenario{
		"empty":             {},
		"no duration":       {Parts: []Part{{1, 1, 0}}},
		"speed not finite":  {Parts: []Part{{math.NaN(), 1, 1}}},
		"negative friction": {Parts: []Part{{1, 1, 1}}, Friction: Friction{CoulombForward: -1}},
		"endless":           {Parts: []Part{{1, 1, 1e7}}},
	} {
		if _, err := SimulateLoop(bench, g, sc); err == nil {
			t.Errorf("%s: not refused", name)
		}
	}
	g.SampleTime = 0
	if _, err := SimulateLoop(bench, g, Scenario{Parts: []Part{{1, 1, 1}}}); err == nil {
		t.Error("a continuous law was run as a sampled one")
	}
}

// With the drive 1/K of its speed fed forward a loop without integral comes to the
// setpoint all the same (motor equation: a steady speed needs ω/K volts), in the
// unit step of the margins as in the simulation.
func TestFeedForwardIsInTheUnitStep(t *testing.T) {
	m := model.FirstOrder(20, 0.05, 0)
	g := PI(0.05, 0, 1e-3, 0)
	if y := mustStep(t, m, g); math.Abs(y-0.5) > 1e-3 {
		t.Errorf("a proportional loop alone comes to %.4f, K·kp/(1 + K·kp) is 0.5", y)
	}
	g.Feedforward = &Feedforward{Speed: 1 / 20.0, StaticForward: 3}
	if y := mustStep(t, m, g); math.Abs(y-1) > 1e-3 {
		t.Errorf("with feed-forward it comes to %.4f, not 1", y)
	}
}

func mustStep(t *testing.T, m model.Linear, g Gains) float64 {
	t.Helper()
	y, err := unitStep(m, g, 1, false)
	if err != nil {
		t.Fatal(err)
	}
	return y[len(y)-1]
}
