package job

import (
	"fmt"
	"math"
	"time"

	"gainwright/safety"
	"gainwright/tune/design"
	"gainwright/tune/trace"
)

// Shares of the sizing of closed-loop runs (our choice).
const (
	currentShare = 0.75 // of the current limit, in the forecast
	seenShare    = 1.0  // of the drive over back-EMF that an open-loop run has had, where no current is known
	slopeFactor  = 0.7  // from one try to the next
	slopeTries   = 40
)

// ohms is the resistance from terminal to terminal: measured, else that of the
// rig file, else 0.
func (j *Job) ohms() float64 {
	if j.electric != nil {
		return j.electric.R
	}
	return j.Rig.Motor.Resistance
}

// backEMF is Ke in V·s/rad: measured, else the rig file's, else 1/gain, which is
// larger by what viscous friction takes.
func (j *Job) backEMF() float64 {
	switch {
	case j.electric != nil && j.electric.Ke > 0:
		return j.electric.Ke
	case j.Rig.Motor.Ke > 0:
		return j.Rig.Motor.Ke
	case j.Gain > 0:
		return 1 / j.Gain
	}
	return 0
}

// closing is the law that closed-loop runs go by now: the one found while its
// trace is taken, else the proposal.
func (j *Job) closing() *design.Gains {
	if j.foundGains != nil {
		return j.foundGains
	}
	return j.Gains
}

// overdrive is the largest drive over back-EMF in volts that a closed loop may
// use: what the current limit allows, or, where nothing says what a volt gives in
// amperes, about what the open-loop tests have had without harm. 0: not known.
func (j *Job) overdrive() (volts float64, why string) {
	if r := j.ohms(); r > 0 {
		return currentShare * float64(j.Env.CurrentMax) * r, fmt.Sprintf("%.0f %% of the current limit", 100*currentShare)
	}
	ke, top := j.backEMF(), 0.0
	for _, tr := range []*trace.Trace{j.StepTrace, j.SecondTrace} {
		if tr == nil {
			continue
		}
		for i := range tr.Voltage {
			top = math.Max(top, math.Abs(tr.Voltage[i]-ke*tr.Speed[i]))
		}
	}
	return math.Min(seenShare*top, currentShare*float64(j.Env.CurrentMax)*j.lowOhms()), "the drive over back-EMF that the open-loop tests have had"
}

// loopSlope is the steepest slope of the setpoint, in rad/s², at which the
// forecast of the closed loop keeps current and speed inside: a step would drive
// the winding with all that the gains make of it.
// A slow ramp makes the levels longer: hold is returned as it has to be.
func (j *Job) loopSlope(levels []float64, hold time.Duration, speedMax float64) (slope float64, longer time.Duration, err error) {
	most, why := j.overdrive()
	farthest, from := 0.0, 0.0
	for _, to := range levels {
		farthest, from = math.Max(farthest, math.Abs(to-from)), to
	}
	slope = math.Min(0.8*j.Env.AccelMax, farthest/renewS)
	room := j.busRoom(false)
	seen := math.Min(hold.Seconds(), 2*settlingOr(j, 0.3)+0.2) // long enough for the peak
	if !math.IsInf(room, 1) {
		seen = hold.Seconds() // what comes back adds up
	}
	var peak, top, bus float64
	for range slopeTries {
		ramp := farthest / slope
		if longer = hold + seconds(ramp).Round(10*time.Millisecond); longer*time.Duration(len(levels)) > j.Env.RunTimeMax-time.Second {
			break
		}
		var parts []design.Part
		from = 0
		for _, to := range levels {
			step := setpointStep{from, to, slope}
			parts = append(parts, step.parts(seen+math.Abs(to-from)/slope)...)
			from = to
		}
		r, err := j.simulateLoop(*j.closing(), 0, parts)
		if err != nil {
			return 0, 0, err
		}
		peak, top = j.peaks(r)
		if bus = j.loopBus(r); (most == 0 || peak <= most) && top <= speedMax && bus <= room {
			return slope, longer, nil
		}
		slope *= slopeFactor
	}
	return 0, 0, refuse(725, "closed loop refused", fmt.Sprintf("no ramp of the setpoint keeps the forecast inside: at best %.3g V over back-EMF, allowed %.3g V (%s); %s, allowed %s; bus %.2g V up, allowed %.2g V", peak, most, why, rpm(top), rpm(speedMax), bus, room),
		"choose a smaller Ms bound, or look at the current limit of the rig file")
}

// peaks are the largest drive over back-EMF, in V, and the largest speed of a
// forecast. The inductance is left out, so that the drive counts as current at
// once.
func (j *Job) peaks(r design.Run) (over, top float64) {
	ke := j.backEMF()
	for i, u := range r.Drive {
		over = math.Max(over, math.Abs(u-ke*r.Speed[i]))
		top = math.Max(top, math.Abs(r.Speed[i]))
	}
	return over, top
}

// planParts is the setpoint of a closed-loop plan as the board gets it: the value
// of every tick stands until the next.
func planParts(p safety.Plan) []design.Part {
	var parts []design.Part
	tick := seconds(renewS)
	var at, begun time.Duration
	for _, s := range p.Segments {
		for ; at < begun+s.Duration; at += tick {
			w := s.From + (s.To-s.From)*float64(at-begun)/float64(s.Duration)
			if n := len(parts); n > 0 && parts[n-1].To == w {
				parts[n-1].Duration += renewS
				continue
			}
			parts = append(parts, design.Part{From: w, To: w, Duration: renewS})
		}
		begun += s.Duration
	}
	return parts
}

// loopCourse is the forecast of a closed-loop plan by the sampled loop itself;
// false where there is no model or no gains yet.
func (j *Job) loopCourse(p safety.Plan) (r design.Run, over, top float64, ok bool) {
	if j.closing() == nil || j.Fit == nil || j.Fit.Best() == nil || len(p.Segments) == 0 || p.Segments[0].Mode != safety.ModeSpeed {
		return r, 0, 0, false
	}
	r, err := j.simulateLoop(*j.closing(), 0, planParts(p))
	if err != nil {
		return r, 0, 0, false
	}
	over, top = j.peaks(r)
	return r, over, top, true
}
