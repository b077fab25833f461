package job

import (
	"math"
	"slices"
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

// renewS is how often the console sends a setpoint that moves, in s: between two
// of them it stands, so that a ramp reaches the board as stairs.
const renewS = 0.010

// setpointStep is a change of the setpoint at slope rad/s².
type setpointStep struct{ from, to, slope float64 }

// parts are the stairs of a step, and the rest of hold.
func (s setpointStep) parts(hold float64) []design.Part {
	n := max(1, int(math.Ceil(math.Abs(s.to-s.from)/(s.slope*renewS)-1e-9)))
	stair := math.Copysign(s.slope*renewS, s.to-s.from)
	var p []design.Part
	for i := 1; i < n; i++ {
		w := s.from + float64(i)*stair
		p = append(p, design.Part{From: w, To: w, Duration: renewS})
	}
	return append(p, design.Part{From: s.to, To: s.to, Duration: math.Max(hold-float64(n-1)*renewS, renewS)})
}

// simulateLoop forecasts the closed loop over parts of a setpoint, from steady
// running at start.
func (j *Job) simulateLoop(g design.Gains, start float64, parts []design.Part) (design.Run, error) {
	sc := design.Scenario{StartSpeed: start, Friction: j.friction(), RadPerCount: j.ID.RadPerCount(), Window: j.ID.Window().Seconds(), Parts: parts}
	return design.SimulateLoop(j.loopModel(j.Fit.Best()), g, sc)
}

// forecastStep is the forecast answer to a step about a middle speed, for the
// screens.
func (j *Job) forecastStep(g design.Gains, middle float64) (speed, drive []Point, err error) {
	hold := 0.6
	if j.Margins != nil && j.Margins.Step.SettlingTime.Known() {
		hold = math.Min(math.Max(3*float64(j.Margins.Step.SettlingTime), 0.1), 30)
	}
	step := setpointStep{0.8 * middle, 1.2 * middle, 0.8 * j.Env.AccelMax}
	r, err := j.simulateLoop(g, step.from, step.parts(hold))
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

// phasesMost is how many places of the shaft between two counts a forecast is
// made for where one count shows.
const phasesMost = 8

// forecastMetrics is the forecast of one verify step with the same measures as
// the measured one: at the telemetry's rate, and of the speed in whole counts.
// Where a count shows, the middle of several places between two counts is taken.
func (j *Job) forecastMetrics(step setpointStep, hold time.Duration, band float64) (StepMetrics, []Point, error) {
	g := *j.closing()
	phases, quiet := 1, 5*g.SampleTime
	if j.sizing().SpeedStep > 0.002*math.Abs(step.to-step.from) {
		phases, quiet = phasesMost, math.Max(0.25*hold.Seconds(), 20*g.SampleTime)
	}
	each := 1
	if j.Hz > 0 {
		each = max(1, int(math.Round(1/(float64(j.Hz)*g.SampleTime))))
	}
	var all []StepMetrics
	var line []Point
	for p := range phases {
		// The time until the step decides where between two counts it begins.
		lead := quiet + float64(p)*1.618*g.SampleTime
		parts := append([]design.Part{{From: step.from, To: step.from, Duration: lead}}, step.parts(hold.Seconds())...)
		r, err := j.simulateLoop(g, step.from, parts)
		if err != nil {
			return StepMetrics{}, nil, err
		}
		var t, y []float64
		for i := int(math.Ceil(lead/g.SampleTime - 1e-9)); i < len(r.Time); i++ {
			at := r.Time[i] - lead
			if p == 0 {
				line = append(line, Point{at, r.Speed[i]})
			}
			if i%each == 0 {
				t, y = append(t, at), append(y, r.Measured[i])
			}
		}
		all = append(all, metricsOf(t, y, step.from, step.to, band))
	}
	m := StepMetrics{From: step.from, To: step.to}
	m.Overshoot = median(all, func(m StepMetrics) float64 { return m.Overshoot })
	m.Settling = median(all, func(m StepMetrics) float64 { return m.Settling })
	m.Ripple = median(all, func(m StepMetrics) float64 { return m.Ripple })
	return m, line, nil
}

func median(all []StepMetrics, of func(StepMetrics) float64) float64 {
	v := make([]float64, len(all))
	for i := range all {
		v[i] = of(all[i])
	}
	slices.Sort(v)
	return (v[(len(v)-1)/2] + v[len(v)/2]) / 2
}
