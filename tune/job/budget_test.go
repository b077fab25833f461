package job

import (
	"math"
	"testing"

	"gainwright/tune/design"
	"gainwright/tune/model"
)

// The budget against the exact sampled loop: well under the rate of the loop, the
// phase margin is that of the continuous law and motor at the crossover less the
// whole delay. Backward Euler turns the integral by half a sample the other way.
func TestDelayBudgetIsThePhaseThatIsLost(t *testing.T) {
	const k, tau, kp, ki = 20.0, 0.1, 0.3, 2.0
	for _, c := range []struct{ dead, window, compute, period float64 }{
		{0.004, 0.002, 0.0005, 0.001}, {0, 0.004, 0, 0.002}, {0.01, 0.001, 0.001, 0.001},
	} {
		g := design.PI(kp, ki, c.period, c.compute)
		m, err := design.Judge(LoopModel(model.FirstOrder(k, tau, c.dead), c.window), g)
		if err != nil || !m.Stable {
			t.Fatal(err, m.Stable)
		}
		w := float64(m.Crossover)
		parts, total := DelayBudget(c.dead, c.window, c.compute, c.period)
		sum := 0.0
		for _, p := range parts {
			sum += p.Seconds
		}
		if sum != total || len(parts) != 4 {
			t.Errorf("parts make %g s, total %g s", sum, total)
		}
		// Backward Euler: Ki·T/(1−z⁻¹) lags the continuous integral by −ωT/2 of its part.
		law := math.Atan2(-ki/w, kp+ki*c.period/2)
		want := 180 + (law-math.Atan(w*tau)-w*total)*180/math.Pi
		if got := float64(m.PhaseMargin); math.Abs(got-want) > 0.3 {
			t.Errorf("%+v: the exact loop has %.2f° of margin, the budget leaves %.2f°", c, got, want)
		}
	}
}
