package job

import (
	"math"
	"math/cmplx"

	"gainwright/tune/design"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
)

// bodePoints is how many frequencies a Bode plot of the record has.
const bodePoints = 160

// bode is the open loop of gains, and of their worst draw.
func bode(loop model.Linear, g design.Gains, m design.Margins, worst *design.Worst) *sheet.Bode {
	if !m.Crossover.Known() {
		return nil
	}
	g = linear(g)
	top := 0.999 * math.Pi / g.SampleTime
	low := float64(m.Crossover) / 100
	b := &sheet.Bode{CrossoverRadS: sheet.Known(float64(m.Crossover)), PhaseMarginDeg: sheet.Known(float64(m.PhaseMargin)),
		PhaseCrossRadS: sheet.Known(float64(m.PhaseCrossover)), GainMarginDB: sheet.Known(float64(m.GainMarginDB))}
	for i := range bodePoints {
		b.FrequencyRadS = append(b.FrequencyRadS, low*math.Pow(top/low, float64(i)/(bodePoints-1)))
	}
	b.MagnitudeDB, b.PhaseDeg = response(loop, g, b.FrequencyRadS)
	if worst != nil {
		b.WorstMagnitudeDB, b.WorstPhaseDeg = response(worst.Model, g, b.FrequencyRadS)
	}
	return b
}

// bodeView is a Bode plot for the screens.
func bodeView(b *sheet.Bode) (v BodeView) {
	if b == nil {
		return v
	}
	hz := func(w *float64) *float64 {
		if w == nil || *w <= 0 {
			return nil
		}
		x := math.Log10(*w / (2 * math.Pi))
		return &x
	}
	points := func(y []float64) (pts []Point) {
		for i, w := range b.FrequencyRadS[:min(len(y), len(b.FrequencyRadS))] {
			pts = append(pts, Point{*hz(&w), y[i]})
		}
		return pts
	}
	return BodeView{Gain: points(b.MagnitudeDB), Phase: points(b.PhaseDeg), WorstGain: points(b.WorstMagnitudeDB), WorstPhase: points(b.WorstPhaseDeg),
		Crossover: hz(b.CrossoverRadS), PhaseCross: hz(b.PhaseCrossRadS), PM: b.PhaseMarginDeg, GM: b.GainMarginDB}
}

// response is an open loop in dB and degrees, the phase unwrapped from below.
func response(m model.Linear, g design.Gains, w []float64) (db, deg []float64) {
	l, err := design.OpenLoop(m, g, w)
	if err != nil {
		return nil, nil
	}
	turn := 0.0
	for i, v := range l {
		p := cmplx.Phase(v) * 180 / math.Pi
		if i > 0 {
			for p+turn-deg[i-1] > 180 {
				turn -= 360
			}
			for p+turn-deg[i-1] < -180 {
				turn += 360
			}
		}
		db, deg = append(db, 20*math.Log10(cmplx.Abs(v))), append(deg, p+turn)
	}
	return db, deg
}
