package job

import (
	"fmt"
	"math"
	"time"

	"gainwright/safety"
	"gainwright/tune/design"
	"gainwright/tune/excite"
	"gainwright/tune/sheet"
)

// Bounds of the as-found trace (our choice): the setpoint stays under 20 % of top
// speed, and gains that the model forecasts to be worse than this are not run.
const (
	foundShare = 0.2
	foundMsMax = 3.0
	foundHold  = 800 * time.Millisecond
)

// doFound takes a small step of the closed loop with the gains as they were found.
// Where that would be no use or no good it says why and lets the job go on.
func (j *Job) doFound() (result, error) {
	if !j.Running.Equal(j.Found) {
		return "", refuse(747, "as-found trace", "the gains as found are no longer running", "one key pushes them back; then take the trace")
	}
	g, margins, why := j.foundLoop()
	if why != "" {
		j.FoundStep = &sheet.AsFoundStepRecord{NotTaken: why, LoadState: j.Rig.Load.State}
		return result("not taken: " + why), j.h.Keep("event", sheet.NameAsFoundStep, j.FoundStep)
	}
	j.foundGains = g
	defer func() { j.foundGains = nil }()
	hi := math.Min(foundShare*float64(j.Env.SpeedMax), j.VerifySpeed())
	levels := []float64{0.7 * hi, hi}
	settle := 0.2
	if margins.Step.SettlingTime.Known() {
		settle = float64(margins.Step.SettlingTime)
	}
	hold := max(foundHold, min(seconds(4*settle), 4*time.Second)).Round(10 * time.Millisecond)
	slope, hold, err := j.loopSlope(levels, hold, 2*hi)
	if err != nil {
		j.FoundStep = &sheet.AsFoundStepRecord{NotTaken: "its forecast does not keep the limits", LoadState: j.Rig.Load.State}
		return result("not taken: " + err.Error()), j.h.Keep("event", sheet.NameAsFoundStep, j.FoundStep)
	}
	plan := excite.Setpoint(j.sizing(), "as found", "how the loop ran as it was found", levels, hold, slope)
	plan.SpeedMax = 2 * hi
	r, err := j.run(StepFound, plan, nil)
	if err != nil {
		return "", err
	}
	if r.Reason != safety.EndDone {
		return "", j.notDone(r)
	}
	return j.keepFound(r, plan, levels, hold, &margins)
}

// foundLoop is the law as found with its margins on the fitted model, or why it
// is not to be run.
func (j *Job) foundLoop() (*design.Gains, design.Margins, string) {
	f := j.Fit.Best()
	if f == nil {
		return nil, design.Margins{}, "there is no model to forecast it with"
	}
	g, err := j.Found.Design(j.ID, float64(j.Env.VoltsMax))
	if err == nil {
		err = g.Validate()
	}
	if err != nil {
		return nil, design.Margins{}, err.Error()
	}
	if p := g.Parallel(); p.Kp == 0 && p.Ki == 0 {
		return nil, design.Margins{}, "the board held no gains"
	}
	m, err := design.Judge(j.loopModel(f), g)
	switch {
	case err != nil:
		return nil, m, err.Error()
	case !m.Stable:
		return nil, m, "the gains as found are not stable on the fitted model"
	case float64(m.Ms) > foundMsMax:
		return nil, m, fmt.Sprintf("the gains as found have Ms %.1f on the fitted model, over %.0f", float64(m.Ms), foundMsMax)
	}
	return &g, m, ""
}

// keepFound measures the step and keeps it.
func (j *Job) keepFound(r Result, plan safety.Plan, levels []float64, hold time.Duration, margins *design.Margins) (result, error) {
	from, to := levels[0], levels[1]
	seg := window(r, hold, 2*hold)
	ripple := rippleOf(window(r, hold+hold*2/3, 2*hold))
	c, ok := courseOf(seg, from, to)
	if !ok {
		return "", refuse(752, "as-found trace", "the step could not be measured", "look at the trace in the record")
	}
	rec := &sheet.AsFoundStepRecord{TraceFile: r.File, LoadState: j.Rig.Load.State, Curve: &sheet.VerifyCurve{}}
	addCurve(rec.Curve, seg, r.Begun)
	all, err := j.forecastSteps(plan, levels, hold, drawsLeast)
	if err != nil {
		return "", err
	}
	m, f := all.against([]course{c})
	all.draw(rec.Curve)
	rec.Step, rec.Forecast = m.record(ripple), f.record()
	hunts := j.hunting(window(r, hold+hold/2, 2*hold), to, margins)
	rec.Hunting = huntingRecord(hunts)
	j.FoundStep = rec
	if err := j.h.Keep("event", sheet.NameAsFoundStep, rec); err != nil {
		return "", err
	}
	return result(fmt.Sprintf("as found: overshoot %.1f %%, settling %.0f ms, steady ripple ± %s%s", m.Overshoot, m.Settling*1000, rpm(2*ripple), huntingWords(hunts))), nil
}
