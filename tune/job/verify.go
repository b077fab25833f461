package job

import (
	"fmt"
	"math"
	"time"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
)

// VerifySpeed is the middle of the verify steps: the operating point that the
// model was fitted about, in rad/s.
func (j *Job) VerifySpeed() float64 {
	if j.Bias == 0 || j.Gain == 0 {
		return 0
	}
	return math.Min(j.Gain*math.Max(j.Bias-j.slidingVolts(), 0.2*j.Bias), 0.6*float64(j.Env.SpeedMax))
}

// slidingVolts is what sliding friction costs, forward, in V.
func (j *Job) slidingVolts() float64 {
	if s := j.Static; s != nil && s.CoulombForward > 0 {
		return s.CoulombForward
	}
	return 0.85 * j.sizing().StartForward
}

// Shares of the first closed loop: 20 % of top speed for 3 s.
const (
	firstLoopShare = 0.2
	firstLoopTime  = 3 * time.Second
)

// doFirstLoop closes the loop for the first time, slow and short, under tight
// limits.
func (j *Job) doFirstLoop() (result, error) {
	w := math.Min(firstLoopShare*float64(j.Env.SpeedMax), j.VerifySpeed())
	slope, hold, err := j.loopSlope([]float64{w}, firstLoopTime, 2*w)
	if err != nil {
		return "", err
	}
	plan := excite.Setpoint(j.sizing(), "first closed loop", "does the loop hold?", []float64{w}, hold, slope)
	plan.SpeedMax = 2 * w
	r, err := j.run(StepFirstLoop, plan, nil)
	if err != nil {
		return "", err
	}
	if r.Reason != safety.EndDone {
		return "", j.notDone(r)
	}
	s := window(r, hold-firstLoopTime/2, hold)
	if len(s) < 10 {
		return "", refuse(750, "first closed loop", "too few samples to judge", "look at the link")
	}
	v := make([]float64, len(s))
	for i := range s {
		v[i] = float64(s[i].Speed)
	}
	off, ripple := mean(v)-w, spread(v)
	hunts := j.hunting(s, w, j.Margins)
	allowed := math.Max(0.1*w, 2*j.sizing().SpeedStep)
	if math.Abs(off) > allowed || ripple > allowed {
		return "", refuse(751, "first closed loop", fmt.Sprintf("asked %s, got %s ± %s", rpm(w), rpm(mean(v)), rpm(2*ripple)),
			"push the as-found gains back, then look at the model: does it hold at this speed?"+huntingWords(hunts))
	}
	return result(fmt.Sprintf("holds %s within %s, ripple ± %s%s", rpm(w), rpm(math.Abs(off)), rpm(2*ripple), huntingWords(hunts))), nil
}

// doVerify steps the setpoint both ways and compares with the forecast and with
// the targets.
func (j *Job) doVerify() (result, error) {
	w := j.VerifySpeed()
	share := j.verifyShare(w)
	lo, hi := (1-share)*w, (1+share)*w
	settle := settlingOr(j, 0.1)
	hold := seconds(math.Max(0.6, math.Min(6*settle, math.Max(4, 2*settle)))).Round(10 * time.Millisecond)
	if last := j.lastVerify(); last != nil { // the steps of last time, to be drawn over one another
		lo, hi, hold = last.lo, last.hi, last.hold
	}
	levels, slope, hold, err := j.verifyLevels(lo, hi, hold)
	if err != nil {
		return "", err
	}
	plan := excite.Setpoint(j.sizing(), "verify", "measured against forecast and targets", levels, hold, slope)
	r, err := j.run(StepVerify, plan, nil)
	if err != nil {
		return "", err
	}
	if r.Reason != safety.EndDone {
		return "", j.notDone(r)
	}
	return j.judgeVerify(r, plan, levels, hold, slope)
}

// Shares of the middle speed that a verify step goes to either side: larger where
// the speed comes in coarse steps, so that an overshoot can be read at all.
const (
	verifyLeast = 0.2
	verifyMost  = 0.4
	verifySteps = 20.0 // speed steps in a step
)

// Each verify step is repeated as often as is of use, so that their mean shows less
// of counts and noise, as long as the run stays short (our choice).
const (
	verifyRepeats = 3
	verifyTime    = 16 * time.Second
	verifyTurns   = 0.8 // of the turns that are allowed
)

// verifyLevels are the setpoints of a verify with the slope between them and how
// long each takes.
func (j *Job) verifyLevels(lo, hi float64, hold time.Duration) (levels []float64, slope float64, longer time.Duration, err error) {
	top := float64(j.Env.SpeedMax)
	if j.Env.Brake {
		levels = j.upAndDown(lo, hi, 1)
		slope, longer, err = j.loopSlope(levels, hold, top)
		for n := verifyRepeats; n > 1 && err == nil; n-- {
			more := j.upAndDown(lo, hi, n)
			if time.Duration(len(more))*longer > min(verifyTime, j.Env.RunTimeMax-time.Second) || j.farthest(more, longer) > verifyTurns*j.Env.TurnsMax {
				continue
			}
			// On a supply that takes nothing back, more ways down may ask for slower ones.
			if s, l, e := j.loopSlope(more, hold, top); e == nil && s > 0.99*slope {
				return more, s, l, nil
			}
		}
		if err == nil || j.Rig.Drive.SupplySinks {
			return levels, slope, longer, err
		}
	}
	// No way down, or none that is slow enough for the time of a run: up, and a coast.
	levels = []float64{lo, hi}
	slope, longer, err = j.loopSlope(levels, hold, top)
	return levels, slope, longer, err
}

// upAndDown are n steps up and n down each way, and rest.
func (j *Job) upAndDown(lo, hi float64, n int) []float64 {
	levels := []float64{lo}
	for range n {
		levels = append(levels, hi, lo)
	}
	if j.Env.Reverse {
		levels = append(levels, 0, -lo)
		for range n {
			levels = append(levels, -hi, -lo)
		}
	}
	return append(levels, 0)
}

// farthest is how far from its beginning a run of levels goes, in turns.
func (j *Job) farthest(levels []float64, hold time.Duration) float64 {
	at, most := 0.0, 0.0
	for _, w := range levels {
		at += w * hold.Seconds() / (2 * math.Pi)
		most = math.Max(most, math.Abs(at))
	}
	return most
}

func (j *Job) verifyShare(w float64) float64 {
	if w <= 0 {
		return verifyLeast
	}
	return math.Min(verifyMost, math.Max(verifyLeast, verifySteps*j.sizing().SpeedStep/(2*w)))
}

func settlingOr(j *Job, other float64) float64 {
	if j.Margins != nil && j.Margins.Step.SettlingTime.Known() {
		return float64(j.Margins.Step.SettlingTime)
	}
	return other
}

// judgeVerify takes the mean of the steps between two turning levels of the same
// direction, measures it, and holds it against the same measures of the forecast.
func (j *Job) judgeVerify(r Result, plan safety.Plan, levels []float64, hold time.Duration, slope float64) (result, error) {
	var courses []course
	var curve sheet.VerifyCurve
	var hunts *identify.Hunting
	turning(levels, hold, func(from, to float64, at time.Duration) {
		seg := window(r, at, at+hold)
		hunts = larger(hunts, j.hunting(window(r, at+hold/2, at+hold), to, j.Margins))
		if c, ok := courseOf(seg, from, to); ok {
			courses = append(courses, c)
			addCurve(&curve, seg, r.Begun)
		}
	})
	if len(courses) == 0 {
		return "", refuse(752, "verify", "no step could be measured", "look at the trace in the record")
	}
	ripple := j.steadyRipple(r, hold)
	all, err := j.forecastSteps(plan, levels, hold, stepDraws)
	if err != nil {
		return "", err
	}
	m, f := all.against(courses)
	all.draw(&curve)
	rec := j.verifyRecord(r, m, f, ripple, curve)
	rec.Hunting = huntingRecord(hunts)
	rec.Finding += huntingWords(hunts)
	if *rec.Passed {
		if err := j.verifyWindup(rec, hold, slope); err != nil {
			return "", err
		}
	}
	j.Verified = rec
	rec.Curve.EarlierRadS = j.lastVerify().on(rec.Curve.TimeS, rec.Curve.SetpointRadS, hold.Seconds())
	if err := j.h.Keep("verify", "steps", rec); err != nil {
		return "", err
	}
	if err := j.keepMotor(); err != nil {
		return "", err
	}
	j.showVerify(rec)
	if !*rec.Passed {
		return "", refuse(753, "verify failed", rec.Finding, "one key pushes the as-found gains back; or choose a smaller Ms bound and push again")
	}
	return result(rec.Finding), nil
}

// steadyRipple is the RMS of the speed about its mean at the end of the first
// level, in rad/s.
func (j *Job) steadyRipple(r Result, hold time.Duration) float64 {
	return rippleOf(window(r, hold*2/3, hold))
}

func rippleOf(s []Sample) float64 {
	v := make([]float64, len(s))
	for i := range s {
		v[i] = float64(s[i].Speed)
	}
	return spread(v)
}

func addCurve(c *sheet.VerifyCurve, s []Sample, begun time.Duration) {
	for i := range s {
		c.TimeS = append(c.TimeS, (s[i].At - begun).Seconds())
		c.SetpointRadS = append(c.SetpointRadS, float64(s[i].Setpoint))
		c.MeasuredRadS = append(c.MeasuredRadS, float64(s[i].Speed))
	}
}

func (j *Job) verifyRecord(r Result, m StepMetrics, f StepBand, ripple float64, curve sheet.VerifyCurve) *sheet.VerifyRecord {
	t := j.Rig.Targets
	rec := &sheet.VerifyRecord{LoadState: j.Rig.Load.State, TraceFiles: []string{r.File}, Curve: &curve,
		Step: m.record(ripple), Forecast: f.record()}
	passed := true
	add := func(name, unit, limit string, got, want *float64, ok bool, why string) {
		rec.Targets = append(rec.Targets, sheet.Target{Name: name, Unit: unit, Limit: limit, Measured: got, Forecast: want, Passed: &ok, Why: why})
		passed = passed && ok
	}
	add("overshoot", "%", fmt.Sprintf("<= %.3g", t.Overshoot), &m.Overshoot, &f.Overshoot, m.Overshoot <= t.Overshoot, "peak over the setpoint less twice the steady RMS, share of the step; mean of the steps that go the same way, the worst way")
	if t.Settling > 0 {
		add("settling time", "s", fmt.Sprintf("<= %.3g", t.Settling), &m.Settling, &f.Settling, m.Settling <= t.Settling, "mean of all steps, until it is in the band for good")
	}
	// Outside the widest band that a forecast may have, with two samples of time that
	// telemetry does not show, the model is wrong.
	slack := 2/float64(max(j.Hz, 1)) + 0.01
	add("overshoot against forecast", "%", fmt.Sprintf("%.1f ± %.0f", f.Overshoot, overshootMost), &m.Overshoot, &f.Overshoot, math.Abs(m.Overshoot-f.Overshoot) <= overshootMost, f.why(fmt.Sprintf("%.1f to %.1f %%", f.Low.Overshoot, f.High.Overshoot)))
	add("settling against forecast", "s", fmt.Sprintf("%.3f ± %.3f", f.Settling, settlingMost*f.Settling+slack), &m.Settling, &f.Settling, math.Abs(m.Settling-f.Settling) <= settlingMost*f.Settling+slack, f.why(fmt.Sprintf("%.0f to %.0f ms", 1000*f.Low.Settling, 1000*f.High.Settling)))
	rec.Passed = &passed
	rec.Finding = fmt.Sprintf("overshoot %.1f %% (forecast %.1f), settling %.0f ms (forecast %.0f), steady ripple ± %s", m.Overshoot, f.Overshoot, m.Settling*1000, f.Settling*1000, rpm(2*ripple))
	for _, x := range rec.Targets {
		if !*x.Passed {
			rec.Finding += "; not met: " + x.Name + " " + x.Limit + " " + x.Unit
		}
	}
	return rec
}

func (j *Job) showVerify(rec *sheet.VerifyRecord) {
	v := &VerifyView{Passed: *rec.Passed}
	if h := rec.Hunting; h != nil {
		v.Hunting = fmt.Sprintf("hunts at %.3g Hz, ± %s: likely %s", *h.FrequencyHz, rpm(*h.AmplitudeRadS), h.Cause)
	}
	for _, t := range rec.Targets {
		verdict := "pass"
		if !*t.Passed {
			verdict = "FAIL"
		}
		v.Rows = append(v.Rows, Fact{Name: t.Name, Value: fmt.Sprintf("%.3g %s", *t.Measured, t.Unit), Limit: t.Limit, Verdict: verdict, Why: t.Why})
	}
	c := rec.Curve
	for i := range c.TimeS {
		if i > 0 && c.TimeS[i]-c.TimeS[i-1] > 0.1 { // between two steps that were measured
			gap := Point{(c.TimeS[i] + c.TimeS[i-1]) / 2, math.NaN()}
			v.Measured, v.Forecast, v.Setpoint = append(v.Measured, gap), append(v.Forecast, gap), append(v.Setpoint, gap)
			v.BandLow, v.BandHigh = append(v.BandLow, gap), append(v.BandHigh, gap)
		}
		if len(c.EarlierRadS) == len(c.TimeS) {
			v.Earlier = append(v.Earlier, Point{c.TimeS[i], c.EarlierRadS[i]})
		}
		v.Measured = append(v.Measured, Point{c.TimeS[i], c.MeasuredRadS[i]})
		v.Forecast = append(v.Forecast, Point{c.TimeS[i], c.ForecastRadS[i]})
		v.Setpoint = append(v.Setpoint, Point{c.TimeS[i], c.SetpointRadS[i]})
		v.BandLow, v.BandHigh = append(v.BandLow, Point{c.TimeS[i], c.LowRadS[i]}), append(v.BandHigh, Point{c.TimeS[i], c.HighRadS[i]})
	}
	j.h.Show(func(w *View) { w.Verify = v })
}

// VerifyReport is the verify in the fixed JSON form of a dry run.
func (j *Job) VerifyReport() any {
	r := j.Verified
	return map[string]any{"passed": r.Passed, "finding": r.Finding, "overshoot_percent": r.Step.OvershootPercent, "settling_time_s": r.Step.SettlingTimeS,
		"settling_band_rad_s": r.Step.SettlingBandRadS, "ripple_rad_s": r.Step.RippleRadS,
		"forecast": map[string]any{"overshoot_percent": r.Forecast.OvershootPercent, "settling_time_s": r.Forecast.SettlingTimeS,
			"overshoot_low_percent": r.Forecast.OvershootLow, "overshoot_high_percent": r.Forecast.OvershootHigh,
			"settling_low_s": r.Forecast.SettlingLow, "settling_high_s": r.Forecast.SettlingHigh}}
}

// doCard makes card and sticker from the record.
func (j *Job) doCard() (result, error) {
	j.keepOrder(StepCard)
	card, sticker, err := j.h.Card()
	if err != nil {
		return "", err
	}
	if err := j.h.KeepText("card", "card", card); err != nil {
		return "", err
	}
	if err := j.h.KeepText("card", "sticker", sticker+"\n"); err != nil {
		return "", err
	}
	j.h.Show(func(v *View) { v.Card = card })
	return result("card and sticker kept: " + sticker), nil
}
