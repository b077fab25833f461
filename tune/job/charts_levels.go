package job

import (
	"fmt"
	"math"

	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// drawFriction draws torque over speed on the levels of the staircase, with the line
// of Coulomb and viscous friction each way, where the current is measured.
func drawFriction(set ExperimentSettings, _ []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	ke := set.Numbers["ke"]
	c := ChartView{Title: "friction, mN m, over rpm   dotted: Coulomb and viscous", XUnit: "rpm", Unit: "mN m", Zero: true}
	top := 0.0
	for i := 1; i < 100; i++ {
		key := fmt.Sprintf("level%02d_", i)
		w, ok := set.Numbers[key+"speed"]
		if !ok {
			break
		}
		top = math.Max(top, math.Abs(w))
		c.dot(w*60/(2*math.Pi), 1e3*ke*set.Numbers[key+"current"], 0)
	}
	if ke == 0 || len(c.Dots) == 0 {
		return nil
	}
	for way, name := range map[float64]string{1: "forward", -1: "reverse"} {
		dry, _, ok := paramOf(rec, "Coulomb friction "+name)
		viscous, _, known := paramOf(rec, "viscous friction "+name)
		if ok && known {
			c.Model = append(c.Model, Curve{Name: name, Points: []Point{{0, 1e3 * way * dry}, {way * top * 60 / (2 * math.Pi), 1e3 * way * (dry + viscous*top)}}})
		}
	}
	return []ChartView{c}
}

// overColumn draws one column over another, with a third as its ±.
func overColumn(rec sheet.ExperimentRecord, x, y, pm int, c ChartView) []ChartView {
	if len(rec.Columns) <= max(x, y, pm) {
		return nil
	}
	xs, ys := values(rec.Columns[x]), values(rec.Columns[y])
	for i := range xs {
		w := 0.0
		if pm >= 0 {
			w = values(rec.Columns[pm])[i]
		}
		c.dot(xs[i], ys[i], w)
	}
	return []ChartView{c}
}

func drawResistance(_ ExperimentSettings, _ []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	return overColumn(rec, 0, 1, 2, ChartView{Title: "R, ohm, by angle", XUnit: "", Unit: "ohm"})
}

func drawWarmUp(_ ExperimentSettings, _ []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	return overColumn(rec, 1, 2, -1, ChartView{Title: "speed over volts, rad/s/V, as it warms", XUnit: "s", Unit: "rad/s/V"})
}

func drawNoise(_ ExperimentSettings, _ []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	return overColumn(rec, 0, 1, -1, ChartView{Title: "lines lost, over V", XUnit: "V", Unit: "1", Zero: true})
}

// drawStamps draws how far the board's stamps lie from an even clock, with quick
// telemetry.
func drawStamps(set ExperimentSettings, traces []*trace.Trace, rec sheet.ExperimentRecord) []ChartView {
	if len(traces) == 0 || traces[0].Len() < 3 || !(set.Numbers["loop"] > 0) {
		return nil
	}
	loop, _, ok := paramOf(rec, "loop period, quick telemetry")
	if !ok {
		return nil
	}
	c := ChartView{Title: "board time less an even clock, µs", XUnit: "s", Unit: "µs", Zero: true}
	t := traces[0].Time
	var pts []Point
	for _, x := range t {
		n := math.Round((x - t[0]) / loop)
		off := 1e6 * (x - t[0] - n*loop)
		pts = append(pts, Point{x - t[0], math.Round(100*off) / 100}) // stamps are whole µs
	}
	c.Lines = []Curve{{Name: "stamps", Points: fewer(pts, curvePoints)}}
	return []ChartView{c}
}

// drawReversal draws the ramps: drive, and how far the shaft moved.
func drawReversal(_ ExperimentSettings, traces []*trace.Trace, _ sheet.ExperimentRecord) []ChartView {
	if len(traces) != 1 || traces[0].Len() < 2 {
		return nil
	}
	tr := traces[0]
	end := tr.Time[tr.Len()-1]
	return []ChartView{
		{Title: "drive, V", XUnit: "s", Unit: "V", Zero: true, Lines: []Curve{{Name: "drive", Points: stretch(tr, tr.Voltage, tr.Time[0], end)}}},
		{Title: "speed, rpm", XUnit: "s", Unit: "rad/s", Zero: true, Lines: []Curve{{Name: "speed", Points: speedLine(tr, tr.Time[0], end)}}},
	}
}

// showBreakaway puts the drive at which each ramp started the shaft on the screens.
func (j *Job) showBreakaway() {
	c := ChartView{Title: "drive at first motion, V, by ramp   lines: means", Unit: "V", Zero: true}
	for n, v := range j.BreakForward {
		c.dot(float64(n+1), v, 0)
	}
	for n, v := range j.BreakReverse {
		c.dot(float64(n+1), -v, 0)
	}
	finding := ""
	if len(j.BreakForward) > 0 {
		c.Levels = append(c.Levels, Point{V: mean(j.BreakForward)})
		finding = fmt.Sprintf("%.3g ± %.2g V forward", mean(j.BreakForward), 2*spread(j.BreakForward))
	}
	if len(j.BreakReverse) > 0 {
		c.Levels = append(c.Levels, Point{V: -mean(j.BreakReverse)})
		finding += fmt.Sprintf(", %.3g ± %.2g V reverse", mean(j.BreakReverse), 2*spread(j.BreakReverse))
	}
	j.picture(StepBreakaway, finding, c)
}

// showStairs puts steady speed over volts on the screens, with the line through it.
func (j *Job) showStairs(finding string) {
	s := j.Static
	c := ChartView{Title: "steady speed, rpm, over V   dotted: gain and sliding friction", XUnit: "V", Unit: "rad/s", Zero: true}
	low, high := 0.0, 0.0
	for _, l := range j.Levels {
		c.dot(l.Volts, l.Speed, 1.96*l.SpeedSD)
		low, high = math.Min(low, l.Volts), math.Max(high, l.Volts)
	}
	if s.GainForward > 0 && high > s.CoulombForward {
		c.Model = append(c.Model, Curve{Name: "forward", Points: []Point{{s.CoulombForward, 0}, {high, s.GainForward * (high - s.CoulombForward)}}})
	}
	if s.GainReverse > 0 && -low > s.CoulombReverse {
		c.Model = append(c.Model, Curve{Name: "reverse", Points: []Point{{low, s.GainReverse * (low + s.CoulombReverse)}, {-s.CoulombReverse, 0}}})
	}
	j.picture(StepStaircase, finding, c)
}

// picture keeps a chart of a step that is not an optional experiment.
func (j *Job) picture(id StepID, finding string, c ChartView) {
	if j.charts == nil {
		j.charts = map[StepID][]ChartView{}
	}
	if j.findings == nil {
		j.findings = map[StepID]string{}
	}
	j.charts[id], j.findings[id] = []ChartView{c}, finding
	j.showExperiments()
}
