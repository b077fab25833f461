package job

import (
	"math"
	"math/rand/v2"
	"testing"
)

// secondOrder is the unit step of ω²/(s² + 2ζωs + ω²) (any handbook of control).
func secondOrder(zeta, w, t float64) float64 {
	if t <= 0 {
		return 0
	}
	d := math.Sqrt(1 - zeta*zeta)
	return 1 - math.Exp(-zeta*w*t)/d*math.Sin(w*d*t+math.Acos(zeta))
}

// sampled is a step as telemetry shows it: lines every period, the first one off
// after the change, the setpoint rounded to lsb.
func sampled(period, off, lsb, from, to, noise float64, r *rand.Rand) (t, sp, y []float64) {
	const zeta, w = 0.6, 40.0
	for k := -5; k < 400; k++ {
		at := float64(k)*period + off
		v := from
		if at >= 0 {
			v = to
		}
		if lsb > 0 {
			v = math.Round(v/lsb) * lsb
		}
		e := 0.0
		if r != nil {
			e = noise * r.NormFloat64()
		}
		t, sp, y = append(t, 7+at), append(sp, v), append(y, from+(to-from)*secondOrder(zeta, w, at)+e)
	}
	return t, sp, y
}

// Overshoot is exp(−πζ/√(1−ζ²)), at 9.48 %, and the last crossing of the 2 % band
// is found by bisection on the closed form, whatever the phase of the telemetry and
// however coarse the setpoint is reported.
func TestStepsAreMeasuredAsTheClosedFormHasThem(t *testing.T) {
	over := 100 * math.Exp(-math.Pi*0.6/0.8)
	lo, hi := math.Pi/(40*0.8)*1.0, 1.0 // the peak, and rest
	settled := func(at float64) bool {
		for x := at; x < 1; x += 1e-5 {
			if math.Abs(secondOrder(0.6, 40, x)-1) > settleShare {
				return false
			}
		}
		return true
	}
	for range 30 {
		if mid := (lo + hi) / 2; settled(mid) {
			hi = mid
		} else {
			lo = mid
		}
	}
	var all []course
	for i := range 8 {
		from, to := 80.0, 120.0
		if i%2 == 1 {
			from, to = to, from
		}
		// A setpoint that is reported in steps of 0.06 is never exactly 80 or 120.
		at, sp, y := sampled(0.002, 0.002*float64(i)/8, 0.063, from, to, 0, nil)
		c, ok := newCourse(at, sp, y, from, to)
		if !ok {
			t.Fatal("no step")
		}
		all = append(all, c)
	}
	m := measure(all, settleShare)
	if math.Abs(m.Overshoot-over) > 0.2 || math.Abs(m.Settling-hi) > 0.001 {
		t.Errorf("overshoot %.2f %%, settling %.4f s; the closed form has %.2f and %.4f", m.Overshoot, m.Settling, over, hi)
	}
}

// Counts and noise of one step move its settling; the mean of twelve is steady.
func TestTheMeanOfStepsIsSteadierThanOne(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	spreadOf := func(n int) float64 {
		var v []float64
		for range 30 {
			var all []course
			for range n {
				at, sp, y := sampled(0.002, 0.002*r.Float64(), 0, 80, 120, 0.5, r)
				c, _ := newCourse(at, sp, y, 80, 120)
				all = append(all, c)
			}
			v = append(v, measure(all, 0.03).Settling)
		}
		return spread(v) / mean(v)
	}
	if one, twelve := spreadOf(1), spreadOf(12); twelve > 0.05 || twelve > one/2 {
		t.Errorf("settling scatters by %.1f %% on one step, by %.1f %% on twelve", 100*one, 100*twelve)
	}
}

// Too short a piece, or a setpoint that does not move, is no step.
func TestNoStepIsSaidSo(t *testing.T) {
	flat := make([]float64, 50)
	if _, ok := newCourse(flat, flat, flat, 0, 10); ok {
		t.Error("a step without a change of the setpoint")
	}
	at, sp, y := sampled(0.002, 0, 0, 80, 120, 0, nil)
	if _, ok := newCourse(at[:10], sp[:10], y[:10], 80, 120); ok {
		t.Error("a step of five samples")
	}
}
