package identify

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// benchTrace is a PRBS record of n samples of a second-order motor.
func benchTrace(n int, even bool) *trace.Trace {
	rng := rand.New(rand.NewPCG(1, 77))
	r := zooRig{gain: 46, tau: 0.035, tau2: 0.006, dead: 0.0023, noise: 2}
	tr := r.run(rng, prbs(8, 2, 15, n), 0.001)
	if !even {
		for i := range tr.Time {
			tr.Time[i] += 1e-6 * math.Round(20*rng.Float64())
		}
	}
	return tr
}

// scipyMs is what the best of five settings of scipy 1.10 took for a fit of the
// same kind and length on the machine on which the floors were measured. It
// stands in where scipy is not installed.
var scipyMs = map[string]map[int]float64{
	model.KindFirstOrder:  {1000: 0.52, 5000: 1.5, 50000: 30},
	model.KindSecondOrder: {1000: 3.4, 5000: 5.2, 50000: 38.6},
}

// scipyFit fits the trace by scipy's best setting in this run. measured is false
// where there is no scipy; the time is then the recorded one.
func scipyFit(b *testing.B, tr *trace.Trace, kind string, start []float64) (ms, rss float64, measured bool) {
	b.Helper()
	if exec.Command("python3", "-c", "import scipy").Run() != nil {
		b.Log("scipy is not installed: against the figure recorded elsewhere")
		return scipyMs[kind][tr.Len()], 0, false
	}
	var csv bytes.Buffer
	csv.WriteString("time,voltage,speed\ns,V,rad/s\n")
	for i := range tr.Time {
		fmt.Fprintf(&csv, "%.17g,%.17g,%.17g\n", tr.Time[i], tr.Voltage[i], tr.Speed[i])
	}
	file := filepath.Join(b.TempDir(), "trace.csv")
	if err := os.WriteFile(file, csv.Bytes(), 0o600); err != nil {
		b.Fatal(err)
	}
	words := make([]string, len(start))
	for i, x := range start {
		words[i] = fmt.Sprint(x)
	}
	out, err := exec.Command("python3", "testdata/floor/fit_floor.py", file, kind, strings.Join(words, ","), "7").Output()
	if err != nil {
		b.Fatal(err)
	}
	var got struct {
		Best    string
		MS, RSS float64
	}
	if err := json.Unmarshal(out, &got); err != nil {
		b.Fatal(err)
	}
	return got.MS, got.RSS, true
}

// BenchmarkSingleStart fits from one start near the truth and reports how many
// times faster than scipy's best setting it is (target: 3), on the same data and
// in the same run where scipy is installed. The two residuals have to agree to
// six digits.
func BenchmarkSingleStart(b *testing.B) {
	for _, kind := range []string{model.KindFirstOrder, model.KindSecondOrder} {
		for _, n := range []int{1000, 5000, 50000} {
			tr := benchTrace(n, true)
			start := []float64{math.Log(0.05), 0.004}
			if kind == model.KindSecondOrder {
				start = []float64{math.Log(0.06), math.Log(0.06 * 0.01), 0.004}
			}
			floor, rss, measured := scipyFit(b, tr, kind, start)
			b.Run(fmt.Sprintf("%s/%d", kind, n), func(b *testing.B) {
				kern, _ := newKernel(kind)
				p := newProjection(kern, stretches(tr, 0, windowMean, true), offsetShared, false)
				set := problem{kind: kind}.settings(p)
				var sol Solution
				b.ResetTimer()
				for range b.N {
					var err error
					if sol, err = Solve(p, start, set); err != nil {
						b.Fatal(err)
					}
				}
				ms := float64(b.Elapsed().Nanoseconds()) / float64(b.N) / 1e6
				if measured && math.Abs(sol.Point.Cost-rss) > 1e-6*rss {
					b.Errorf("residual %.9g, scipy's %.9g", sol.Point.Cost, rss)
				}
				b.ReportMetric(floor/ms, "×scipy")
				b.ReportMetric(float64(sol.Evaluations), "evaluations")
			})
		}
	}
}

// BenchmarkManyStarts is the fit without the judgement, as the job does it
// (target: 20 ms at 5 000 samples).
func BenchmarkManyStarts(b *testing.B) {
	for _, even := range []bool{true, false} {
		b.Run(fmt.Sprintf("5000/even=%v", even), func(b *testing.B) {
			tr := benchTrace(5000, even)
			for range b.N {
				if _, err := (problem{traces: []*trace.Trace{tr}, kind: model.KindFirstOrder, steady: true}).solve(); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

// BenchmarkRun is everything: both structures, many starts, intervals, tests of
// the residuals, hold-out.
func BenchmarkRun(b *testing.B) {
	for _, n := range []int{1000, 5000, 50000} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			tr := benchTrace(n, true)
			for range b.N {
				if _, err := Run(tr, Options{Holdout: 0.5}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
