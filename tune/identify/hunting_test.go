package identify

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gainwright/tune/design"
	"gainwright/tune/model"
)

// huntRecord is n samples at 100 Hz about a mean, of a sine in noise.
func huntRecord(rng *rand.Rand, n int, mean, f, amp, noise float64) (t, y, u []float64) {
	phase := 2 * math.Pi * rng.Float64()
	for i := range n {
		x := float64(i) * 0.01
		t = append(t, x)
		y = append(y, mean+amp*math.Sin(2*math.Pi*f*x+phase)+noise*rng.NormFloat64())
		u = append(u, 6)
	}
	return t, y, u
}

// Frequency and amplitude of a sine in noise: the scatter of both is held against
// the Cramér-Rao bounds of a single real tone in white noise (Rife and Boorstyn
// 1974, from memory): var f ≥ 24σ²/((2π)²A²Δ²N(N²−1)), var A ≥ 2σ²/N.
func TestHuntingAgainstTheToneBounds(t *testing.T) {
	const n, amp, noise, f = 150, 6.0, 2.0, 4.3
	rng := rand.New(rand.NewPCG(66, 1))
	var sf, sa, found float64
	const runs = 400
	for range runs {
		h := huntsAlone(huntRecord(rng, n, 80, f, amp, noise))
		if h == nil {
			continue
		}
		found++
		sf, sa = sf+(h.Frequency-f)*(h.Frequency-f), sa+(h.Amplitude-amp)*(h.Amplitude-amp)
	}
	if found < runs {
		t.Errorf("found in %g of %d records", found, runs)
	}
	boundF := math.Sqrt(24 * noise * noise / (4 * math.Pi * math.Pi * amp * amp * 1e-4 * n * (n*n - 1)))
	boundA := math.Sqrt(2 * noise * noise / n)
	if got := math.Sqrt(sf/found) / boundF; got > 1.25 || got < 0.8 {
		t.Errorf("frequency scatters %.2f times the bound", got)
	}
	if got := math.Sqrt(sa/found) / boundA; got > 1.25 || got < 0.8 {
		t.Errorf("amplitude scatters %.2f times the bound", got)
	}
}

// huntsAlone looks at a record with nothing known of its loop but the setpoint.
func huntsAlone(t, y, u []float64) *Hunting { return FindHunting(t, y, u, Loop{Speed: 80}) }

// Noise alone, white and through a loop with ζ 0.4 whose own swing has sixteen
// samples a period, is no hunting: at most 1 in 200 records may say so.
func TestNoiseDoesNotHunt(t *testing.T) {
	rng := rand.New(rand.NewPCG(66, 2))
	const zeta, wn = 0.4, 2 * math.Pi / 16
	a := math.Exp(-zeta * wn)
	a1, a2 := 2*a*math.Cos(wn*math.Sqrt(1-zeta*zeta)), -a*a
	for _, name := range []string{"white", "through a loop"} {
		said := 0
		for range 2000 {
			var tt, y, u []float64
			var y1, y2 float64
			for i := range 180 {
				e := rng.NormFloat64()
				v := e
				if name != "white" {
					v = a1*y1 + a2*y2 + e
				}
				y2, y1 = y1, v
				if i < 30 {
					continue
				}
				tt, y, u = append(tt, float64(i)*0.01), append(y, 20+v), append(u, 3)
			}
			if FindHunting(tt, y, u, Loop{Speed: 20}) != nil {
				said++
			}
		}
		if said > 10 {
			t.Errorf("%s noise hunts in %d of 2000 records", name, said)
		}
		t.Logf("%s: %d of 2000", name, said)
	}
}

// A proportional loop over its ultimate gain, held by the end of the drive. A
// saturation is a real describing function, so that the cycle lies where the phase
// is −180° (textbook harmonic balance; Åström and Murray, Feedback Systems, on
// describing functions, from memory): ωL + atan(ωτ) = π, L with half a sample of
// hold. Harmonic balance is within a few percent for a filtered triangle.
func TestHuntingOverTheUltimateGain(t *testing.T) {
	const k, tau, dead, period = 20.0, 0.2, 0.03, 0.001
	lo, hi := 0.0, math.Pi/dead
	for range 60 {
		w := (lo + hi) / 2
		if w*(dead+period/2)+math.Atan(w*tau) < math.Pi {
			lo = w
		} else {
			hi = w
		}
	}
	ku := math.Hypot(1, lo*tau) / k
	uMax, uMin := 9.0, 0.0
	g := design.PI(1.6*ku, 0, period, 0)
	g.UMax, g.UMin = &uMax, &uMin
	g.Feedforward = &design.Feedforward{Speed: 1 / k}
	run, err := design.SimulateLoop(model.FirstOrder(k, tau, dead), g, design.Scenario{Parts: []design.Part{{From: 90, To: 90, Duration: 4}}})
	if err != nil {
		t.Fatal(err)
	}
	h := sampled(run, 2, 10, Loop{Speed: 90, PhaseCrossover: lo})
	if h == nil {
		t.Fatal("a loop over its ultimate gain does not hunt")
	}
	if math.Abs(2*math.Pi*h.Frequency/lo-1) > 0.03 {
		t.Errorf("hunts at %.4g rad/s, the phase crossover is %.4g", 2*math.Pi*h.Frequency, lo)
	}
	if !strings.Contains(h.Cause, "phase") {
		t.Errorf("cause %q", h.Cause)
	}
	// The same record with the end of the drive known: it is there part of the time.
	if h := sampled(run, 2, 10, Loop{Speed: 90, PhaseCrossover: lo, VoltsMax: uMax}); h == nil || !strings.Contains(h.Cause, "drive at its limit") {
		t.Errorf("with the drive's limit known: %v", h)
	}
}

// Stick-slip of an integrating loop against breakaway over Coulomb friction.
func TestHuntingOfStickSlip(t *testing.T) {
	g := design.PI(0.005, 3, 0.001, 0)
	run, err := design.SimulateLoop(model.FirstOrder(20, 0.05, 0.002), g, design.Scenario{Parts: []design.Part{{From: 0.6, To: 0.6, Duration: 12}},
		Friction: design.Friction{CoulombForward: 0.3, CoulombReverse: 0.3, BreakawayForward: 0.9, BreakawayReverse: 0.9}})
	if err != nil {
		t.Fatal(err)
	}
	h := sampled(run, 2, 10, Loop{Speed: 0.6, SpeedStep: 0.05})
	if h == nil || !strings.Contains(h.Cause, "sticking") {
		t.Fatalf("stick-slip: %v", h)
	}
	// Count the breaks by hand: rises from rest.
	breaks, first, last := 0, 0.0, 0.0
	for i := 2001; i < len(run.Speed); i++ {
		if run.Speed[i-1] == 0 && run.Speed[i] != 0 {
			if breaks == 0 {
				first = run.Time[i]
			}
			breaks, last = breaks+1, run.Time[i]
		}
	}
	if want := float64(breaks-1) / (last - first); math.Abs(h.Frequency/want-1) > 0.02 {
		t.Errorf("hunts at %.4g Hz, the shaft breaks loose at %.4g Hz", h.Frequency, want)
	}
}

// What turns with the shaft is told from the loop by its frequency; where both
// would fit, both are said.
func TestHuntingCauses(t *testing.T) {
	const turns = 80 / (2 * math.Pi)
	for _, c := range []struct {
		name, want string
		f, amp     float64
		loop       Loop
	}{
		{"once a turn", "1 per turn", turns, 4, Loop{Speed: 80}},
		{"twice a turn", "2 per turn", 2 * turns, 4, Loop{Speed: 80, PhaseCrossover: 400}},
		{"both", "either may be it", turns, 4, Loop{Speed: 80, PhaseCrossover: 90}},
		{"the loop", "too little phase", 5.1, 4, Loop{Speed: 80, PhaseCrossover: 30}},
		{"counts", "steps of the counter", 5.1, 4, Loop{Speed: 80, SpeedStep: 3.5, PhaseCrossover: 200}},
		{"none of them", "not told", 5.1, 4, Loop{Speed: 80, PhaseCrossover: 200}},
		{"under a share of the setpoint", "", 5.1, 0.5, Loop{Speed: 80}},
		{"under the noise", "", 5.1, 4, Loop{Speed: 80, Noise: 3}},
		{"under half a speed step", "", 5.1, 4, Loop{Speed: 80, SpeedStep: 10}},
	} {
		rng := rand.New(rand.NewPCG(66, 3))
		ts, y, u := huntRecord(rng, 150, 80, c.f, c.amp, 0.3)
		h := FindHunting(ts, y, u, c.loop)
		switch {
		case c.want == "" && h != nil:
			t.Errorf("%s: %v", c.name, h)
		case c.want != "" && (h == nil || !strings.Contains(h.Cause, c.want) || h.Remedy == ""):
			t.Errorf("%s: got %v, want %q", c.name, h, c.want)
		}
	}
	// Two periods are too few to say, and nothing is made of nothing.
	rng := rand.New(rand.NewPCG(66, 4))
	if h := huntsAlone(huntRecord(rng, 150, 80, 1.2, 4, 0)); h != nil {
		t.Errorf("1.8 periods: %v", h)
	}
	if h := FindHunting(nil, nil, nil, Loop{}); h != nil {
		t.Errorf("no record: %v", h)
	}
	if h := huntsAlone(huntRecord(rng, 150, 80, 1.2, 0, 0)); h != nil {
		t.Errorf("a steady speed: %v", h)
	}
}

// sampled looks at every stride-th sample of a run from a time on.
func sampled(run design.Run, from float64, stride int, loop Loop) *Hunting {
	var t, y, u []float64
	for i := 0; i < len(run.Time); i += stride {
		if run.Time[i] >= from {
			t, y, u = append(t, run.Time[i]), append(y, run.Speed[i]), append(u, run.Drive[i])
		}
	}
	return FindHunting(t, y, u, loop)
}
