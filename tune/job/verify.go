package job

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
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

// StepMetrics is what one step of the closed loop did, measured or forecast.
type StepMetrics struct {
	From, To  float64 // rad/s, setpoints
	Overshoot float64 // percent of the step
	Settling  float64 // s, from the change of the setpoint to the last instant outside the band
	Ripple    float64 // rad/s, RMS of the second half
}

// doVerify steps the setpoint both ways and compares with the forecast and with
// the targets.
func (j *Job) doVerify() (result, error) {
	w := j.VerifySpeed()
	share := j.verifyShare(w)
	lo, hi := (1-share)*w, (1+share)*w
	settle := settlingOr(j, 0.1)
	hold := seconds(math.Max(0.6, math.Min(6*settle, math.Max(4, 2*settle)))).Round(10 * time.Millisecond)
	levels := []float64{lo, hi, lo}
	if j.Env.Reverse {
		levels = append(levels, 0, -lo, -hi, -lo)
	}
	levels = append(levels, 0)
	if !j.Env.Brake {
		levels = []float64{lo, hi}
	}
	slope, longer, err := j.loopSlope(levels, hold, float64(j.Env.SpeedMax))
	if err != nil && !j.Rig.Drive.SupplySinks {
		// No way down is slow enough for the time of a run: up, and a coast.
		levels = []float64{lo, hi}
		slope, longer, err = j.loopSlope(levels, hold, float64(j.Env.SpeedMax))
	}
	hold = longer
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
	return j.judgeVerify(r, levels, hold, slope)
}

// Shares of the middle speed that a verify step goes to either side: larger where
// the speed comes in coarse steps, so that an overshoot can be read at all.
const (
	verifyLeast = 0.2
	verifyMost  = 0.4
	verifySteps = 20.0 // speed steps in a step
)

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

// judgeVerify measures the steps between two turning levels of the same
// direction, takes the worst, and holds it against the same measures of the
// forecast.
func (j *Job) judgeVerify(r Result, levels []float64, hold time.Duration, slope float64) (result, error) {
	ripple := j.steadyRipple(r, hold)
	var measured, forecast []StepMetrics
	band := 0.0
	at := time.Duration(0)
	var curve sheet.VerifyCurve
	var hunts *identify.Hunting
	for i, to := range levels {
		from := 0.0
		if i > 0 {
			from = levels[i-1]
		}
		if from*to > 0 { // both turning, the same way
			seg := window(r, at, at+hold)
			// Ripple may be another at each level: that of this one, at its end.
			ripple = math.Max(ripple, rippleOf(window(r, at+hold*2/3, at+hold)))
			hunts = larger(hunts, j.hunting(window(r, at+hold/2, at+hold), to, j.Margins))
			band = math.Max(math.Max(0.02*math.Abs(to-from), j.sizing().SpeedStep), 3*ripple)
			m, ok := measureStep(seg, from, to, band)
			if ok {
				f, pts, err := j.forecastMetrics(setpointStep{from, to, slope}, hold, band)
				if err != nil {
					return "", err
				}
				measured, forecast = append(measured, m), append(forecast, f)
				addCurve(&curve, seg, r.Begun, at, pts, to)
			}
		}
		at += hold
	}
	if len(measured) == 0 {
		return "", refuse(752, "verify", "no step could be measured", "look at the trace in the record")
	}
	m, f := worst(measured), worst(forecast)
	rec := j.verifyRecord(r, m, f, band, ripple, curve)
	rec.Hunting = huntingRecord(hunts)
	rec.Finding += huntingWords(hunts)
	j.Verified, j.forecastOf = rec, f
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

// measureStep measures one step from telemetry. Time counts from the first
// sample whose setpoint has moved.
func measureStep(s []Sample, from, to, band float64) (StepMetrics, bool) {
	start := -1
	for i := range s {
		// Setpoints travel as whole mrad/s.
		if s[i].Has&protocol.HasSetpoint != 0 && math.Abs(float64(s[i].Setpoint)-from) > 0.002 {
			start = i
			break
		}
	}
	if start < 0 || len(s)-start < 20 {
		return StepMetrics{}, false
	}
	t0 := float64(s[max(start-1, 0)].BoardUS) * 1e-6
	var t, y []float64
	for i := start; i < len(s); i++ {
		t, y = append(t, float64(s[i].BoardUS)*1e-6-t0), append(y, float64(s[i].Speed))
	}
	return metricsOf(t, y, from, to, band), true
}

// metricsOf measures a step from samples of the speed as the board reports it, t
// from the change of the setpoint. Measured and forecast steps go through it. A
// single reading outside the band, with its neighbours inside, is noise.
func metricsOf(t, y []float64, from, to, band float64) StepMetrics {
	m := StepMetrics{From: from, To: to}
	dir, peak, last := math.Copysign(1, to-from), 0.0, -1
	for i := range y {
		e := y[i] - to
		peak = math.Max(peak, e*dir)
		if math.Abs(e) > band {
			if last == i-1 {
				m.Settling = t[i]
			}
			last = i
		}
	}
	m.Ripple = spread(y[len(y)/2:])
	// What noise alone would show over the target is no overshoot.
	m.Overshoot = 100 * math.Max(0, peak-2*m.Ripple) / math.Abs(to-from)
	return m
}

// worst is the largest overshoot and ripple of all steps, and the middle settling
// time: where one count decides which sample is the last outside the band, the
// longest of several says more of luck than of the loop.
func worst(steps []StepMetrics) StepMetrics {
	w := steps[0]
	for _, s := range steps[1:] {
		w.Overshoot, w.Ripple = math.Max(w.Overshoot, s.Overshoot), math.Max(w.Ripple, s.Ripple)
	}
	w.Settling = median(steps, func(s StepMetrics) float64 { return s.Settling })
	return w
}

func addCurve(c *sheet.VerifyCurve, s []Sample, begun, at time.Duration, forecast []Point, to float64) {
	for i := range s {
		t := (s[i].At - begun).Seconds()
		c.TimeS = append(c.TimeS, t)
		c.SetpointRadS = append(c.SetpointRadS, float64(s[i].Setpoint))
		c.MeasuredRadS = append(c.MeasuredRadS, float64(s[i].Speed))
		c.ForecastRadS = append(c.ForecastRadS, lookUp(forecast, t-at.Seconds(), to))
	}
}

// lookUp is the value of a curve at t, its last value behind its end.
func lookUp(p []Point, t, after float64) float64 {
	if len(p) == 0 {
		return after
	}
	lo, hi := 0, len(p)-1
	if t >= p[hi].T {
		return p[hi].V
	}
	for lo < hi {
		if mid := (lo + hi) / 2; p[mid].T < t {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return p[lo].V
}

func (j *Job) verifyRecord(r Result, m, f StepMetrics, band, ripple float64, curve sheet.VerifyCurve) *sheet.VerifyRecord {
	t := j.Rig.Targets
	size := math.Abs(m.To - m.From)
	rec := &sheet.VerifyRecord{LoadState: j.Rig.Load.State, TraceFiles: []string{r.File}, Curve: &curve,
		Step:     &sheet.StepResult{StepRadS: &size, OvershootPercent: &m.Overshoot, SettlingTimeS: &m.Settling, SettlingBandRadS: &band, RippleRadS: ptr(2 * ripple)},
		Forecast: &sheet.StepResult{StepRadS: &size, OvershootPercent: &f.Overshoot, SettlingTimeS: &f.Settling, SettlingBandRadS: &band}}
	passed := true
	add := func(name, unit, limit string, got, want *float64, ok bool, why string) {
		rec.Targets = append(rec.Targets, sheet.Target{Name: name, Unit: unit, Limit: limit, Measured: got, Forecast: want, Passed: &ok, Why: why})
		passed = passed && ok
	}
	add("overshoot", "%", fmt.Sprintf("<= %.3g", t.Overshoot), &m.Overshoot, &f.Overshoot, m.Overshoot <= t.Overshoot, "peak over the setpoint less twice the steady RMS, share of the step; the worst of all steps")
	if t.Settling > 0 {
		add("settling time", "s", fmt.Sprintf("<= %.3g", t.Settling), &m.Settling, &f.Settling, m.Settling <= t.Settling, "to the last sample outside the band; the middle of all steps")
	}
	// The forecast's own band: ±10 points of overshoot, ±30 % of settling and two
	// samples (our choice).
	slack := 2/float64(max(j.Hz, 1)) + 0.01
	add("overshoot against forecast", "%", fmt.Sprintf("%.1f ± 10", f.Overshoot), &m.Overshoot, &f.Overshoot, math.Abs(m.Overshoot-f.Overshoot) <= 10, "the model promised it")
	add("settling against forecast", "s", fmt.Sprintf("%.3f ± %.3f", f.Settling, 0.3*f.Settling+slack), &m.Settling, &f.Settling, math.Abs(m.Settling-f.Settling) <= 0.3*f.Settling+slack, "the model promised it")
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
		}
		v.Measured = append(v.Measured, Point{c.TimeS[i], c.MeasuredRadS[i]})
		v.Forecast = append(v.Forecast, Point{c.TimeS[i], c.ForecastRadS[i]})
		v.Setpoint = append(v.Setpoint, Point{c.TimeS[i], c.SetpointRadS[i]})
	}
	j.h.Show(func(w *View) { w.Verify = v })
}

// VerifyReport is the verify in the fixed JSON form of a dry run.
func (j *Job) VerifyReport() any {
	r := j.Verified
	return map[string]any{"passed": r.Passed, "overshoot_percent": r.Step.OvershootPercent, "settling_time_s": r.Step.SettlingTimeS,
		"settling_band_rad_s": r.Step.SettlingBandRadS, "ripple_rad_s": r.Step.RippleRadS,
		"forecast": map[string]any{"overshoot_percent": r.Forecast.OvershootPercent, "settling_time_s": r.Forecast.SettlingTimeS}}
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
