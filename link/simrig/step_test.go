package simrig

import (
	"math"
	"testing"
)

// TestStepLength carries a braking and driving motor on a soft supply at the
// longest step and at a fiftieth of it.
func TestStepLength(t *testing.T) {
	c := benchConfig()
	c.Supply.Sinks, c.Supply.Ohms = false, 0.3
	run := func(n int) (w, bus []float64) {
		p := newPlant(&c)
		p.bind()
		h := float64(longestStep) * 1e-9 / float64(n)
		pr := p.motor.pair(h)
		pr.full, pr.half = p.supply.span(h), p.supply.span(h/2)
		p.driver.now = order{on: true}
		for k := range int(1e9 / longestStep) {
			p.driver.now.duty = 0.4 * math.Sin(20*float64(k/20*20)*longestStep*1e-9)
			for range n {
				p.supply.draw(p.drawn(), &pr.half)
				p.step(&pr, 0, false)
				p.supply.draw(p.drawn(), &pr.half)
			}
			w, bus = append(w, p.shaft.w), append(bus, p.supply.bus)
		}
		return w, bus
	}
	w1, b1 := run(1)
	w2, b2 := run(50)
	dw, db := 0.0, 0.0
	for i := range w1 {
		dw, db = max(dw, math.Abs(w1[i]-w2[i])), max(db, math.Abs(b1[i]-b2[i]))
	}
	t.Logf("speed within %.2g rad/s, bus within %.2g V", dw, db)
	if dw > 0.005 || db > 0.02 {
		t.Errorf("speed differs by %g rad/s, bus by %g V", dw, db)
	}
}
