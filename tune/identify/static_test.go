package identify

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"gainwright/tune/trace"
)

// stairs makes levels of a motor with the given static numbers: by definition
// speed = K·(V − Vc·sign V) where that does not change its sign.
func stairs(k, forward, reverse, noise, bend float64, volts []float64, rng *rand.Rand) []Level {
	var out []Level
	for _, v := range volts {
		w := 0.0
		switch {
		case v > forward:
			w = k * (v - forward) * (1 - bend*(v-forward))
		case v < -reverse:
			w = k * (v + reverse)
		}
		if w != 0 {
			w += noise / 10 * rng.NormFloat64()
		}
		out = append(out, Level{Volts: v, Speed: w, SpeedSD: noise, N: 100, Settled: true})
	}
	return out
}

func TestStaircase(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 8))
	volts := []float64{0.5, 2, 4, 6, 8, 10, 8, 6, 4, 2, -2, -4, -6, -8, -6, -4, -2}
	s, err := FitStaircase(stairs(21.4, 1.4, 1.6, 0.5, 0, volts, rng))
	if err != nil {
		t.Fatal(err)
	}
	within(t, "gain", s.Gain, 21.4, 0.005)
	within(t, "forward friction", s.CoulombForward, 1.4, 0.03)
	within(t, "reverse friction", s.CoulombReverse, 1.6, 0.03)
	if math.Abs(s.Gain-21.4) > 4*s.GainSD || math.Abs(s.CoulombForward-1.4) > 4*s.CoulombForwardSD {
		t.Errorf("gain %g ± %g, forward friction %g ± %g", s.Gain, s.GainSD, s.CoulombForward, s.CoulombForwardSD)
	}
	if s.Stuck != 1 || s.Used != 16 || len(s.Remarks) != 0 || math.Abs(s.Nonlinearity) > 0.03 || math.Abs(s.Hysteresis) > 0.01 {
		t.Errorf("%+v", s)
	}
	bent, err := FitStaircase(stairs(21.4, 1.4, 1.6, 0.5, 0.04, volts[:10], rng))
	if err != nil {
		t.Fatal(err)
	}
	// Slope k·(1 − 2·bend·(v − Vc)) falls from 0.952 at 2 V to 0.312 at 10 V.
	if bent.Nonlinearity > -0.5 || len(bent.Remarks) == 0 || !math.IsNaN(bent.CoulombReverse) {
		t.Errorf("bent: %+v", bent)
	}
	if _, err := FitStaircase(stairs(21.4, 1.4, 1.6, 0.5, 0, []float64{0.5, 1, 2}, rng)); !errors.Is(err, ErrData) {
		t.Errorf("one level that turns: %v", err)
	}
	same := []Level{{Volts: 5, Speed: 50, N: 9}, {Volts: 5, Speed: 51, N: 9}, {Volts: 5, Speed: 52, N: 9}}
	if _, err := FitStaircase(same); !errors.Is(err, ErrData) {
		t.Errorf("one voltage only: %v", err)
	}
}

func TestPlateausAreFoundAndJudged(t *testing.T) {
	r := zooRig{gain: 20, tau: 0.05, noise: 0.5}
	var u []float64
	for _, v := range []float64{2, 4, 6, 4} {
		for range 300 {
			u = append(u, v)
		}
	}
	tr := r.run(rand.New(rand.NewPCG(2, 2)), u, 0.002)
	levels := Plateaus(tr, 0.4, 0.01)
	if len(levels) != 4 {
		t.Fatalf("%d levels, want 4", len(levels))
	}
	for i, l := range levels {
		within(t, "speed", l.Speed, 20*l.Volts, 0.005)
		if !l.Settled || l.N < 100 {
			t.Errorf("level %d: %+v", i, l)
		}
	}
	// Ten times as slow, the same dwell does not settle.
	r.tau = 0.5
	slow := Plateaus(r.run(rand.New(rand.NewPCG(2, 2)), u, 0.002), 0.4, 0.01)
	for i, l := range slow[1:] {
		if l.Settled {
			t.Errorf("level %d counts as settled after 1.2 time constants: %+v", i+1, l)
		}
	}
}

func TestBreakaway(t *testing.T) {
	tr := &trace.Trace{RadPerCount: 2 * math.Pi / 2000}
	pos := 0.0
	for i := range 1000 {
		v := 0.003 * float64(i)
		if v > 1.4 {
			pos += 0.002 * (v - 1)
		}
		count := math.Floor(pos / tr.RadPerCount)
		if i == 100 { // one count of play, back again
			count++
		}
		tr.Time = append(tr.Time, 0.001*float64(i))
		tr.Voltage = append(tr.Voltage, v)
		tr.Speed = append(tr.Speed, 0)
		tr.Counts = append(tr.Counts, count)
	}
	b, err := FindBreakaway(tr, 4*tr.RadPerCount)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(b.Volts-1.4) > 0.03 {
		t.Errorf("breakaway %g V at %g s, want 1.4 V", b.Volts, b.At)
	}
	if _, err := FindBreakaway(tr.Slice(0, 400), 4*tr.RadPerCount); !errors.Is(err, ErrData) {
		t.Errorf("no motion: %v", err)
	}
	s := SpreadOf([]Breakaway{{Volts: -1.4}, {Volts: -1.6}})
	if s.Mean != 1.5 || s.Min != 1.4 || s.Max != 1.6 || math.Abs(s.SD-math.Sqrt(0.02)) > 1e-12 {
		t.Errorf("%+v", s)
	}
}

func TestElectrical(t *testing.T) {
	tr := &trace.Trace{}
	rng := rand.New(rand.NewPCG(9, 9))
	w := 0.0
	for i := range 400 {
		v := 6.0
		if i/50%2 == 1 {
			v = 10
		}
		// R 1.12 ohm, Ke = Kt 0.0385, J·R/(Kt·Ke) 30 ms, friction 0.3 A.
		current := (v - 0.0385*w) / 1.12
		w += 0.002 / 0.030 * ((v-0.3*1.12)/0.0385 - w)
		tr.Time = append(tr.Time, 0.002*float64(i))
		tr.Voltage = append(tr.Voltage, v)
		tr.Current = append(tr.Current, current+0.02*rng.NormFloat64())
		tr.Speed = append(tr.Speed, (v-1.12*current)/0.0385+0.2*rng.NormFloat64())
	}
	e, err := FitElectrical(tr)
	if err != nil {
		t.Fatal(err)
	}
	within(t, "resistance", e.Resistance, 1.12, 0.02)
	within(t, "Ke", e.Ke, 0.0385, 0.02)
	tr.Current = nil
	if _, err := FitElectrical(tr); !errors.Is(err, ErrData) {
		t.Errorf("without current: %v", err)
	}
}
