package identify

import (
	"math"
	"testing"
)

// One lag with dead time under a symmetric relay, in closed form: without hysteresis
// the period is 2T·ln(2e^(L/T) − 1) and the amplitude K·d·(1 − e^(−L/T)). Q.-G. Wang, C.-C. Hang and
// B. Zou, Ind. Eng. Chem. Res. 36 (1997) 1530 (*from memory*).
func TestLimitCycleClosedForm(t *testing.T) {
	for _, c := range []struct{ gain, tau, dead, d, eps float64 }{
		{20, 0.08, 0.02, 1, 0}, {20, 0.08, 0.3, 1, 0}, {3, 1, 0.01, 5, 0}, {20, 0.08, 0.01, 1, 4}, {5, 0.2, 0, 2, 3},
	} {
		got, err := Plant{Gain: c.gain, Tau: c.tau, Dead: c.dead}.LimitCycle(Relay{High: c.d, Low: -c.d, Upper: c.eps, Lower: -c.eps})
		if err != nil {
			t.Fatalf("%+v: %v", c, err)
		}
		// The speed passes ε, goes on for L towards K·d, and falls to −ε from there.
		peak := c.gain*c.d - (c.gain*c.d-c.eps)*math.Exp(-c.dead/c.tau)
		half := c.dead + c.tau*math.Log((c.gain*c.d+peak)/(c.gain*c.d-c.eps))
		if c.eps == 0 {
			if want := 2 * c.tau * math.Log(2*math.Exp(c.dead/c.tau)-1); math.Abs(2*half/want-1) > 1e-12 {
				t.Errorf("the test's own forms disagree: %g and %g", 2*half, want)
			}
		}
		if math.Abs(got.Up/half-1) > 1e-8 || math.Abs(got.Down/half-1) > 1e-8 || math.Abs(got.Max/peak-1) > 1e-8 || math.Abs(got.Min/peak+1) > 1e-8 {
			t.Errorf("%+v: %+v, want %g each way and ±%g", c, got, half, peak)
		}
	}
}

// Two lags, lopsided levels, thresholds and friction, against the loop run by small
// explicit steps.
func TestLimitCycleAgainstTheLoopItself(t *testing.T) {
	p := Plant{Gain: 22, Tau: 0.08, Tau2: 0.012, Dead: 0.004, Offset: 1.1}
	r := Relay{High: 7.5, Low: 4.6, Upper: 112, Lower: 104, Delay: 0.006}
	got, err := p.LimitCycle(r)
	if err != nil {
		t.Fatal(err)
	}
	const h = 2e-6
	lag := int(math.Round((p.Dead + r.Delay) / h))
	line := make([]float64, lag)
	for i := range line {
		line[i] = r.High
	}
	x1, x2, u := 100.0, 100.0, r.High
	max, min := 0.0, math.Inf(1)
	var ups []int
	var downs []int
	for i := 0; i < 1_500_000; i++ {
		v := line[i%lag]
		line[i%lag] = u
		x1 += h / p.Tau * (p.Gain*(v-p.Offset) - x1)
		x2 += h / p.Tau2 * (x1 - x2)
		switch {
		case u == r.High && x2 >= r.Upper:
			u = r.Low
			downs = append(downs, i)
		case u == r.Low && x2 <= r.Lower:
			u = r.High
			ups = append(ups, i)
		}
		if i > 1_000_000 {
			max, min = math.Max(max, x2), math.Min(min, x2)
		}
	}
	n := len(ups)
	if n < 10 {
		t.Fatalf("%d cycles", n)
	}
	period := float64(ups[n-1]-ups[n-2]) * h
	up := 0.0
	for _, d := range downs {
		if d > ups[n-2] && d < ups[n-1] {
			up = float64(d-ups[n-2]) * h
		}
	}
	for _, c := range []struct {
		what      string
		got, want float64
	}{{"period", got.Period(), period}, {"high part", got.Up, up}, {"largest", got.Max, max}, {"smallest", got.Min, min}} {
		if math.Abs(c.got/c.want-1) > 1e-3 {
			t.Errorf("%s: %.6g, the loop itself has %.6g", c.what, c.got, c.want)
		}
	}
}

// Gain and phase by the describing function are off on such a plant, which is why
// the exact equations are used: 4d/(πa) against 1/|G| at the cycle's frequency.
func TestDescribingFunctionIsOff(t *testing.T) {
	p := Plant{Gain: 20, Tau: 0.08, Dead: 0.02}
	c, err := p.LimitCycle(Relay{High: 1, Low: -1})
	if err != nil {
		t.Fatal(err)
	}
	ku, _, _ := FreqFit{Gain: p.Gain, Tau: p.Tau, Dead: p.Dead}.Model().Ultimate(0)
	if off := 4/math.Pi/c.Max/ku - 1; math.Abs(off) < 0.05 {
		t.Errorf("off by %.3f only: the comparison says nothing", off)
	}
}

func TestRelayThatDoesNotCycle(t *testing.T) {
	if _, err := (Plant{Gain: 20, Tau: 0.1, Dead: 0.01}).LimitCycle(Relay{High: 1, Low: -1, Upper: 25, Lower: -5}); err == nil {
		t.Error("an upper threshold that is never reached was taken")
	}
}
