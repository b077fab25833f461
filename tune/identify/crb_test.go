package identify

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// crbCase is one record of testdata/crb.json.
type crbCase struct {
	ID         string
	K, T, L, U float64
	Sigma, Ts  float64
	N, Npre    int
	Three      crbBound `json:"three_param"`
	Four       crbBound `json:"four_param_with_baseline"`
}

type crbBound struct {
	Std map[string]float64 `json:"crb_std"`
}

func readCRB(t testing.TB) []crbCase {
	t.Helper()
	b, err := os.ReadFile("testdata/crb.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct{ Cases []crbCase }
	if err := json.Unmarshal(b, &file); err != nil {
		t.Fatal(err)
	}
	if len(file.Cases) != 6 {
		t.Fatalf("%d cases, want 6", len(file.Cases))
	}
	return file.Cases
}

// record makes the case's record: with samples ahead of the step and a baseline
// to be found, or from the step on with the baseline known to be zero.
func (c crbCase) record(baseline bool, noise func(clean []float64) []float64) *trace.Trace {
	pre := 0
	if baseline {
		pre = c.Npre
	}
	tr := &trace.Trace{}
	var clean []float64
	for i := -pre; i < c.N; i++ {
		t, y := float64(i)*c.Ts, 0.0
		if t > c.L {
			y = -c.K * c.U * math.Expm1(-(t-c.L)/c.T)
		}
		u := 0.0
		if i > 0 { // applied since the row before
			u = c.U
		}
		tr.Time, tr.Voltage, clean = append(tr.Time, t), append(tr.Voltage, u), append(clean, y)
	}
	tr.Speed = noise(clean)
	return tr
}

// longRuns says how many Monte Carlo runs to make: 2 000 where GAINWRIGHT_LONG is
// set, few otherwise.
func longRuns(few int) int {
	if os.Getenv("GAINWRIGHT_LONG") != "" {
		return 2000
	}
	return few
}

// scatter gathers errors and coverage of one parameter.
type scatter struct {
	truth      float64
	n, inside  int
	sum2, half float64
}

func (s *scatter) add(value float64, ci [2]float64) {
	s.n++
	s.sum2 += (value - s.truth) * (value - s.truth)
	s.half += (ci[1] - ci[0]) / 2
	if ci[0] <= s.truth && s.truth <= ci[1] {
		s.inside++
	}
}

func (s *scatter) rmse() float64     { return math.Sqrt(s.sum2 / float64(s.n)) }
func (s *scatter) coverage() float64 { return float64(s.inside) / float64(s.n) }

// monteCarlo fits runs records of the case and returns the scatter of K, T, L and
// y0.
func (c crbCase) monteCarlo(t testing.TB, baseline bool, runs int, seed uint64, noise func(*rand.Rand, []float64) []float64) map[string]*scatter {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 20240607))
	names := map[string]string{"K": "gain", "T": "tau", "L": "dead_time", "y0": "offset"}
	out := map[string]*scatter{"K": {truth: c.K}, "T": {truth: c.T}, "L": {truth: c.L}}
	if baseline {
		out["y0"] = &scatter{}
	}
	for k := 0; k < runs; k++ {
		tr := c.record(baseline, func(clean []float64) []float64 { return noise(rng, clean) })
		res, err := Run(tr, Options{Kind: model.KindFirstOrder, NoOffset: !baseline, RawMask: true})
		if err != nil {
			t.Fatal(err)
		}
		f := res.Models[0]
		for key, s := range out {
			v, _, ok := f.Value(names[key])
			if !ok {
				t.Fatalf("no parameter %s", names[key])
			}
			s.add(v, f.Model.CI95[names[key]])
		}
	}
	return out
}

func white(sigma float64) func(*rand.Rand, []float64) []float64 {
	return func(rng *rand.Rand, clean []float64) []float64 {
		out := make([]float64, len(clean))
		for i, y := range clean {
			out[i] = y + sigma*rng.NormFloat64()
		}
		return out
	}
}

// The fit reaches the Cramér–Rao bound and its 95 % intervals hold the truth as
// often as they say. Bounds: testdata/crb.json. With few runs the allowance for
// chance is three standard errors; GAINWRIGHT_LONG=1 makes 2 000 runs without.
func TestCramerRao(t *testing.T) {
	runs := longRuns(60)
	slack := 0.0
	if runs < 2000 {
		slack = 3
	}
	for _, c := range readCRB(t) {
		for _, baseline := range []bool{false, true} {
			bound := c.Three.Std
			if baseline {
				bound = c.Four.Std
			}
			limit := 1.10
			if c.ID == "C3_coarse" || c.ID == "C6_noisy" {
				limit = 1.15
			}
			t.Run(fmt.Sprintf("%s/baseline=%v", c.ID, baseline), func(t *testing.T) {
				got := c.monteCarlo(t, baseline, runs, 11, white(c.Sigma))
				for _, key := range []string{"K", "T", "L", "y0"} {
					s := got[key]
					if s == nil {
						continue
					}
					ratio := s.rmse() / bound[key]
					t.Logf("%-2s RMSE/CRB %.3f, 95 %% intervals hold the truth in %.1f %%", key, ratio, 100*s.coverage())
					if ratio > limit+slack/math.Sqrt(2*float64(runs)) {
						t.Errorf("%s: RMSE is %.3f of the bound, want at most %.2f", key, ratio, limit)
					}
					chance := slack * math.Sqrt(0.05*0.95/float64(runs))
					if s.coverage() < 0.93-chance || s.coverage() > 0.97+chance {
						t.Errorf("%s: %.1f %% of the intervals hold the truth, want 93 to 97 %%", key, 100*s.coverage())
					}
				}
			})
		}
	}
}
