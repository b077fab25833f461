package identify

import (
	"math"
	"math/rand/v2"
	"testing"
)

// coloured is noise of the given standard deviation that remembers: each value is
// 0.7 of the one before plus white noise.
func coloured(sigma float64) func(*rand.Rand, []float64) []float64 {
	const keep = 0.7
	return func(rng *rand.Rand, clean []float64) []float64 {
		out := make([]float64, len(clean))
		e := sigma * rng.NormFloat64()
		for i, y := range clean {
			out[i] = y + e
			e = keep*e + sigma*math.Sqrt(1-keep*keep)*rng.NormFloat64()
		}
		return out
	}
}

// rounded is white noise, then rounding to a quantum of twice its deviation.
func rounded(sigma float64) func(*rand.Rand, []float64) []float64 {
	quantum := 2 * sigma
	return func(rng *rand.Rand, clean []float64) []float64 {
		phase := rng.Float64() * quantum
		out := make([]float64, len(clean))
		for i, y := range clean {
			out[i] = quantum*math.Round((y+sigma*rng.NormFloat64()+phase)/quantum) - phase
		}
		return out
	}
}

// Noise that is not white: 95 % intervals hold the truth in 90 to 99 % of runs.
func TestIntervalsUnderOtherNoise(t *testing.T) {
	runs := longRuns(120)
	for _, c := range readCRB(t) {
		for name, noise := range map[string]func(*rand.Rand, []float64) []float64{
			"coloured": coloured(c.Sigma), "rounded": rounded(c.Sigma),
		} {
			t.Run(c.ID+"/"+name, func(t *testing.T) {
				got := c.monteCarlo(t, true, runs, 12, noise)
				for _, key := range []string{"K", "T", "L"} {
					s := got[key]
					t.Logf("%-2s %.1f %% hold the truth", key, 100*s.coverage())
					chance := 0.0
					if runs < 2000 {
						chance = 3 * math.Sqrt(0.1*0.9/float64(runs))
					}
					if s.coverage() < 0.90-chance || s.coverage() > math.Min(0.99+chance, 1) {
						t.Errorf("%s: %.1f %% of the intervals hold the truth, want 90 to 99 %%", key, 100*s.coverage())
					}
				}
			})
		}
	}
}
