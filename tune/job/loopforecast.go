package job

import (
	"math"

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
