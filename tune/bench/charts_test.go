package bench

import (
	"math"
	"testing"

	"gainwright/tune/job"
)

// What was found is drawn, each experiment against what the model or its own fit
// says of it: on a rig without faults the two lie on one another.
func TestExperimentsAreDrawn(t *testing.T) {
	v, j := onBench(t, "benchtop", job.StepFit)
	for _, s := range []job.StepID{job.StepCoast, job.StepRelay, job.StepFrequency, job.StepMap} {
		if err := j.Do(s); err != nil {
			t.Fatal(err)
		}
	}
	charts := map[job.StepID][]job.ChartView{}
	for _, x := range v.s.view.Experiments {
		charts[x.Step] = x.Charts
	}
	for step, n := range map[job.StepID]int{job.StepBreakaway: 1, job.StepStaircase: 1, job.StepCoast: 1, job.StepRelay: 2, job.StepFrequency: 3, job.StepMap: 2, job.StepMotor: 1} {
		if len(charts[step]) != n {
			t.Fatalf("%s: %d charts, want %d", step, len(charts[step]), n)
		}
	}
	near := func(what string, c job.ChartView, pts []job.Point, within float64) {
		t.Helper()
		hits := 0
		for _, m := range c.Model {
			for _, q := range pts {
				if w, ok := curveAt(m.Points, q.T); ok {
					hits++
					if math.Abs(w-q.V) > within {
						t.Errorf("%s: %.4g at %.4g, drawn model %.4g", what, q.V, q.T, w)
					}
				}
			}
		}
		if hits < 5 {
			t.Errorf("%s: %d points beside a model", what, hits)
		}
	}
	coast := charts[job.StepCoast][0]
	if len(coast.Lines) < 6 || len(coast.Model) != len(coast.Lines) {
		t.Fatalf("coast-down: %d runs, %d models", len(coast.Lines), len(coast.Model))
	}
	for i, l := range coast.Lines {
		one := coast
		one.Model = coast.Model[i : i+1]
		near("coast-down", one, l.Points, 3) // rad/s, of 190: a step of the speed is 0.73
	}
	stairs := charts[job.StepStaircase][0]
	near("staircase", stairs, stairs.Dots, 8) // rad/s, of 270
	f := charts[job.StepFrequency]
	near("gain over frequency", f[0], f[0].Dots, 0.2) // dB
	near("phase over frequency", f[1], f[1].Dots, 2)  // degrees
	for _, q := range f[2].Lines[0].Points {
		if q.V < 0.99 || q.V > 1 {
			t.Errorf("coherence %.3f at %.3g Hz on a rig with little noise", q.V, math.Pow(10, q.T))
		}
	}
	for _, c := range charts[job.StepMap] {
		for i, q := range c.Dots {
			if share := math.Abs(q.V/c.Levels[0].V - 1); share > 0.03 || len(c.Bars) != 2*len(c.Dots) || !(c.Bars[2*i].V < q.V && q.V < c.Bars[2*i+1].V) {
				t.Errorf("%s: %.4g at %.4g rpm, ± %v", c.Title, q.V, q.T, c.Bars)
			}
		}
	}
	// The relay's speed goes through both thresholds, and back.
	r := charts[job.StepRelay][0]
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, q := range r.Lines[0].Points {
		lo, hi = math.Min(lo, q.V), math.Max(hi, q.V)
	}
	if !(hi > r.Levels[0].V && lo < r.Levels[1].V) {
		t.Errorf("relay: speed from %.4g to %.4g, thresholds %v", lo, hi, r.Levels)
	}
	b := charts[job.StepBreakaway][0]
	for _, q := range b.Dots {
		if want := b.Levels[0].V; math.Abs(q.V-want) > 0.05 && math.Abs(q.V-b.Levels[1].V) > 0.05 {
			t.Errorf("breakaway %.3g V, means %v", q.V, b.Levels)
		}
	}
}

// curveAt is the value of a curve at t by straight lines between its points.
func curveAt(pts []job.Point, t float64) (float64, bool) {
	for i := 1; i < len(pts); i++ {
		if a, b := pts[i-1], pts[i]; t >= a.T && t <= b.T && b.T > a.T {
			return a.V + (b.V-a.V)*(t-a.T)/(b.T-a.T), true
		}
	}
	return 0, false
}
