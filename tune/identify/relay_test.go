package identify

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// relayTrace runs a relay with a late console around two lags and a dead time, by
// small explicit steps, and samples it as a board does.
func relayTrace(rng *rand.Rand, p Plant, r Relay, noise float64, seconds float64) *trace.Trace {
	const h, each = 1e-5, 200 // samples every 2 ms
	lag, late := int(math.Round(p.Dead/h)), int(math.Round(r.Delay/h))
	line := make([]float64, max(lag, 1))
	mid := (r.High + r.Low) / 2
	for i := range line {
		line[i] = mid
	}
	x1 := p.Gain * (mid - p.Offset)
	x2, theta, u, want := x1, 0.0, mid, r.High
	tr := &trace.Trace{Window: 0.004}
	var hist []float64
	pending := 0
	for i := 0; float64(i)*h < seconds; i++ {
		v := line[i%len(line)]
		line[i%len(line)] = u
		x1 += h / p.Tau * (p.Gain*(v-p.Offset) - x1)
		if p.Tau2 > 0 {
			x2 += h / p.Tau2 * (x1 - x2)
		} else {
			x2 = x1
		}
		theta += h * x2
		if i%each == 0 && i > 0 {
			hist = append(hist, theta)
			n := len(hist)
			if n > 2 {
				y := (hist[n-1]-hist[n-3])/0.004 + noise*rng.NormFloat64()
				tr.Time, tr.Voltage, tr.Speed = append(tr.Time, float64(i)*h), append(tr.Voltage, u), append(tr.Speed, y)
				switch {
				case want == r.High && y >= r.Upper:
					want, pending = r.Low, late
				case want == r.Low && y <= r.Lower:
					want, pending = r.High, late
				}
			}
			if pending <= 0 { // the level changes at a sample, as a drive value does
				u = want
			}
		}
		pending--
	}
	return tr
}

// Gain, poles and dead time of plants of one and two lags come out of two relay
// runs, and the exact equations forecast the cycles that were measured.
func TestRelayRunsGiveThePlant(t *testing.T) {
	rng := rand.New(rand.NewPCG(31, 1))
	for _, p := range []Plant{{Gain: 22, Tau: 0.08, Dead: 0.0032, Offset: 1}, {Gain: 60, Tau: 0.02, Dead: 0.006, Offset: 0.4}, {Gain: 22, Tau: 0.1, Tau2: 0.02, Dead: 0.004, Offset: 1}} {
		var runs []RelayRun
		for _, shift := range []float64{-0.4, 0.4} {
			bias := 6 + shift
			centre := p.Gain * (bias - p.Offset)
			r := Relay{High: bias + 1.2, Low: bias - 0.8, Upper: centre + 0.1*p.Gain, Lower: centre - 0.1*p.Gain, Delay: 0.01}
			run, err := FitRelay(relayTrace(rng, p, r, 0.004*p.Gain, 4), bias, 0.4, r.Upper, r.Lower)
			if err != nil {
				t.Fatal(err)
			}
			runs = append(runs, run)
		}
		f, err := FitRelays(runs[0], runs[1])
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%+v: %+v", p, f)
		order := 1
		if p.Tau2 > 0 {
			order = 2
		}
		if f.Order != order {
			t.Errorf("%+v: order %d", p, f.Order)
		}
		if math.Abs(f.Gain/p.Gain-1) > 0.02 || math.Abs(f.Tau/p.Tau-1) > 0.04 || math.Abs(f.Dead-p.Dead) > 0.0006 || math.Abs(f.Tau2-p.Tau2) > 0.1*p.Tau2 {
			t.Errorf("%+v: got %+v", p, f.FreqFit)
		}
		if math.Abs(f.Gain-p.Gain) > 4*f.GainSD || math.Abs(f.Tau-p.Tau) > 4*f.TauSD || math.Abs(f.Dead-p.Dead) > 4*f.DeadSD {
			t.Errorf("%+v: off by more than four standard deviations: %+v", p, f.FreqFit)
		}
		if math.Abs(f.Period-1) > 0.06 || math.Abs(f.Swing-1) > 0.08 { // the window rounds the peaks off
			t.Errorf("%+v: the equations forecast %.3f of the period and %.3f of the swing", p, f.Period, f.Swing)
		}
	}
}

// Points of a frequency response from periods of a square wave: against the
// transfer function itself.
func TestPeriodsAgainstTheTransferFunction(t *testing.T) {
	p := Plant{Gain: 22, Tau: 0.08, Dead: 0}
	r := Relay{High: 7, Low: 5}
	tr := &trace.Trace{Window: 0.002}
	const h = 0.002
	var starts, ends []float64
	for i := 0; i < 2000; i++ {
		at := float64(i) * h
		mean := 0.0
		for k := range 20 {
			mean += p.periodic(r, 0.2, 0.3, at-h+(float64(k)+0.5)*h/20) / 20
		}
		u := r.Low
		if x := math.Mod(at-h/2, 0.5); x >= 0 && x < 0.2 {
			u = r.High
		}
		tr.Time, tr.Voltage, tr.Speed = append(tr.Time, at), append(tr.Voltage, u), append(tr.Speed, mean)
	}
	for k := 1; k < 7; k++ {
		starts, ends = append(starts, 0.5*float64(k)), append(ends, 0.5*float64(k+1))
	}
	omega := []float64{4 * math.Pi, 8 * math.Pi, 12 * math.Pi, 24 * math.Pi}
	points := Periods(tr, starts, ends, omega)
	m := model.FirstOrder(p.Gain, p.Tau, 0)
	for _, q := range points {
		want := m.At(q.Omega)
		if cmplx.Abs(q.G-want) > 2e-3*cmplx.Abs(want) {
			t.Errorf("%.4g rad/s: %.5g, want %.5g", q.Omega, q.G, want)
		}
		if !(q.Coherence > 0.9999) {
			t.Errorf("%.4g rad/s: coherence %g without noise", q.Omega, q.Coherence)
		}
	}
	f, err := FitFrequency(points, 1)
	if err != nil || math.Abs(f.Gain/p.Gain-1) > 5e-3 || math.Abs(f.Tau/p.Tau-1) > 5e-3 || math.Abs(f.Dead) > 2e-4 {
		t.Errorf("%+v, %v", f, err)
	}
}
