package job

import (
	"fmt"
	"math"
	"math/cmplx"

	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// ChartView is a picture of an experiment. T of its points is in XUnit, V in Unit;
// speeds are in rad/s. Where Powers is set, T is a logarithm to base 10.
type ChartView struct {
	Title       string
	XUnit, Unit string
	Powers      bool
	Zero        bool    // the vertical axis holds zero
	Lines       []Curve // measured
	Model       []Curve // what the model, or the fit to this experiment, says
	Dots        []Point // measured points that no line joins
	Bars        []Point // ends of the ± of the dots, in pairs
	Levels      []Point // lines across at V
}

// pictures are what is drawn of an experiment, by its step. They are made of the
// traces and of what was found, and nothing is computed from them.
var pictures = map[StepID]func(ExperimentSettings, []*trace.Trace, sheet.ExperimentRecord) []ChartView{
	StepCoast: drawCoast, StepRelay: drawRelay, StepFrequency: drawFrequency, StepMap: drawMap,
	StepMotor: drawFriction, StepResistance: drawResistance, StepWarmUp: drawWarmUp, StepNoise: drawNoise, StepTiming: drawStamps, StepReversal: drawReversal,
}

// curvePoints is how many points a drawn curve keeps.
const curvePoints = 400

// speedLine is the speed of a trace from one time to another, from zero on.
func speedLine(tr *trace.Trace, from, to float64) []Point { return stretch(tr, tr.Speed, from, to) }

func stretch(tr *trace.Trace, v []float64, from, to float64) (pts []Point) {
	for i, t := range tr.Time {
		if t >= from && t <= to {
			pts = append(pts, Point{t - from, v[i]})
		}
	}
	return fewer(pts, curvePoints)
}

// fewer keeps every so many of the points, so that about n are left.
func fewer(pts []Point, n int) []Point {
	if len(pts) <= n {
		return pts
	}
	every := (len(pts) + n - 1) / n
	out := pts[:0:0]
	for i := 0; i < len(pts); i += every {
		out = append(out, pts[i])
	}
	return out
}

// drawCoast lays all runs over one another from the moment the output went off, with
// the solution of the equation of motion beside each.
func drawCoast(_ ExperimentSettings, traces []*trace.Trace, _ sheet.ExperimentRecord) []ChartView {
	c := ChartView{Title: "coast-down from output off, rpm   dotted: dry and viscous friction", XUnit: "s", Unit: "rad/s", Zero: true}
	for i, tr := range traces {
		f, err := identify.FitCoast(tr)
		if err != nil {
			continue
		}
		off := tr.Len()
		for off > 0 && tr.Voltage[off-1] == 0 {
			off--
		}
		if off == tr.Len() {
			continue
		}
		zero := tr.Time[off]
		c.Lines = append(c.Lines, Curve{Name: fmt.Sprintf("run %d", i+1), Points: speedLine(tr, zero, tr.Time[tr.Len()-1])})
		begin := off
		for begin < tr.Len()-1 && math.Abs(tr.Speed[begin]) != math.Abs(f.Start) {
			begin++
		}
		var model []Point
		for t := tr.Time[begin]; t <= tr.Time[tr.Len()-1]; t += (tr.Time[tr.Len()-1] - zero) / curvePoints {
			w := coastSpeed(f, t-tr.Time[begin])
			if w < 0 {
				break
			}
			model = append(model, Point{t - zero, math.Copysign(w, f.Direction)})
		}
		c.Model = append(c.Model, Curve{Name: c.Lines[len(c.Lines)-1].Name, Points: model})
	}
	return []ChartView{c}
}

// coastSpeed is the magnitude of the speed h seconds after the first sample fitted:
// J·dω/dt = −T0 − b·ω.
func coastSpeed(f identify.Coast, h float64) float64 {
	w, c := math.Abs(f.Start), f.Viscous
	if math.Abs(c*h) < 1e-9 {
		return w - f.Dry*h
	}
	return w*math.Exp(-c*h) + f.Dry*math.Expm1(-c*h)/c
}

// relayShown is how many cycles of a relay run are drawn.
const relayShown = 4

// drawRelay draws the last cycles of the first run, with its thresholds, and the
// drive beneath.
func drawRelay(set ExperimentSettings, traces []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	period, _, ok := paramOf(rec, "period 1")
	if len(traces) == 0 || !ok {
		return nil
	}
	tr := traces[0]
	r, err := identify.FitRelay(tr, set.Numbers["middle_1"], set.Numbers["apart_1"], set.Numbers["upper_1"], set.Numbers["lower_1"])
	if err != nil {
		return nil
	}
	from := math.Max(r.From, r.To-relayShown*period)
	speed := ChartView{Title: "limit cycle, rpm   lines: thresholds", XUnit: "s", Unit: "rad/s", Lines: []Curve{{Name: "speed", Points: speedLine(tr, from, r.To)}},
		Levels: []Point{{V: set.Numbers["upper_1"]}, {V: set.Numbers["lower_1"]}}}
	drive := ChartView{Title: "drive, V", XUnit: "s", Unit: "V", Lines: []Curve{{Name: "drive", Points: stretch(tr, tr.Voltage, from, r.To)}}}
	return []ChartView{speed, drive}
}

// drawFrequency draws gain and phase against the model, and the coherence.
func drawFrequency(set ExperimentSettings, _ []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	const width = 6 // columns of one response
	if set.Model == nil || len(rec.Columns) < width {
		return nil
	}
	col := func(c int) []float64 { return values(rec.Columns[c]) }
	hz, gain, phase, coherence := col(0), col(1), col(2), col(3)
	var g, p, c []Point
	for i, f := range hz {
		if f > 0 {
			x := math.Log10(f)
			g, p, c = append(g, Point{x, 20 * math.Log10(gain[i])}), append(p, Point{x, phase[i]}), append(c, Point{x, coherence[i]})
		}
	}
	if len(g) < 2 {
		return nil
	}
	var mg, mp []Point
	last := 0.0
	for i := range curvePoints {
		x := g[0].T + (g[len(g)-1].T-g[0].T)*float64(i)/(curvePoints-1)
		m := set.Model.At(2 * math.Pi * math.Pow(10, x))
		last = unwrapped(m, last)
		mg, mp = append(mg, Point{x, 20 * math.Log10(cmplx.Abs(m))}), append(mp, Point{x, last})
	}
	return []ChartView{
		{Title: "gain, dB   dotted: model", XUnit: "Hz", Unit: "dB", Powers: true, Dots: g, Model: []Curve{{Name: "model", Points: mg}}},
		{Title: "phase, degrees   dotted: model", XUnit: "Hz", Unit: "deg", Powers: true, Dots: p, Model: []Curve{{Name: "model", Points: mp}}},
		{Title: "coherence   line: least", XUnit: "Hz", Unit: "1", Powers: true, Zero: true, Lines: []Curve{{Name: "coherence", Points: c}}, Levels: []Point{{V: coherentLeast}}},
	}
}

// drawMap draws gain and time constant over the operating points, with their ±, and
// the model's as lines.
func drawMap(set ExperimentSettings, _ []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	if set.Model == nil || len(rec.Columns) < 6 {
		return nil
	}
	speed := values(rec.Columns[1])
	over := func(title, unit string, at int, scale, model float64) ChartView {
		c := ChartView{Title: title, XUnit: "rpm", Unit: unit, Levels: []Point{{V: scale * model}}}
		v, pm := values(rec.Columns[at]), values(rec.Columns[at+1])
		for i, w := range speed {
			c.dot(w*60/(2*math.Pi), scale*v[i], scale*pm[i])
		}
		return c
	}
	return []ChartView{over("gain, rad/s/V, over rpm   line: model", "rad/s/V", 2, 1, set.Model.DCGain()),
		over("time constant, ms, over rpm   line: model", "ms", 4, 1e3, dominant(*set.Model))}
}

// dot adds a measured point with the ends of its ±.
func (c *ChartView) dot(x, v, pm float64) {
	c.Dots = append(c.Dots, Point{x, v})
	if pm > 0 {
		c.Bars = append(c.Bars, Point{x, v - pm}, Point{x, v + pm})
	}
}

// values are the numbers of a column, NaN where one is not known.
func values(s sheet.Series) []float64 {
	out := make([]float64, len(s.Values))
	for i, v := range s.Values {
		out[i] = math.NaN()
		if v != nil {
			out[i] = *v
		}
	}
	return out
}
