package job

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"time"

	"gainwright/safety"
	"gainwright/tune/design"
	"gainwright/tune/sheet"
)

// Draws of a forecast of steps, and the shares of them that its band leaves out
// at either end (our choice).
const (
	stepDraws   = 24        // of a verify
	drawsLeast  = 12        // also of the step as found
	drawSamples = 3_000_000 // of all draws together
	bandTail    = 0.05
)

// The widest that the band of a forecast may be, either way: what is forecast
// less well has to be called a miss.
const (
	overshootMost = 10.0 // points
	settlingMost  = 0.30 // of the settling time
)

// stepsForecast is a run of steps on motors drawn from the ± of the fit, each seen
// through counts, speed window and telemetry as the board's own run is.
type stepsForecast struct {
	count  float64 // rad/s, one speed step
	draws  [][]course
	line   design.Run  // of the fitted model itself
	speeds [][]float64 // of the draws, on the times of line
}

// forecastSteps simulates a plan of levels, hold each, on up to draws motors.
func (j *Job) forecastSteps(plan safety.Plan, levels []float64, hold time.Duration, draws int) (*stepsForecast, error) {
	fit, g := j.Fit.Best(), *j.closing()
	parts := planParts(plan)
	out := &stepsForecast{count: j.sizing().SpeedStep}
	var err error
	if out.line, err = j.simulateLoop(g, 0, parts); err != nil {
		return nil, err
	}
	n := min(draws, max(drawsLeast, drawSamples/max(1, len(out.line.Time))))
	set := j.designSettings()
	motors, err := design.Likely(fit.Model, set.spread(*fit, fit.Model), n)
	if err != nil {
		return nil, err
	}
	each := 1
	if j.Hz > 0 {
		each = max(1, int(math.Round(1/(float64(j.Hz)*g.SampleTime))))
	}
	loops := max(1, int(math.Round(j.ID.Window().Seconds()/g.SampleTime)))
	r := rand.New(rand.NewPCG(set.Seed, 0x76657269667920))
	for _, m := range motors {
		// The run begins anywhere between two loops and two telemetry lines.
		lead := r.Float64() * g.SampleTime * float64(each)
		skip := r.IntN(each)
		sc := design.Scenario{Friction: j.friction(), RadPerCount: j.ID.RadPerCount(), WindowLoops: loops,
			Parts: append([]design.Part{{Duration: math.Max(lead, 1e-9)}}, parts...)}
		run, err := design.SimulateLoop(m, g, sc)
		if err != nil {
			return nil, err
		}
		out.draws = append(out.draws, simulatedCourses(run, each, skip, lead, levels, hold))
		out.speeds = append(out.speeds, run.Speed[min(int(math.Round(lead/g.SampleTime)), len(run.Speed)-1):])
	}
	return out, nil
}

// simulatedCourses are the steps of a forecast run as telemetry would show them.
func simulatedCourses(run design.Run, each, skip int, lead float64, levels []float64, hold time.Duration) []course {
	var t, r, y []float64
	for i := skip; i < len(run.Time); i += each {
		t, r, y = append(t, run.Time[i]-lead), append(r, run.Setpoint[i]), append(y, run.Measured[i])
	}
	var out []course
	turning(levels, hold, func(from, to float64, at time.Duration) {
		a, _ := slices.BinarySearch(t, at.Seconds())
		b, _ := slices.BinarySearch(t, (at + hold).Seconds())
		if c, ok := newCourse(t[max(a-1, 0):b], r[max(a-1, 0):b], y[max(a-1, 0):b], from, to); ok {
			out = append(out, c)
		}
	})
	return out
}

// share is the value under which the share p of sorted values lies.
func share(sorted []float64, p float64) float64 {
	x := p * float64(len(sorted)-1)
	i := min(int(x), len(sorted)-2)
	return sorted[i] + (x-float64(i))*(sorted[i+1]-sorted[i])
}

// StepBand is a forecast of steps with its band: from Low to High, the value in
// the middle.
type StepBand struct {
	StepMetrics
	Low, High StepMetrics
}

// why says what a forecast rests on.
func (b StepBand) why(band string) string {
	return fmt.Sprintf("forecast %s in nine of ten motors drawn from the ± of the fit, seen through counts, speed window and telemetry as the run is", band)
}

// record is the forecast for the record, with the ends of its band.
func (b StepBand) record() *sheet.StepResult {
	r := b.StepMetrics.record(0)
	r.RippleRadS = nil
	r.OvershootLow, r.OvershootHigh, r.SettlingLow, r.SettlingHigh = &b.Low.Overshoot, &b.High.Overshoot, &b.Low.Settling, &b.High.Settling
	return r
}

// record is what was measured for the record; ripple is the RMS at rest in rad/s.
func (m StepMetrics) record(ripple float64) *sheet.StepResult {
	return &sheet.StepResult{StepRadS: &m.Step, OvershootPercent: &m.Overshoot, SettlingTimeS: &m.Settling, SettlingBandRadS: &m.Band, RippleRadS: ptr(2 * ripple)}
}

// against measures the run and its forecast in the same band: 2 % of the step, one
// speed step, or three times what the mean of the steps shows at rest, measured or forecast.
func (f *stepsForecast) against(measured []course) (StepMetrics, StepBand) {
	rest := make([]float64, len(f.draws))
	for i, d := range f.draws {
		rest[i] = meanCourse(d).bandOf()
	}
	slices.Sort(rest)
	band := math.Max(math.Max(meanCourse(measured).bandOf(), share(rest, 0.5)), f.count/math.Abs(measured[0].to-measured[0].from))
	var over, settle []float64
	for _, d := range f.draws {
		m := measure(d, band)
		over, settle = append(over, m.Overshoot), append(settle, m.Settling)
	}
	slices.Sort(over)
	slices.Sort(settle)
	m := measure(measured, band)
	out := StepBand{StepMetrics: m, Low: m, High: m}
	out.Low.Overshoot, out.High.Overshoot = share(over, bandTail), share(over, 1-bandTail)
	out.Low.Settling, out.High.Settling = share(settle, bandTail), share(settle, 1-bandTail)
	out.Overshoot = (out.Low.Overshoot + out.High.Overshoot) / 2
	out.Settling = (out.Low.Settling + out.High.Settling) / 2
	out.Low.Overshoot, out.High.Overshoot = math.Max(out.Low.Overshoot, out.Overshoot-overshootMost), math.Min(out.High.Overshoot, out.Overshoot+overshootMost)
	out.Low.Settling, out.High.Settling = math.Max(out.Low.Settling, (1-settlingMost)*out.Settling), math.Min(out.High.Settling, (1+settlingMost)*out.Settling)
	return m, out
}

// draw adds forecast and band to a curve that was measured.
func (f *stepsForecast) draw(c *sheet.VerifyCurve) {
	column := make([]float64, len(f.speeds))
	for _, t := range c.TimeS {
		i := max(int(math.Round(t/f.line.Period)), 0)
		at := func(v []float64) float64 { return v[min(i, len(v)-1)] }
		for k, v := range f.speeds {
			column[k] = at(v)
		}
		slices.Sort(column)
		c.ForecastRadS = append(c.ForecastRadS, at(f.line.Speed))
		c.LowRadS, c.HighRadS = append(c.LowRadS, share(column, bandTail)), append(c.HighRadS, share(column, 1-bandTail))
	}
}
