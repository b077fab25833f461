package job

import (
	"encoding/json"
	"math"
	"time"

	"gainwright/safety"
	"gainwright/tune/sheet"
)

// lastTime is the verify of the earlier record: its two levels, how long each took,
// and what was measured.
type lastTime struct {
	lo, hi float64 // rad/s
	hold   time.Duration
	curve  *sheet.VerifyCurve
}

// lastVerify reads the verify of the earlier record, nil where there is none or where
// its steps are outside of what this rig allows.
func (j *Job) lastVerify() *lastTime {
	if j.earlier == nil {
		return nil
	}
	var run sheet.RunRecord
	var rec sheet.VerifyRecord
	var plan safety.Plan
	if j.earlier.LastJSON(sheet.KindRun, "verify", &run) != nil || json.Unmarshal(run.Plan, &plan) != nil || j.earlier.LastJSON(sheet.KindVerify, "", &rec) != nil || rec.Curve == nil {
		return nil
	}
	t := &lastTime{lo: math.Inf(1), curve: rec.Curve}
	var ramp time.Duration
	for _, s := range plan.Segments {
		if s.Mode != safety.ModeSpeed || s.From != s.To {
			ramp = s.Duration
			continue
		}
		if s.From > 0 {
			t.lo, t.hi = math.Min(t.lo, s.From), math.Max(t.hi, s.From)
			t.hold = max(t.hold, ramp+s.Duration)
		}
	}
	if !(t.lo < t.hi) || t.hi > 0.9*float64(j.Env.SpeedMax) || t.hold <= 0 || t.hold > j.Env.RunTimeMax/4 {
		return nil
	}
	return t
}

// on is what was measured last time at the times given, step by step, where each now
// takes hold seconds; nil where its steps were not those of now: the setpoints have to
// agree.
func (t *lastTime) on(times, setpoint []float64, hold float64) []float64 {
	if t == nil {
		return nil
	}
	c := t.curve
	n := min(len(c.TimeS), len(c.MeasuredRadS), len(c.SetpointRadS))
	if n < 2 || len(times) == 0 {
		return nil
	}
	out, agree, at := make([]float64, len(times)), 0, 0
	for i, now := range times {
		step := math.Floor(now / hold)
		x := step*t.hold.Seconds() + math.Min(now-step*hold, t.hold.Seconds())
		for at < n-2 && c.TimeS[at+1] < x {
			at++
		}
		share := math.Max(0, math.Min(1, (x-c.TimeS[at])/(c.TimeS[at+1]-c.TimeS[at])))
		out[i] = c.MeasuredRadS[at] + share*(c.MeasuredRadS[at+1]-c.MeasuredRadS[at])
		near := c.SetpointRadS[at]
		if share > 0.5 {
			near = c.SetpointRadS[at+1]
		}
		if math.Abs(near-setpoint[i]) <= 0.02*t.hi {
			agree++
		}
	}
	if float64(agree) < 0.8*float64(len(times)) {
		return nil
	}
	return out
}
