package tui

import (
	"math"

	"gainwright/tune/job"
)

// experimentsFixture is a coast-down that obeys its equation, and the frequency
// response of one lag, measured at six frequencies with a resonance at the last.
func experimentsFixture() []job.ExperimentView {
	coast := job.ChartView{Title: "coast-down from output off, rpm   dotted: dry and viscous friction", XUnit: "s", Unit: "rad/s", Zero: true}
	for _, way := range []float64{1, -1} {
		var run, fit []job.Point
		for i := range 100 {
			t := 0.01 * float64(i)
			w := math.Max(0, 160*math.Exp(-0.2*t)+250*math.Expm1(-0.2*t)/0.2)
			run = append(run, job.Point{T: t, V: way * w})
			if w > 0 {
				fit = append(fit, job.Point{T: t, V: way * w * 1.03})
			}
		}
		coast.Lines = append(coast.Lines, job.Curve{Name: "run", Points: run})
		coast.Model = append(coast.Model, job.Curve{Name: "fit", Points: fit})
	}
	db := func(f float64) float64 { return 20 * math.Log10(fixtureGain/math.Hypot(1, 2*math.Pi*f*fixtureTau)) }
	deg := func(f float64) float64 {
		return -(math.Atan(2*math.Pi*f*fixtureTau) + 2*math.Pi*f*fixtureDead) * 180 / math.Pi
	}
	gain := job.ChartView{Title: "gain, dB   dotted: model", XUnit: "Hz", Unit: "dB", Powers: true}
	phase := job.ChartView{Title: "phase, degrees   dotted: model", XUnit: "Hz", Unit: "deg", Powers: true}
	coherence := job.ChartView{Title: "coherence   line: least", XUnit: "Hz", Unit: "1", Powers: true, Zero: true, Levels: []job.Point{{V: 0.8}}, Lines: []job.Curve{{}}}
	gain.Model, phase.Model = []job.Curve{{}}, []job.Curve{{}}
	for i := range 60 {
		x := 1.4 * float64(i) / 59
		f := math.Pow(10, x)
		gain.Model[0].Points, phase.Model[0].Points = append(gain.Model[0].Points, job.Point{T: x, V: db(f)}), append(phase.Model[0].Points, job.Point{T: x, V: deg(f)})
	}
	for i, c := range []float64{0.99, 0.99, 0.98, 0.97, 0.95, 0.6} {
		x := 1.4 * float64(i) / 5
		f, up := math.Pow(10, x), 0.0
		if i == 5 {
			up = 6
		}
		gain.Dots = append(gain.Dots, job.Point{T: x, V: db(f) + up})
		gain.Bars = append(gain.Bars, job.Point{T: x, V: db(f) + up - 1}, job.Point{T: x, V: db(f) + up + 1})
		phase.Dots = append(phase.Dots, job.Point{T: x, V: deg(f)})
		coherence.Lines[0].Points = append(coherence.Lines[0].Points, job.Point{T: x, V: c})
	}
	return []job.ExperimentView{
		{Step: "coast", Title: "Coast-down", Verdict: "believed", Finding: "forward: T0/J 250 ± 2 rad/s²", Charts: []job.ChartView{coast},
			Facts: []job.Fact{{Name: "dry friction over inertia forward", Value: "250 ± 2 rad/s²", Why: "fitted to 3 coast-downs"}}},
		{Step: "frequency", Title: "Frequency response", Verdict: "care", Finding: "5 of 6 frequencies from 1 to 15 Hz", Reasons: []string{"a peak at 25.1 Hz, 2.00 of the model: a resonance that the model does not have"},
			Charts: []job.ChartView{gain, phase, coherence}, Facts: []job.Fact{{Name: "gain", Value: "21.4 ± 0.3 rad/s/V", Why: "least squares"}}},
	}
}
