package design

import (
	"fmt"
	"math"
	"sort"

	"gainwright/protocol/si"
	"gainwright/tune/model"
)

// Friction is dry friction as volts at the drive, all ≥ 0: what it takes to keep
// the shaft turning slowly, and to start it.
type Friction struct {
	CoulombForward, CoulombReverse     float64
	BreakawayForward, BreakawayReverse float64
}

func (f Friction) none() bool { return f == Friction{} }

// Part is a piece of a setpoint profile: a straight line from From to To in
// rad/s over Duration in s.
type Part struct{ From, To, Duration float64 }

// Scenario is a run of the closed loop to be forecast.
type Scenario struct {
	Parts []Part
	// StartSpeed is the steady speed in rad/s that the run begins at.
	StartSpeed float64
	// RadPerCount and Window give the speed step RadPerCount/Window in rad/s that
	// the loop sees; 0 leaves the speed smooth.
	RadPerCount, Window float64
	// WindowLoops > 0 counts as a board does: the angle gone over the last so many
	// whole loops, a true mean. The model must then not have half of the window in
	// its dead time. 0 takes the speed at the sample, in whole counts a window.
	WindowLoops int
	Friction    Friction
}

// Run is a forecast of a closed loop, one entry a sample.
type Run struct {
	Period   float64   // s
	Time     []float64 // s
	Setpoint []float64 // rad/s
	Speed    []float64 // rad/s, as the loop's model has it
	Measured []float64 // rad/s, as the board sees it
	Drive    []float64 // V, after limits
}

// samplesMax bounds the length of a forecast.
const samplesMax = 5_000_000

// SimulateLoop runs the sampled loop exactly between samples: limits UMin and
// UMax with the anti-windup of g, feed-forward, whole dead time, quantised speed
// and dry friction. A shaft that friction holds is at rest in all its states.
func SimulateLoop(m model.Linear, g Gains, sc Scenario) (Run, error) {
	if err := m.Validate(); err != nil {
		return Run{}, err
	}
	if err := g.Validate(); err != nil {
		return Run{}, err
	}
	g = g.Parallel()
	if g.SampleTime <= 0 {
		return Run{}, badGains("sample_time is 0: a forecast of the closed loop needs that of the board")
	}
	if err := sc.validate(); err != nil {
		return Run{}, err
	}
	total := 0.0
	for _, p := range sc.Parts {
		total += p.Duration
	}
	n := int(math.Ceil(total/g.SampleTime - 1e-9))
	if n > samplesMax {
		return Run{}, fmt.Errorf("design: the run has %d samples, more than %d: shorten it", n, samplesMax)
	}
	s, err := newShaft(m, g, sc)
	if err != nil {
		return Run{}, err
	}
	run := Run{
		Period: g.SampleTime, Time: make([]float64, n), Setpoint: make([]float64, n),
		Speed: make([]float64, n), Measured: make([]float64, n), Drive: make([]float64, n),
	}
	c, profile := newLaw(g), &profile{parts: sc.Parts}
	s.settleAt(sc.StartSpeed, c)
	counter := newCounter(sc, g.SampleTime)
	for k := range n {
		t := float64(k) * g.SampleTime
		r := profile.at(t)
		y := s.speed()
		seen := counter.see(y)
		u := c.next(r, seen, g.Feedforward.volts(r))
		run.Time[k], run.Setpoint[k], run.Speed[k], run.Measured[k], run.Drive[k] = t, r, y, seen, u
		s.apply(u)
	}
	return run, nil
}

// linear is the part of the feed-forward that grows with the setpoint: what a unit
// step sees of it.
func (f *Feedforward) linear(r float64) float64 {
	if f == nil {
		return 0
	}
	return f.Speed * r
}

func (f *Feedforward) volts(r float64) float64 {
	switch {
	case f == nil || r == 0:
		return 0
	case r > 0:
		return f.Speed*r + f.StaticForward
	}
	return f.Speed*r - f.StaticReverse
}

func (sc Scenario) validate() error {
	if len(sc.Parts) == 0 {
		return fmt.Errorf("design: the setpoint profile is empty")
	}
	for i, p := range sc.Parts {
		if !si.Finite(p.From) || !si.Finite(p.To) || !si.Finite(p.Duration) || p.Duration <= 0 {
			return fmt.Errorf("design: part %d of the setpoint profile: from %g to %g rad/s in %g s: give finite speeds and a duration above 0", i+1, p.From, p.To, p.Duration)
		}
	}
	f := sc.Friction
	for _, v := range []float64{f.CoulombForward, f.CoulombReverse, f.BreakawayForward, f.BreakawayReverse, sc.RadPerCount, sc.Window, float64(sc.WindowLoops)} {
		if !si.Finite(v) || v < 0 {
			return fmt.Errorf("design: friction, count and window must be finite and not negative, got %g", v)
		}
	}
	if !si.Finite(sc.StartSpeed) {
		return fmt.Errorf("design: the speed at the start is not a finite number")
	}
	return nil
}

// profile walks along the parts of a setpoint.
type profile struct {
	parts []Part
	i     int
	begun float64 // of parts[i], s
}

// at returns the setpoint at time t, which does not go back; it stays at its last
// value.
func (p *profile) at(t float64) float64 {
	for p.i < len(p.parts) {
		x, q := t-p.begun, p.parts[p.i]
		if x < q.Duration-1e-12 {
			return q.From + (q.To-q.From)*x/q.Duration
		}
		p.begun += q.Duration
		p.i++
	}
	return p.parts[len(p.parts)-1].To
}

// shaft is the motor between samples, with friction.
type shaft struct {
	ss     model.StateSpace
	x, dx  []float64
	f      Friction
	past   []float64 // drive history, a ring
	k      int
	whole  int
	pieces [2]piece // under the older and under the newer drive
}

// piece is the part of a period under one drive, in equal steps.
type piece struct {
	steps int
	e, g  []float64
}

// frictionSteps is how often a period is looked at for a shaft that stops.
const frictionSteps = 4

func newShaft(m model.Linear, g Gains, sc Scenario) (*shaft, error) {
	d, err := m.Sample(g.SampleTime, g.ComputeDelay)
	if err != nil {
		return nil, err
	}
	ss := m.StateSpace()
	if ss.D != 0 {
		return nil, fmt.Errorf("%w: num has the degree of den: a forecast needs a shaft with inertia", model.ErrModel)
	}
	s := &shaft{ss: ss, f: sc.Friction, x: make([]float64, ss.N), dx: make([]float64, ss.N), past: make([]float64, d.Whole+2), whole: d.Whole}
	for i, span := range []float64{d.Rest, d.H - d.Rest} {
		if span == 0 {
			continue
		}
		p := piece{steps: 1}
		if !s.f.none() {
			p.steps = int(math.Ceil(frictionSteps*span/d.H - 1e-9))
		}
		p.e, p.g = ss.Hold(span / float64(p.steps))
		s.pieces[i] = p
	}
	return s, nil
}

// settleAt starts the motor and the law in the steady state at a speed.
func (s *shaft) settleAt(speed float64, c *law) {
	if speed == 0 {
		return
	}
	// A·x + B·v = 0 with C·x = speed. In the companion form the last state is
	// free and the others are 0, except that an integrating motor needs no drive.
	n := s.ss.N
	s.x[n-1] = speed / s.ss.C[n-1]
	v := -s.ss.A[n-1] * s.x[n-1] / s.ss.B[0]
	if speed > 0 {
		v += s.f.CoulombForward
	} else {
		v -= s.f.CoulombReverse
	}
	for i := range s.past {
		s.past[i] = v
	}
	s.k = len(s.past)
	g := &c.g
	p := g.Kp*(g.SetpointWeight-1)*speed + g.Feedforward.volts(speed)
	c.integral, c.lastU, c.lastP = v-p, v, p
	if g.DerivativeOn != OnError {
		c.lastIn = -speed
	}
}

func (s *shaft) speed() float64 {
	var y float64
	for i, c := range s.ss.C {
		y += c * s.x[i]
	}
	return y
}

func (s *shaft) at(j int) float64 {
	if j > s.k {
		return 0
	}
	return s.past[(s.k-j)%len(s.past)]
}

func (s *shaft) apply(u float64) {
	s.past[s.k%len(s.past)] = u
	s.advance(&s.pieces[0], s.at(s.whole+1))
	s.advance(&s.pieces[1], s.at(s.whole))
	s.k++
}

func (s *shaft) advance(p *piece, drive float64) {
	n := s.ss.N
	for range p.steps {
		before := s.speed()
		v, held := s.net(drive, before)
		if held {
			clear(s.x)
			continue
		}
		for i := range n {
			d := p.g[i] * v
			for j, e := range p.e[i*n : (i+1)*n] {
				d += e * s.x[j]
			}
			s.dx[i] = d
		}
		for i := range s.x {
			s.x[i] += s.dx[i]
		}
		// Friction does not turn the shaft round: where it would, the shaft stops
		// and starts again only if the drive breaks it away.
		if !s.f.none() && before*s.speed() < 0 {
			clear(s.x)
		}
	}
}

// net returns the drive less friction, and whether friction holds the shaft.
func (s *shaft) net(drive, speed float64) (float64, bool) {
	if s.f.none() {
		return drive, false
	}
	switch {
	case speed > 0:
		return drive - s.f.CoulombForward, false
	case speed < 0:
		return drive + s.f.CoulombReverse, false
	case drive > math.Max(s.f.BreakawayForward, s.f.CoulombForward):
		return drive - s.f.CoulombForward, false
	case drive < -math.Max(s.f.BreakawayReverse, s.f.CoulombReverse):
		return drive + s.f.CoulombReverse, false
	}
	return 0, true
}

// Measure describes the answer of the run to the setpoint change at the time at
// in s, from one speed to another, until the time end (0: the end of the run).
// band is the half-width of the settling band in rad/s. Overshoot is in percent
// of the change; IAE is in rad/s·s per rad/s.
func (r Run) Measure(at, end, from, to, band float64) Step {
	i := int(math.Round(at / r.Period))
	j := len(r.Speed)
	if end > 0 {
		j = min(j, int(math.Round(end/r.Period)))
	}
	if i < 0 || i >= j || from == to {
		return Step{Unknown, Unknown, Unknown, Unknown}
	}
	y := make([]float64, j-i)
	for k := range y {
		y[k] = r.Speed[i+k] - from
	}
	return sampledStep(y, to-from, r.Period, band/math.Abs(to-from))
}

// SteadyRMS returns the RMS of setpoint − speed in rad/s from a time on, in s.
func (r Run) SteadyRMS(from float64) float64 {
	var sum float64
	n := 0
	for i, t := range r.Time {
		if t >= from {
			e := r.Setpoint[i] - r.Speed[i]
			sum += e * e
			n++
		}
	}
	if n == 0 {
		return math.NaN()
	}
	return math.Sqrt(sum / float64(n))
}

// SettlingBand returns the half-width in rad/s of the band that a verify settles
// into: the largest of 2 % of the change, one speed step, three times the steady
// RMS.
func SettlingBand(change, speedStep, steadyRMS float64) float64 {
	return math.Max(settlingBand*math.Abs(change), math.Max(speedStep, 3*steadyRMS))
}

// Band is what a forecast may become over the spread of a motor: the 2.5 % and
// 97.5 % points of the speed at each sample, and of the numbers of the step.
type Band struct {
	Low, High                  []float64 // rad/s
	OvershootLow, OvershootTop float64   // percent
	SettlingLow, SettlingTop   Value     // s; Unknown if too many draws do not settle
}

// SimulateBand runs the scenario on draws motors of the spread (30 to 1000) and
// measures each as Measure does.
func SimulateBand(m model.Linear, g Gains, sc Scenario, s Spread, draws int, at, end, from, to, band float64) (Band, error) {
	if draws < 30 || draws > 1000 {
		return Band{}, fmt.Errorf("design: %d draws for a band: give 30 to 1000", draws)
	}
	d, err := newDrawer(m, s)
	if err != nil {
		return Band{}, err
	}
	var runs []Run
	var over, settle []float64
	for range draws {
		r, err := SimulateLoop(d.next(), g, sc)
		if err != nil {
			return Band{}, err
		}
		step := r.Measure(at, end, from, to, band)
		over = append(over, orElse(step.Overshoot, math.Inf(1)))
		settle = append(settle, orElse(step.SettlingTime, math.Inf(1)))
		runs = append(runs, r)
	}
	out := Band{
		OvershootLow: part(over, 0.025), OvershootTop: part(over, 0.975),
		SettlingLow: Value(part(settle, 0.025)), SettlingTop: Value(part(settle, 0.975)),
	}
	column := make([]float64, draws)
	for k := range runs[0].Speed {
		for i, r := range runs {
			column[i] = r.Speed[k]
		}
		sort.Float64s(column)
		out.Low = append(out.Low, part(column, 0.025))
		out.High = append(out.High, part(column, 0.975))
	}
	return out, nil
}
