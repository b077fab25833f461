package simrig

import (
	"math"
	"math/rand/v2"
	"testing"
)

func TestEdgesOutOfPlace(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for _, per := range []int{48, 10_000} {
		e := encoder{perRad: float64(per) / (2 * math.Pi), phase: 0.3, edges: misplaced(0.2, per, rng)}
		last, sum, n := int64(math.MinInt64), 0.0, 0
		for k := range 400_000 {
			th := -1 + 2*math.Pi*float64(k)/200_000
			e.look(th)
			c := e.count()
			if e.count() != c {
				t.Fatalf("%d counts: at rest it reads another count", per)
			}
			if last != math.MinInt64 && c != last {
				if c != last+1 {
					t.Fatalf("%d counts: from %d to %d", per, last, c)
				}
				d := th*e.perRad + e.phase - float64(c)
				sum += d * d
				n++
			}
			last = c
		}
		if rms := math.Sqrt(sum / float64(n)); rms < 0.15 || rms > 0.25 {
			t.Errorf("%d counts: edges are %g counts RMS out of place over %d edges, want 0.2", per, rms, n)
		}
		// A whole turn is the same number of counts wherever it begins.
		if len(e.edges) != per {
			continue
		}
		for _, from := range []float64{0, 0.7, 2.9} {
			e.look(from)
			a := e.count()
			e.look(from + 2*math.Pi)
			if d := e.count() - a; d != int64(per) {
				t.Errorf("a turn from %g is %d counts, want %d", from, d, per)
			}
		}
	}
}
