package identify

import (
	"math"
	"math/rand/v2"
	"testing"

	"gainwright/tune/trace"
)

// coastTrace drives at a steady speed and then lets go, by small explicit steps of
// the equation of motion: no closed form is shared with the fit. quad is drag over
// inertia that grows with the square of the speed, 1/rad.
func coastTrace(rng *rand.Rand, w0, dry, viscous, quad, noise, quantum float64) *trace.Trace {
	const h, window = 0.002, 0.004
	tr := &trace.Trace{Window: window, RadPerCount: quantum * window}
	w, hist := w0, []float64{w0, w0}
	for i := 0; i < 6000; i++ {
		v := 0.0
		if i < 100 {
			v = 12
		} else {
			for range 20 {
				w = math.Max(0, w-h/20*(dry+viscous*w+quad*w*w))
			}
		}
		hist = append(hist, w)
		y := (hist[len(hist)-1] + 2*hist[len(hist)-2] + hist[len(hist)-3]) / 4 // mean over two steps by trapezoids
		y += noise * rng.NormFloat64()
		if quantum > 0 {
			y = quantum * math.Round(y/quantum)
		}
		tr.Time, tr.Voltage, tr.Speed = append(tr.Time, float64(i)*h), append(tr.Voltage, v), append(tr.Speed, y)
		if w == 0 {
			break
		}
	}
	return tr
}

// The numbers come from the equation of motion itself, solved by small steps.
func TestCoastAgainstTheEquationOfMotion(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 1))
	for _, c := range []struct{ w0, dry, viscous, noise, quantum float64 }{
		{200, 246, 0.18, 0.4, 0}, {200, 246, 0, 0.4, 0.785}, {80, 12, 0.9, 0.1, 0.2}, {300, 3, 0.02, 0.3, 1.5},
	} {
		hit, n := 0, 30
		for range n {
			f, err := FitCoast(coastTrace(rng, c.w0, c.dry, c.viscous, 0, c.noise, c.quantum))
			if err != nil {
				t.Fatal(err)
			}
			if math.Abs(f.Dry-c.dry) < 1.96*f.DrySD {
				hit++
			}
			if math.Abs(f.Dry/c.dry-1) > 0.1 || math.Abs(f.Viscous-c.viscous) > 0.05*c.viscous+0.1*c.dry/c.w0 {
				t.Errorf("%+v: dry %.4g ± %.2g, viscous %.4g ± %.2g", c, f.Dry, f.DrySD, f.Viscous, f.ViscousSD)
			}
			if math.Abs(f.Bend) > 4.5 {
				t.Errorf("%+v: a bend of %.1f standard deviations where there is none", c, f.Bend)
			}
		}
		if hit < 25 { // 95 % less three standard deviations of the count
			t.Errorf("%+v: %d of %d intervals hold the truth", c, hit, n)
		}
	}
}

// Drag that grows with the square of the speed is no viscous friction, and shows.
func TestCoastSeesAFan(t *testing.T) {
	f, err := FitCoast(coastTrace(rand.New(rand.NewPCG(7, 2)), 200, 60, 0.05, 0.004, 0.2, 0))
	if err != nil {
		t.Fatal(err)
	}
	if f.Bend < 5 {
		t.Errorf("a bend of %.1f standard deviations", f.Bend)
	}
}

func TestMeanOfRepeats(t *testing.T) {
	// Two readings of equal weight: mean and scatter by hand.
	m := MeanOf([]float64{9, 11}, []float64{0.1, 0.1})
	if m.Value != 10 || math.Abs(m.SD-1) > 1e-12 {
		t.Errorf("%+v, want 10 ± 1", m)
	}
	if m = MeanOf([]float64{9, 11}, []float64{0.1, 1e6}); math.Abs(m.Value-9) > 1e-6 {
		t.Errorf("%+v, want the well known one", m)
	}
}

// The derivative behind the standard deviations is that of the function itself, on
// both sides of the switch to its series.
func TestCoastTermsHaveTheirDerivative(t *testing.T) {
	for _, c := range []float64{-0.3, 1e-5, 9e-4, 2e-3, 0.5, 4} {
		for _, at := range []float64{0.1, 1, 3} {
			const d = 1e-4
			_, lo, _ := coastTerms(at, c-d)
			_, hi, _ := coastTerms(at, c+d)
			_, _, slope := coastTerms(at, c)
			if want := (hi - lo) / (2 * d); math.Abs(slope-want) > 1e-4*math.Abs(want) {
				t.Errorf("c %g, t %g: %.8g, want %.8g", c, at, slope, want)
			}
		}
	}
}

// Friction that rises again towards standstill (Stribeck) stays out of the fit:
// T0 is that of the sliding shaft.
func TestCoastLeavesTheSlowEndOut(t *testing.T) {
	const h, dry = 0.002, 60.0
	tr := &trace.Trace{Window: h}
	w := 100.0
	for i := 0; w > 0 && i < 3000; i++ {
		v := 12.0
		if i >= 100 {
			v = 0
			for range 50 {
				w = math.Max(0, w-h/50*dry*(1+3*math.Exp(-w*w/25)))
			}
		}
		tr.Time, tr.Voltage, tr.Speed = append(tr.Time, float64(i)*h), append(tr.Voltage, v), append(tr.Speed, w)
	}
	f, err := FitCoast(tr)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(f.Dry/dry-1) > 0.02 || math.Abs(f.Viscous) > 0.02 {
		t.Errorf("dry %.4g, viscous %.3g; the sliding shaft has %g and none", f.Dry, f.Viscous, dry)
	}
}
