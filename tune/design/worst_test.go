package design

import (
	"math"
	"testing"

	"gainwright/tune/model"
)

func TestWorstCaseIsRepeatableAndOrdered(t *testing.T) {
	p := mustChoose(t, bench, Options{SampleTime: 0.001})
	m := bench
	m.CI95 = map[string][2]float64{"gain": {44, 49}, "tau": {0.033, 0.0375}, "tau2": {0.0004, 0.0006}, "dead_time": {0.0012, 0.0018}}
	s := Spread{Seed: 5, InertiaMin: 0.5, InertiaMax: 3, WarmMin: -20, WarmMax: 60, MagnetPerKelvin: -0.002}
	a, err := WorstCase(m, p.Gains, s)
	if err != nil {
		t.Fatal(err)
	}
	b, err := WorstCase(m, p.Gains, s)
	if err != nil {
		t.Fatal(err)
	}
	if a.Ms != b.Ms || a.PhaseMargin != b.PhaseMargin || a.Overshoot != b.Overshoot || a.Draws != DrawsMin {
		t.Errorf("the same seed gave %+v and %+v", a, b)
	}
	if !(a.Ms > p.Margins.Ms && a.Margins.Ms >= a.Ms && a.PhaseMargin < p.Margins.PhaseMargin) {
		t.Errorf("nominal Ms %.4g PM %.4g, worst of 95 %% %.4g and %.4g, worst draw %.4g: not in order",
			p.Margins.Ms, p.Margins.PhaseMargin, a.Ms, a.PhaseMargin, a.Margins.Ms)
	}
}

// The spread of a first-order gain alone is known in closed form: half the
// inertia of an integrating motor is twice its gain.
func TestWorstCaseAgainstCorners(t *testing.T) {
	m := model.Integrating(800, 0.002)
	g := PI(0.15, 1, 0.001, 0)
	w, err := WorstCase(m, g, Spread{Seed: 1, InertiaMin: 0.5, InertiaMax: 2})
	if err != nil {
		t.Fatal(err)
	}
	corner, err := JudgeFrequency(model.Integrating(1600, 0.002), g)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(float64(w.Margins.Ms-corner.Ms)) > 1e-9 {
		t.Errorf("worst Ms %.9g, the corner has %.9g", w.Margins.Ms, corner.Ms)
	}
}

// The 95 % value of Ms under a normal spread of one parameter is Ms at its 95 %
// quantile, as long as Ms rises with it: here the gain, z = 1.645.
func TestWorstCaseAgainstQuantile(t *testing.T) {
	m := model.FirstOrder(20, 0.05, 0.004)
	g := PI(0.25, 5, 0.001, 0)
	const sd = 2.0
	w, err := WorstCase(m, g, Spread{Seed: 3, Draws: 6000, Names: []string{"gain", "offset"}, Values: []float64{20, 3}, Cov: [][]float64{{sd * sd, 0.1}, {0.1, 1}}})
	if err != nil {
		t.Fatal(err)
	}
	at, err := JudgeFrequency(model.FirstOrder(20+1.6449*sd, 0.05, 0.004), g)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(float64(w.Ms/at.Ms-1)) > 5e-3 {
		t.Errorf("95 %% of Ms is %.5g by draws, %.5g by the quantile", w.Ms, at.Ms)
	}
}

func TestProposeFor95KeepsTheBound(t *testing.T) {
	s := Spread{Seed: 2, InertiaMin: 0.5, InertiaMax: 3, GainMin: 0.9, GainMax: 1.1}
	p, w, err := ProposeFor95(bench, Options{SampleTime: 0.001}, s)
	if err != nil {
		t.Fatal(err)
	}
	if p.Refused != "" || w.Ms > DefaultMsMax*1.001 || w.Ms < DefaultMsMax*0.97 {
		t.Errorf("refused %q, Ms of 95 %% is %.5g: want just under %g", p.Refused, w.Ms, DefaultMsMax)
	}
	plain := mustChoose(t, bench, Options{SampleTime: 0.001})
	if p.Gains.Ki >= plain.Gains.Ki {
		t.Errorf("ki %.4g for the range, %.4g for one motor: the range must cost something", p.Gains.Ki, plain.Gains.Ki)
	}
}

func TestVaryAgainstTheMotor(t *testing.T) {
	motor := model.Motor{R: 2.3, L: 0.0011, Ke: 0.0213, Kt: 0.0213, J: 7.1e-6}
	hot := motor.Warm(60, -0.002)
	hot.J *= 2
	want := hot.Linearise(1, 0.001)
	got := vary(motor.Linearise(1, 0.001), 2, 1, 60, -0.002)
	for _, w := range []float64{0.1, 30, 2000} {
		a, b := got.At(w), want.At(w)
		if d := a/b - 1; math.Hypot(real(d), imag(d)) > 1e-9 {
			t.Errorf("ω = %g rad/s: got %v, the motor's equations give %v", w, a, b)
		}
	}
}

func TestSpreadRefuses(t *testing.T) {
	g := PI(0.1, 1, 0.001, 0)
	for name, s := range map[string]Spread{
		"range upside down":   {InertiaMin: 3, InertiaMax: 1},
		"negative inertia":    {InertiaMin: -1, InertiaMax: 1},
		"ragged covariance":   {Names: []string{"gain", "tau"}, Values: []float64{1, 1}, Cov: [][]float64{{1, 0}, {0}}},
		"names do not fit":    {Names: []string{"gain"}, Values: []float64{1, 1}, Cov: [][]float64{{1, 0}, {0, 1}}},
		"negative covariance": {Names: []string{"gain"}, Values: []float64{1}, Cov: [][]float64{{-1}}},
	} {
		if _, err := WorstCase(bench, g, s); err == nil {
			t.Errorf("%s: not refused", name)
		}
	}
}

func BenchmarkWorstCase(b *testing.B) {
	m := bench
	m.CI95 = map[string][2]float64{"gain": {44, 49}, "tau": {0.033, 0.0375}, "dead_time": {0.0012, 0.0018}}
	ps, _, err := Propose(m, Options{Rule: RuleLargestKi, SampleTime: 0.001})
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if _, err := WorstCase(m, ps[0].Gains, Spread{InertiaMin: 0.5, InertiaMax: 3}); err != nil {
			b.Fatal(err)
		}
	}
}
