package design

import (
	"math"
	"testing"
)

// A window of whole loops shows the mean speed over it, delayed by half of it, in
// steps of one count a window.
func TestTheCounterIsAMeanOverItsWindow(t *testing.T) {
	const h, loops, slope = 1e-3, 5, 200.0
	smooth := newCounter(Scenario{WindowLoops: loops, StartSpeed: 50}, h)
	counted := newCounter(Scenario{WindowLoops: loops, StartSpeed: 50, RadPerCount: 2 * math.Pi / 2000}, h)
	step := 2 * math.Pi / 2000 / (loops * h)
	for k := range 100 {
		w := 50 + slope*float64(k)*h
		a, b := smooth.see(w), counted.see(w)
		if k > loops && math.Abs(a-(w-slope*loops*h/2)) > 1e-9 {
			t.Fatalf("sample %d: mean %.6f, a ramp is half a window late: %.6f", k, a, w-slope*loops*h/2)
		}
		if math.Abs(b-a) >= step || math.Abs(b/step-math.Round(b/step)) > 1e-6 {
			t.Fatalf("sample %d: %.4f counted, %.4f smooth, one step is %.4f", k, b, a, step)
		}
	}
}
