package design

import (
	"math"
	"testing"

	"gainwright/tune/model"
)

func plant(num, den []float64, dead float64) model.Linear {
	return model.Linear{Num: num, Den: den, DeadTime: dead}
}

// product multiplies polynomials in descending powers.
func product(ps ...[]float64) []float64 {
	out := []float64{1}
	for _, p := range ps {
		out = polyMul(out, p)
	}
	return out
}

// Worked examples of others, at the digits they were printed with.
//
//   - octave: self-test of margin.m, GNU Octave control package 3.4.0 (seen)
//   - python: control/tests/margin_test.py of python-control, commit e60e5ebc593b (seen)
//   - SIMC: Skogestad, J. Process Control 13 (2003), robustness tables and cases E
//     (from memory; each was recomputed with two libraries)
//   - Kessler: drives textbooks (from memory; recomputed)
//   - Ogata: Example 8-1 (from memory; recomputed: 18.56 % and 28.06 %)
func TestWorkedExamples(t *testing.T) {
	p := func(kp float64) Gains { return PI(kp, 0, 0, 0) }
	sampledP := func(h float64) Gains { return PI(1, 0, h, 0) }
	si := func(kc, ti, td float64) Gains { return series(kc, ti, td) }
	none := math.NaN()
	l := func(tau float64) []float64 { return []float64{tau, 1} }
	e5 := product(l(1), l(0.2), l(0.04), l(0.008))
	onError := func(g Gains) Gains { g.DerivativeOn = OnError; return g }
	cases := []struct {
		name                 string
		m                    model.Linear
		g                    Gains
		gm, pm, ms, wpc, wgc float64
		overshoot            float64
		rel                  float64
	}{
		{"octave continuous", plant([]float64{24}, []float64{1, 6, 11, 6}, 0), p(1), 2.5, 35.43, none, 3.32, 2.06, none, 5e-3},
		{"octave sampled 0.3 s", plant([]float64{24}, []float64{1, 6, 11, 6}, 0), sampledP(0.3), 1.41, 18.6, none, 2.48, 2.04, none, 5e-3},
		{"python 1", plant([]float64{1}, []float64{1, 2, 3, 4}, 0), p(1), 2, none, 1 / 0.417, 1.7321, none, none, 1e-3},
		{"python type 0", plant([]float64{2}, []float64{1, 3, 3, 1}, 0), p(1), 4, 67.6058, none, 1.7322, 0.7663, none, 3e-4},
		{"python type 2", plant([]float64{1, 0.1}, []float64{1, 1, 0, 0}, 0), p(1), none, 44.4594, none, none, 0.7907, none, 1e-4},
		{"python 200", plant([]float64{200}, []float64{1, 21, 20, 0}, 0), p(1), 2.1, none, none, 4.47213595, none, none, 1e-6},
		{"python sampled 1", plant([]float64{2}, []float64{1, 3, 2, 0}, 0), sampledP(0.01), 2.955761, 32.398492, 1 / 0.429535, 1.403725, 0.749367, none, 1e-5},
		{"python sampled 3", plant([]float64{43.426259364793175}, []float64{1, 2.5132741228718345, 39.47841760435743}, 0), sampledP(0.05), 2.3842, 18.161, 1 / 0.26953, 11.712, 8.7478, none, 1e-4},
		{"python sampled 4", plant([]float64{50000}, []float64{1, 101, 10101, 10100, 10000}, 0), sampledP(0.001), 18.8766, 26.3564, 1 / 0.406841, 9.76358, 2.32933, none, 1e-5},
		{"SIMC first order", plant([]float64{1}, l(1), 1), simcPI(params{K: 1, T: 1, L: 1, Tc: 1}), math.Pi, 90 - 90/math.Pi, 1.59, math.Pi / 2, 0.5, none, 5e-4},
		{"SIMC integrating", plant([]float64{1}, []float64{1, 0}, 1), simcIntegratingPI(params{Kv: 1, L: 1, Tc: 1}), 2.96, 46.9, 1.70, 1.49, 0.51, none, 9e-3},
		{"SIMC E1 PI", plant([]float64{1}, product(l(1), l(0.2)), 0), si(5.5, 0.8, 0), none, none, 1.56, none, none, none, 5e-3},
		{"SIMC E4 PID", plant([]float64{1}, product(l(1), l(1), l(1), l(1)), 0), si(0.5, 1.5, 1), none, none, 1.43, none, none, none, 5e-3},
		{"SIMC E5 PI", plant([]float64{1}, e5, 0), si(3.72, 1.1, 0), none, none, 1.59, none, none, none, 5e-3},
		{"SIMC E8 PI", plant([]float64{1}, product([]float64{1, 0}, l(1), l(1)), 0), si(0.33, 12, 0), none, none, 1.76, none, none, none, 5e-3},
		{"SIMC E9 PI", plant([]float64{1}, product(l(1), l(1)), 1), si(0.5, 1.5, 0), none, none, 1.61, none, none, none, 5e-3},
		{"SIMC E9 PID", plant([]float64{1}, product(l(1), l(1)), 1), si(0.5, 1, 1), none, none, 1.59, none, none, none, 5e-3},
		{"SIMC E10 PI", plant([]float64{1}, product(l(20), l(2)), 1), si(5.25, 16, 0), none, none, 1.72, none, none, none, 5e-3},
		{"SIMC E10 PID", plant([]float64{1}, product(l(20), l(2)), 1), si(10, 8, 2), none, none, 1.65, none, none, none, 5e-3},
		{"SIMC E11 PI", plant([]float64{-1, 1}, product(l(6), l(2), l(2)), 1), si(0.7, 7, 0), none, none, 1.63, none, none, none, 5e-3},
		{"SIMC double integrator", plant([]float64{1}, []float64{1, 0, 0}, 1), si(0.0625, 8, 8), none, none, 1.96, none, none, none, 5e-3},
		{"Kessler modulus optimum", plant([]float64{1}, product(l(10), l(1)), 0), modulusOptimumPI(params{K: 1, T1: 10, Ts: 1}), none, 65.5, none, none, 0.455, 4.3214, 1e-3},
		{"Ogata 8-1 retuned", plant([]float64{1}, []float64{1, 6, 5, 0}, 0), onError(ideal(18, 3.077, 0.7692)), none, none, none, none, none, 18.5599, 1e-4},
		{"Ogata 8-1 fast", plant([]float64{1}, []float64{1, 6, 5, 0}, 0), onError(ideal(39.42, 3.077, 0.7692)), none, none, none, none, none, 28.0561, 1e-4},
	}
	for _, c := range cases {
		got, err := Judge(c.m, c.g)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		for what, pair := range map[string][2]float64{
			"gain margin": {float64(got.GainMargin), c.gm}, "phase margin": {float64(got.PhaseMargin), c.pm}, "Ms": {float64(got.Ms), c.ms},
			"phase crossover": {float64(got.PhaseCrossover), c.wpc}, "gain crossover": {float64(got.Crossover), c.wgc},
			"overshoot": {float64(got.Step.Overshoot), c.overshoot},
		} {
			if !math.IsNaN(pair[1]) && !(math.Abs(pair[0]-pair[1]) <= c.rel*pair[1]) {
				t.Errorf("%s: %s: got %.8g, want %.8g", c.name, what, pair[0], pair[1])
			}
		}
	}
}

// Åström & Hägglund, PID Controllers (1995), chapter 4, and J. Process Control 14
// (2004): gains for 1/(s+1)³ and two more plants (from memory; recomputed).
func TestRulesOnPublishedPlants(t *testing.T) {
	a := 0.1
	cubed := plant([]float64{1}, product([]float64{1, 1}, []float64{1, 1}, []float64{1, 1}), 0)
	chain := plant([]float64{1}, product([]float64{1, 1}, []float64{a, 1}, []float64{a * a, 1}, []float64{a * a * a, 1}), 0)
	delayed := plant([]float64{1}, product([]float64{0.05, 1}, []float64{0.05, 1}), 1)
	facts := func(m model.Linear) facts {
		f, err := newFacts(m, 0, 0)
		if err != nil {
			t.Fatal(err)
		}
		return f
	}
	check := func(name string, g Gains, kc, ti, td, rel float64) {
		for what, pair := range map[string][2]float64{"kc": {g.Kp, kc}, "ti": {g.Ti, ti}, "td": {g.Td, td}} {
			if math.Abs(pair[0]-pair[1]) > rel*pair[1] {
				t.Errorf("%s: %s: got %.5g, want %.5g", name, what, pair[0], pair[1])
			}
		}
	}
	f := facts(cubed)
	check("Ziegler–Nichols ultimate", zieglerNicholsUltimatePID(params{Ku: f.ku, Pu: f.pu}), 4.8, 1.81, 0.45, 1e-2)
	check("Ziegler–Nichols step", zieglerNicholsStepPID(params{K: 1, T: f.tangentTau, L: f.tangentDead}), 5.5, 1.61, 0.403, 2e-3)
	f = facts(chain)
	check("AMIGO lag-dominant", amigoStepPID(params{K: 1, T: f.tau63, L: f.tangentDead}), 6.44, 0.361, 0.0367, 5e-3)
	f = facts(delayed)
	check("AMIGO delay-dominant", amigoStepPID(params{K: 1, T: f.tau63, L: f.tangentDead}), 0.242, 0.474, 0.119, 5e-3)
}
