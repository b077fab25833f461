package job

import (
	"math"
	"time"

	"gainwright/tune/design"
)

// friction is dry friction in volts as far as it is known.
func (j *Job) friction() design.Friction {
	var f design.Friction
	if s := j.Static; s != nil {
		f.CoulombForward, f.CoulombReverse = orZero(s.CoulombForward), orZero(s.CoulombReverse)
	}
	if len(j.BreakForward) > 0 {
		f.BreakawayForward = math.Max(mean(j.BreakForward), f.CoulombForward)
	}
	if len(j.BreakReverse) > 0 {
		f.BreakawayReverse = math.Max(mean(j.BreakReverse), f.CoulombReverse)
	}
	return f
}

func orZero(v float64) float64 {
	if math.IsNaN(v) || v < 0 {
		return 0
	}
	return v
}

// simulateLoop forecasts a step of the setpoint between two speeds, from steady
// running at the first.
func (j *Job) simulateLoop(g design.Gains, from, to, hold float64) (design.Run, error) {
	change := math.Max(g.SampleTime, math.Abs(to-from)/(0.8*j.Env.AccelMax))
	sc := design.Scenario{StartSpeed: from, Friction: j.friction(), RadPerCount: j.ID.RadPerCount(), Window: j.ID.Window().Seconds(),
		Parts: []design.Part{{From: from, To: to, Duration: change}, {From: to, To: to, Duration: math.Max(hold-change, 10*g.SampleTime)}}}
	return design.SimulateLoop(j.loopModel(j.Fit.Best()), g, sc)
}

// forecastStep is the forecast answer to a step about a middle speed, for the
// screens.
func (j *Job) forecastStep(g design.Gains, middle float64) (speed, drive []Point, err error) {
	hold := 0.6
	if j.Margins != nil && j.Margins.Step.SettlingTime.Known() {
		hold = math.Min(math.Max(3*float64(j.Margins.Step.SettlingTime), 0.1), 30)
	}
	r, err := j.simulateLoop(g, 0.8*middle, 1.2*middle, hold)
	if err != nil {
		return nil, nil, err
	}
	return thin(r.Time, r.Speed), thin(r.Time, r.Drive), nil
}

// shownMax is how many points of a computed curve a screen gets.
const shownMax = 600

func thin(t, v []float64) []Point {
	each := max(1, len(t)/shownMax)
	var p []Point
	for i := 0; i < len(t); i += each {
		p = append(p, Point{t[i], v[i]})
	}
	return p
}

// forecastMetrics is the forecast of one verify step with the same measures as
// the measured one.
func (j *Job) forecastMetrics(from, to float64, hold time.Duration, band float64) (StepMetrics, []Point, error) {
	r, err := j.simulateLoop(*j.Gains, from, to, hold.Seconds())
	if err != nil {
		return StepMetrics{}, nil, err
	}
	s := r.Measure(0, 0, from, to, band)
	m := StepMetrics{From: from, To: to, Overshoot: orZero(float64(s.Overshoot)), Settling: hold.Seconds()}
	if s.SettlingTime.Known() {
		m.Settling = float64(s.SettlingTime)
	}
	p := make([]Point, len(r.Time))
	for i := range p {
		p[i] = Point{r.Time[i], r.Speed[i]}
	}
	return m, p, nil
}
