package design

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"gainwright/tune/model"
)

// The law, sample by sample, is the difference equation of its transfer
// function (which another test ties to the frequency response).
func TestLawIsItsTransferFunction(t *testing.T) {
	for _, disc := range []string{BackwardEuler, ForwardEuler, Tustin, Incremental} {
		g := Gains{
			Form: FormParallel, Kp: 0.3, Ki: 40, Kd: 0.002, DerivativeFilter: 0.003, SetpointWeight: 1,
			SampleTime: 0.001, Discretisation: disc, DerivativeOn: OnError,
		}
		num, den := g.TransferFunction()
		r := newRand(11)
		l := newLaw(g)
		var e, u []float64
		for k := range 200 {
			e = append(e, r.NormFloat64())
			want := 0.0
			for i, b := range num {
				if k-i >= 0 {
					want += b * e[k-i]
				}
			}
			for i, a := range den[1:] {
				if k-i-1 >= 0 {
					want -= a * u[k-i-1]
				}
			}
			want /= den[0]
			u = append(u, want)
			if got := l.next(e[k], 0, 0); math.Abs(got-want) > 1e-9*(1+math.Abs(want)) {
				t.Fatalf("%s: sample %d: got %.12g, want %.12g", disc, k, got, want)
			}
		}
	}
}

// What the margins mean: a little less than each keeps the loop stable, a little
// more does not. Resonant plants bring loops with several crossovers.
func TestMarginsAreTheBorder(t *testing.T) {
	seen, several := 0, 0
	rapid.Check(t, func(t *rapid.T) {
		w := math.Pow(10, rapid.Float64Range(0, 2).Draw(t, "w"))
		zeta := math.Pow(10, rapid.Float64Range(-2, 0).Draw(t, "zeta"))
		m := model.Linear{
			Num: []float64{1}, Den: polyMul([]float64{1 / (w * w), 2 * zeta / w, 1}, []float64{rapid.Float64Range(0.01, 1).Draw(t, "tau"), 1}),
			DeadTime: rapid.Float64Range(0, 0.1).Draw(t, "dead"),
		}
		g := PI(rapid.Float64Range(0, 1).Draw(t, "kp"), math.Pow(10, rapid.Float64Range(-2, 0.5).Draw(t, "ki")), 0, 0)
		got, err := JudgeFrequency(m, g)
		if err != nil {
			t.Fatal(err)
		}
		if !got.Stable || got.Ms > 50 {
			return
		}
		seen++
		if len(got.Crossovers) > 1 {
			several++
		}
		marginsAreTheBorder(t, m, g, got)
	})
	t.Logf("%d stable loops, %d with several crossovers", seen, several)
	if seen < 20 {
		t.Errorf("only %d stable loops: too few to show anything", seen)
	}
}

// A loop whose resonance stands above 1 on the far side, a whole turn later: it
// is stable, and two of its three crossovers have their phase beyond −360°.
func TestMarginsBeyondAWholeTurn(t *testing.T) {
	m := model.Linear{Num: []float64{1}, Den: []float64{0.01, 0.004, 1}, DeadTime: 0.3}
	g := PI(0, 0.8, 0, 0)
	got, err := JudgeFrequency(m, g)
	if err != nil {
		t.Fatal(err)
	}
	if !got.Stable || len(got.Crossovers) != 3 {
		t.Fatalf("stable %v, crossovers %v: want a stable loop with three", got.Stable, got.Crossovers)
	}
	marginsAreTheBorder(t, m, g, got)
}

func marginsAreTheBorder(t interface {
	Fatal(...any)
	Fatalf(string, ...any)
}, m model.Linear, g Gains, got Margins,
) {
	stable := func(g Gains) bool {
		x, err := JudgeFrequency(m, g)
		if err != nil {
			t.Fatal(err)
		}
		return x.Stable
	}
	if got.DelayMargin.Known() {
		less, more := g, g
		less.ComputeDelay, more.ComputeDelay = 0.995*float64(got.DelayMargin), 1.005*float64(got.DelayMargin)
		if !stable(less) || stable(more) {
			t.Fatalf("delay margin %.6g s is not the border: %+v %+v", got.DelayMargin, m, g)
		}
	}
	if gm := float64(got.GainMargin); got.GainMargin.Known() && (!stable(g.Scaled(1+0.995*(gm-1))) || stable(g.Scaled(1+1.005*(gm-1)))) {
		t.Fatalf("gain margin %.6g is not the border: %+v %+v", gm, m, g)
	}
}

// A plant with one unstable pole: 1/(s − 1) with u = −kp·y is stable for kp > 1.
func TestUnstablePlant(t *testing.T) {
	m := model.Linear{Num: []float64{1}, Den: []float64{1, -1}}
	for kp, want := range map[float64]bool{0.5: false, 2: true} {
		for _, h := range []float64{0, 0.01} {
			got, err := JudgeFrequency(m, PI(kp, 0.1, h, 0))
			if err != nil {
				t.Fatal(err)
			}
			if got.Stable != want {
				t.Errorf("kp %g, sample time %g: stable %v, want %v", kp, h, got.Stable, want)
			}
		}
	}
	got, err := JudgeFrequency(m, PI(2, 0, 0, 0))
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(float64(got.GainMarginLow)-0.5) > 1e-6 {
		t.Errorf("lower gain margin %.9g, want 0.5", got.GainMarginLow)
	}
}

// An unfiltered derivative of the error is the limit of a quick filter, also
// with dead time, where the step of the setpoint is an impulse in the drive.
func TestUnfilteredDerivativeWithDeadTime(t *testing.T) {
	m := model.SecondOrder(1, 1, 0.3, 0.2)
	g := Gains{Kp: 1.2, Ki: 1, Kd: 0.3, SetpointWeight: 1, DerivativeOn: OnError}
	exact, err := Judge(m, g)
	if err != nil {
		t.Fatal(err)
	}
	var last float64
	for _, tf := range []float64{4e-3, 2e-3} {
		g.DerivativeFilter = tf
		filtered, err := Judge(m, g)
		if err != nil {
			t.Fatal(err)
		}
		d := math.Abs(float64(filtered.Step.IAE - exact.Step.IAE))
		if last != 0 && d > 0.6*last {
			t.Errorf("IAE differs by %.3g with half the filter, by %.3g before: no limit", d, last)
		}
		last = d
		if d > 0.01 || math.Abs(float64(filtered.Step.Overshoot-exact.Step.Overshoot)) > 1 {
			t.Errorf("filter %g s: IAE %.6g overshoot %.4g, unfiltered %.6g and %.4g", tf, filtered.Step.IAE, filtered.Step.Overshoot, exact.Step.IAE, exact.Step.Overshoot)
		}
	}
}

// Coulomb friction alone stops a coasting first-order model after
// τ·ln(1 + ω₀/(K·Fc)), and then holds it.
func TestFrictionStopsTheShaft(t *testing.T) {
	const k, tau, fc, w0 = 20.0, 0.05, 1.0, 60.0
	lo, hi := -1e-9, 1e-9
	g := PI(1e-6, 0, 0.001, 0)
	g.UMin, g.UMax = &lo, &hi
	run, err := SimulateLoop(model.FirstOrder(k, tau, 0), g, Scenario{
		Parts: []Part{{0, 0, 0.3}}, StartSpeed: w0, Friction: Friction{CoulombForward: fc, CoulombReverse: fc},
	})
	if err != nil {
		t.Fatal(err)
	}
	want := tau * math.Log(1+w0/(k*fc))
	for i, y := range run.Speed {
		at := run.Time[i]
		if free := (w0+k*fc)*math.Exp(-at/tau) - k*fc; at < want-0.001 && math.Abs(y-free) > 0.35 {
			t.Fatalf("at %g s: %.6g rad/s, want %.6g", at, y, free)
		}
		if at > want+0.001 && y != 0 {
			t.Fatalf("at %g s the shaft still has %.3g rad/s, it stops at %.4g s", at, y, want)
		}
	}
}

func TestDerivativeHasToEarnItsNoise(t *testing.T) {
	o := Options{SampleTime: 0.001, ComputeDelay: 0.0005, Law: LawPID}
	// One lag against a short dead time: noise rises far more than the gain.
	plain := mustChoose(t, model.FirstOrder(46.5, 0.035, 0.0015), o)
	// Two like lags: a derivative brings a multiple.
	two := mustChoose(t, model.SecondOrder(46.5, 0.05, 0.05, 0.005), Options{SampleTime: 0.001, Law: LawPID})
	for name, p := range map[string]Proposal{"one lag": plain, "two lags": two} {
		var pi Gains
		m, opt := model.FirstOrder(46.5, 0.035, 0.0015), o
		if name == "two lags" {
			m, opt = model.SecondOrder(46.5, 0.05, 0.05, 0.005), Options{SampleTime: 0.001}
		}
		pi, err := LargestKi(m, opt.shape(), DefaultMsMax, 0)
		if err != nil {
			t.Fatal(err)
		}
		noise, err := NoiseGain(m, pi)
		if err != nil {
			t.Fatal(err)
		}
		if p.Gains.Kd == 0 {
			if p.Gains.Ki != pi.Ki {
				t.Errorf("%s: without a derivative ki is %g, want that of the PI, %g", name, p.Gains.Ki, pi.Ki)
			}
			continue
		}
		if p.Gains.Ki < earnGain*pi.Ki || float64(p.NoiseGain) > earnNoise*noise {
			t.Errorf("%s: the derivative brings %.3g times the gain for %.3g times the noise", name, p.Gains.Ki/pi.Ki, float64(p.NoiseGain)/noise)
		}
		if 4*p.Gains.Kd*p.Gains.Ki > p.Gains.Kp*p.Gains.Kp*(1+1e-9) {
			t.Errorf("%s: ti is under four td", name)
		}
	}
	t.Logf("one lag: kd %g, two lags: kd %g", plain.Gains.Kd, two.Gains.Kd)
}

// With a bound on the noise that the derivative keeps, the bound counts alone.
func TestDerivativeUnderANoiseBound(t *testing.T) {
	m := model.SecondOrder(46.5, 0.05, 0.05, 0.005)
	pi := mustChoose(t, m, Options{SampleTime: 0.001, Law: LawPI})
	o := Options{SampleTime: 0.001, Law: LawPID, Noise: 8 * float64(pi.NoiseGain)}
	pid := mustChoose(t, m, o)
	if pid.Gains.Kd == 0 || pid.Gains.Ki < earnGain*pi.Gains.Ki || float64(pid.NoiseGain) > o.Noise {
		t.Errorf("kd %g, ki %g against %g, noise gain %g within %g", pid.Gains.Kd, pid.Gains.Ki, pi.Gains.Ki, pid.NoiseGain, o.Noise)
	}
}

func TestLargestKiKeepsFourDerivativeTimes(t *testing.T) {
	m := model.SecondOrder(46.5, 0.05, 0.05, 0.005)
	for _, td := range []float64{0.005, 0.02, 0.05} {
		g, err := LargestKi(m, PI(0, 0, 0.001, 0), 1.6, td)
		if err != nil {
			t.Fatal(err)
		}
		if g.Kp/g.Ki < 4*td*(1-1e-6) {
			t.Errorf("td %g s: ti is %g s, under four of it", td, g.Kp/g.Ki)
		}
	}
}

// A plant that answers at once, (0.02·s + 1)/(0.17·s + 1) with ki alone: the
// closed loop is (ki·(0.02·s + 1))/(0.17·s² + (1 + 0.02·ki)·s + ki), and its IAE
// without overshoot is 1/ki.
func TestPlantThatAnswersAtOnce(t *testing.T) {
	m := model.Linear{Num: []float64{0.02, 1}, Den: []float64{0.17, 1}}
	got, err := Judge(m, PI(0, 0.5, 0, 0))
	if err != nil {
		t.Fatal(err)
	}
	if !got.Stable || got.Step.Overshoot != 0 || math.Abs(float64(got.Step.IAE)-2) > 1e-4 {
		t.Errorf("got %+v, want an IAE of 2 without overshoot", got.Step)
	}
}

func TestJudgeEndsOnHopelessLoops(t *testing.T) {
	// Swings for a million periods: stable, but no settling time is found.
	m := model.Linear{Num: []float64{2479}, Den: []float64{1, 0}}
	g := Gains{Ki: 7.7e-6, Kd: 6.6e-5, DerivativeFilter: 4.5e-6, SetpointWeight: 1}
	got, err := Judge(m, g)
	if err != nil {
		t.Fatal(err)
	}
	if got.Step.SettlingTime.Known() || got.Step.Overshoot.Known() {
		t.Errorf("settling %g s and overshoot %g %% of a loop that was given up", got.Step.SettlingTime, got.Step.Overshoot)
	}
	if _, err := Judge(m, PI(0, 0, 0, 0)); err == nil {
		t.Error("a loop without gains was judged")
	}
}
