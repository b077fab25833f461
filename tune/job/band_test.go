package job

import (
	"math"
	"strings"
	"testing"
)

// A loop that swings on and on is stopped; one that rings and comes to rest, or that
// swings a little, is not.
func TestSwingsAboutTheForecast(t *testing.T) {
	run := func(of func(t float64) float64) string {
		b := &Band{Line: []Point{{0, 100}, {6, 100}}, Width: 60, For: 0.06, Swing: 8}
		for t := 0.0; t < 5; t += 0.008 {
			if w := b.Left(t, 100+of(t)); w != "" {
				return w
			}
		}
		return ""
	}
	wave := func(amplitude, hz, decay float64) func(float64) float64 {
		return func(t float64) float64 { return amplitude * math.Exp(-decay*t) * math.Sin(2*math.Pi*hz*t) }
	}
	if w := run(wave(22, 10, 0)); !strings.Contains(w, "hunting") {
		t.Errorf("±22 rad/s at 10 Hz: %q", w)
	}
	for name, f := range map[string]func(float64) float64{"small": wave(7, 10, 0), "rings": wave(40, 5, 3), "slow": wave(22, 1, 0)} {
		if w := run(f); w != "" {
			t.Errorf("%s: %q", name, w)
		}
	}
	b := &Band{Line: []Point{{0, 100}, {6, 100}}, Width: 60, For: 0.06} // open loop
	for t0 := 0.0; t0 < 5; t0 += 0.008 {
		if w := b.Left(t0, 100+wave(22, 10, 0)(t0)); w != "" {
			t.Fatalf("open loop: %q", w)
		}
	}
}
