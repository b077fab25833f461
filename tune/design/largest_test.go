package design

import (
	"math"
	"testing"

	"gainwright/tune/model"
)

// The optimum of a brute-force search (testdata/PROVENANCE.md) is the measure:
// at least 99 % of its integral gain, never over the bound by more than 1e-3.
func TestLargestKiAgainstBruteForce(t *testing.T) {
	_, plants := readGolden(t)
	var designs []struct {
		Plant string
		Ms    float64 `json:"Ms_bound"`
		Kp    float64
		Ki    float64
	}
	readJSON(t, "testdata/largest_ki.json", &designs)
	if len(designs) != 30 {
		t.Fatalf("got %d designs, want 30", len(designs))
	}
	for _, d := range designs {
		g, err := LargestKi(plants[d.Plant], PI(0, 0, 0, 0), d.Ms, 0)
		if err != nil {
			t.Errorf("%s Ms %g: %v", d.Plant, d.Ms, err)
			continue
		}
		m, err := JudgeFrequency(plants[d.Plant], g)
		if err != nil {
			t.Fatal(err)
		}
		if !m.Stable || float64(m.Ms) > d.Ms+1e-3 {
			t.Errorf("%s: stable %v, Ms %.6g, bound %g", d.Plant, m.Stable, m.Ms, d.Ms)
		}
		if g.Ki < 0.99*d.Ki || g.Ki > 1.001*d.Ki {
			t.Errorf("%s Ms %g: got ki %.6g (kp %.6g), optimum %.6g (kp %.6g)", d.Plant, d.Ms, g.Ki, g.Kp, d.Ki, d.Kp)
		}
		t.Logf("%s Ms %g: ki/optimum-1 %.2g, Ms-bound %.2g", d.Plant, d.Ms, g.Ki/d.Ki-1, float64(m.Ms)-d.Ms)
	}
}

// On the sampled loop there is no published optimum; a coarse search over the
// whole plane with the exact margins is the outside check.
func TestLargestKiOnTheSampledLoop(t *testing.T) {
	m := model.FirstOrder(46.5, 0.0356, 0.0015)
	for _, law := range []string{BackwardEuler, Tustin, ForwardEuler} {
		shape := PI(0, 0, 0.001, 0.0004)
		shape.Discretisation = law
		g, err := LargestKi(m, shape, 1.6, 0)
		if err != nil {
			t.Fatal(err)
		}
		found := 0.0
		for i := range 40 {
			for j := range 40 {
				c := g
				c.Kp *= 0.7 + 0.6*float64(i)/39
				c.Ki *= 0.9 + 0.2*float64(j)/39
				if c.Ki <= found {
					continue
				}
				if mm, err := JudgeFrequency(m, c); err == nil && mm.Stable && mm.Ms <= 1.6 {
					found = c.Ki
				}
			}
		}
		if found == 0 || found > 1.002*g.Ki {
			t.Errorf("%s: search found ki %.6g, the rule %.6g", law, found, g.Ki)
		}
	}
}

func TestLargestKiRefuses(t *testing.T) {
	if _, err := LargestKi(model.FirstOrder(20, 0.05, 0), PI(0, 0, 0, 0), 1.6, 0); err == nil {
		t.Error("a continuous first order without dead time has no largest gain, yet one was given")
	}
	if _, err := LargestKi(model.FirstOrder(20, 0.05, 0.01), PI(0, 0, 0, 0), math.NaN(), 0); err == nil {
		t.Error("a bound that is not a number was taken")
	}
}

func BenchmarkLargestKi(b *testing.B) {
	m := model.SecondOrder(46.5, 0.0352, 0.0005, 0.0015)
	for b.Loop() {
		if _, err := LargestKi(m, PI(0, 0, 0.001, 0.0005), 1.6, 0); err != nil {
			b.Fatal(err)
		}
	}
}
