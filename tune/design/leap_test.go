package design

import (
	"math"
	"testing"

	"gainwright/tune/model"
)

// A loop that is slow against its dead time: leaps must give what small steps
// give.
func TestLeapsAreTheSmallSteps(t *testing.T) {
	for _, c := range []struct {
		name string
		m    model.Linear
		g    Gains
	}{
		{"one lag", model.FirstOrder(20, 0.5, 0.0001), PI(0.08, 0.5, 0, 0)},
		{"electrical lag", model.SecondOrder(20, 0.5, 0.001, 0.0001), PI(0.08, 0.5, 0, 0)},
		{"integrating", model.Integrating(10, 0.0002), PI(0.2, 0.3, 0, 0)},
		{"filtered derivative", model.SecondOrder(20, 0.5, 0.1, 0.0001), Gains{Kp: 0.1, Ki: 0.3, Kd: 0.002, DerivativeFilter: 0.01, SetpointWeight: 1}},
	} {
		g := c.g.Parallel()
		dead := c.m.DeadTime
		grid, leap, err := delayGrid(c.m, g, dead)
		if err != nil {
			t.Fatal(err)
		}
		if leap < 2*dead {
			t.Fatalf("%s: no leap is taken (%g s)", c.name, leap)
		}
		fine, coarse := newMeter(1), newMeter(1)
		newDelayedLoop(c.m, g, grid, 1, 0).run(fine, dead, 0, 0)
		if !newDelayedLoop(c.m, g, grid, 1, 0).run(coarse, dead, leap, 0) {
			t.Errorf("%s: the leaps do not converge", c.name)
		}
		loadFine, loadCoarse := newMeter(0), newMeter(0)
		newDelayedLoop(c.m, g, grid, 0, 1).run(loadFine, dead, 0, 0)
		newDelayedLoop(c.m, g, grid, 0, 1).run(loadCoarse, dead, leap, 0)
		for what, pair := range map[string][2]Value{
			"overshoot": {coarse.step().Overshoot, fine.step().Overshoot}, "rise": {coarse.step().RiseTime, fine.step().RiseTime},
			"settling": {coarse.step().SettlingTime, fine.step().SettlingTime}, "IAE": {coarse.step().IAE, fine.step().IAE},
			"load IAE": {loadCoarse.load().IAE, loadFine.load().IAE}, "load peak": {loadCoarse.load().Peak, loadFine.load().Peak},
		} {
			if !(math.Abs(float64(pair[0]-pair[1])) <= 1e-4*math.Abs(float64(pair[1]))+1e-4) {
				t.Errorf("%s: %s: %.9g in leaps, %.9g in small steps", c.name, what, pair[0], pair[1])
			}
		}
	}
}
