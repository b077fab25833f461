package job

import (
	"errors"
	"fmt"
	"math"
	"time"

	"gainwright/safety"
	"gainwright/tune/design"
	"gainwright/tune/excite"
	"gainwright/tune/sheet"
)

// Bounds of the saturating step (our choice).
const (
	windupTop   = 0.95 // of top speed, in the forecast
	windupDrive = 0.93 // of the drive, at the speed that it ends at
	windupLeast = 10 * time.Millisecond
)

// windupStep is a step that the drive cannot follow: whether the integral winds up
// shows in what comes after.
type windupStep struct {
	levels  []float64
	hold    time.Duration
	plan    safety.Plan
	atLimit time.Duration // that the drive is at its limit, in the forecast
}

// findWindup looks for the smallest step up that takes the drive to its limit
// inside all bounds; slope leads to its beginning.
func (j *Job) findWindup(hold time.Duration, slope float64) (w windupStep, why string) {
	why = "no step inside current, speed and bus limits takes the drive to its limit"
	top, uMax := float64(j.Env.SpeedMax), float64(j.Env.VoltsMax)
	most, _ := j.overdrive()
	for _, high := range []float64{0.9, 0.75, 0.6} {
		to := high * top
		if to/j.Gain+j.slidingVolts() > windupDrive*uMax {
			continue
		}
		for _, low := range []float64{0.8, 0.6, 0.4, 0.2} {
			try := j.windupPlan(low*to, to, hold, slope)
			if try.plan.Duration() > j.Env.RunTimeMax-time.Second || j.farthest(try.levels, try.hold) > verifyTurns*j.Env.TurnsMax {
				continue
			}
			r, err := j.simulateLoop(*j.closing(), 0, planParts(try.plan))
			if err != nil {
				return w, err.Error()
			}
			over, fastest := j.peaks(r)
			if most > 0 && over > most || fastest > windupTop*top || j.loopBus(r) > j.busRoom(false) {
				break // a larger step is over as well
			}
			if try.atLimit = atLimit(r, uMax, try.hold); try.atLimit >= windupLeast {
				return try, ""
			}
		}
	}
	return w, why
}

// atLimit is for how long a forecast is at the limit of the drive after a time.
func atLimit(r design.Run, uMax float64, after time.Duration) time.Duration {
	n := 0
	for i, u := range r.Drive {
		if r.Time[i] >= after.Seconds() && u >= 0.999*uMax {
			n++
		}
	}
	return seconds(float64(n) * r.Period)
}

// windupPlan goes to from on a ramp, and on to to as steeply as allowed.
func (j *Job) windupPlan(from, to float64, hold time.Duration, slope float64) windupStep {
	p := excite.Setpoint(j.sizing(), "saturating step", "does the integral wind up while the drive is at its limit?", []float64{from}, hold+seconds(from/slope).Round(10*time.Millisecond), slope)
	first := p.Duration()
	jump := seconds((to - from) / (0.8 * j.Env.AccelMax)).Round(10 * time.Millisecond)
	jump = max(jump, 10*time.Millisecond)
	p.Segments = append(p.Segments, safety.Segment{Mode: safety.ModeSpeed, From: from, To: to, Duration: jump, Note: "saturating step"},
		safety.Segment{Mode: safety.ModeSpeed, From: to, To: to, Duration: first - jump, Note: rpm(to)})
	return windupStep{levels: []float64{from, to}, hold: first, plan: p}
}

// verifyWindup has the drive at its limit for a moment, and adds to the record what
// came of it against the forecast.
func (j *Job) verifyWindup(rec *sheet.VerifyRecord, hold time.Duration, slope float64) error {
	w, why := j.findWindup(hold, slope)
	if why != "" {
		rec.Finding += "; saturating step not tried: " + why
		return nil
	}
	r, err := j.run(StepVerify, w.plan, nil)
	if errors.Is(err, ErrDeclined) {
		rec.Finding += "; saturating step put aside"
		return nil
	}
	if err != nil {
		return err
	}
	if r.Reason != safety.EndDone {
		return j.notDone(r)
	}
	rec.TraceFiles = append(rec.TraceFiles, r.File)
	c, ok := courseOf(window(r, w.hold, 2*w.hold), w.levels[0], w.levels[1])
	if !ok {
		return refuse(752, "verify", "the saturating step could not be measured", "look at the trace in the record")
	}
	all, err := j.forecastSteps(w.plan, w.levels, w.hold, drawsLeast)
	if err != nil {
		return err
	}
	m, f := all.against([]course{c})
	ok = m.Overshoot <= math.Max(j.Rig.Targets.Overshoot, f.Overshoot+overshootMost)
	rec.Targets = append(rec.Targets, sheet.Target{Name: "overshoot, saturated", Unit: "%", Limit: fmt.Sprintf("<= %.1f", math.Max(j.Rig.Targets.Overshoot, f.Overshoot+overshootMost)),
		Measured: &m.Overshoot, Forecast: &f.Overshoot, Passed: &ok,
		Why: fmt.Sprintf("step from %s to %s with the drive at its limit for %.0f ms in the forecast, anti-windup %s; settling %.0f ms, forecast %.0f", rpm(w.levels[0]), rpm(w.levels[1]), 1000*w.atLimit.Seconds(), j.ID.AntiWindup, 1000*m.Settling, 1000*f.Settling)})
	rec.Finding += fmt.Sprintf("; saturating step: overshoot %.1f %% (forecast %.1f)", m.Overshoot, f.Overshoot)
	if !ok {
		*rec.Passed = false
		rec.Finding += "; not met: the integral winds up"
	}
	return nil
}
