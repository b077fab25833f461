package job

import (
	"errors"
	"fmt"
	"math"

	"gainwright/protocol/si"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// about cuts a trace to the part in which the plan drove about its middle: from
// the middle of the settling on, to the end of the drive.
func about(tr *trace.Trace) *trace.Trace {
	first, last := -1, -1
	for i, v := range tr.Voltage {
		if v != 0 {
			if first < 0 {
				first = i
			}
			last = i
		}
	}
	if first < 0 {
		return tr
	}
	// The bias is held before the test proper begins: what comes before the first
	// change of a steady drive is run-in.
	top := 0.0
	for _, v := range tr.Voltage[first : last+1] {
		top = math.Max(top, math.Abs(v))
	}
	settled := first
	for i := first + 1; i <= last; i++ {
		if math.Abs(tr.Voltage[i]) > 0.3*top && steady(tr, i, last, 0.004*top) {
			settled = i
			break
		}
	}
	change := settled
	for i := settled + 1; i <= last; i++ {
		if math.Abs(tr.Voltage[i]-tr.Voltage[settled]) > 0.02*top {
			change = i
			break
		}
	}
	from := settled + (change-settled)/2
	if change == settled {
		from = first
	}
	return tr.Slice(from, last)
}

// steadyS is longer than a ramp stands still between two values of the console.
const steadyS = 0.045

// steady reports whether the drive stays within band for steadyS from sample i on.
func steady(tr *trace.Trace, i, last int, band float64) bool {
	for k := i + 1; k <= last; k++ {
		if math.Abs(tr.Voltage[k]-tr.Voltage[i]) > band {
			return false
		}
		if tr.Time[k]-tr.Time[i] >= steadyS {
			return true
		}
	}
	return false
}

// doFit fits and judges.
func (j *Job) doFit() (result, error) {
	j.h.Show(func(v *View) { v.Busy, v.Share = "fitting", 0 })
	set := j.fitSettings()
	j.fitTold = set
	res, err := set.Identify(j.StepTrace, j.SecondTrace)
	if err != nil {
		return "", refuse(730, "model", err.Error(), "repeat the step test, larger if the envelope allows it")
	}
	j.Fit = &res
	delete(j.Experiments, StepMethods) // of the fit before
	j.NewSet, j.Gains, j.Margins, j.NoChange, j.Refused = nil, nil, nil, false, ""
	j.showModel()
	best := res.Best()
	for i := range res.Models {
		chosen := best == &res.Models[i]
		file, err := j.keepFit(&res.Models[i], set, chosen)
		if err != nil {
			return "", err
		}
		if chosen {
			j.FitFile = file
		}
	}
	if err := j.keepMotor(); err != nil {
		return "", err
	}
	if best == nil {
		f := res.Models[0]
		return "", refuse(731, "model refused", reasons(f), f.Helps)
	}
	j.lookAhead(best)
	if err := errors.Join(j.methods(), j.motorBox()); err != nil {
		return "", err
	}
	verdict, _ := j.judgedOf(best)
	return result(fmt.Sprintf("%s, %s: %s", best.Model.Kind, verdict, paramWords(*best))), nil
}

// fitSettings are what the fit is told on the records at hand.
func (j *Job) fitSettings() FitSettings {
	set := fitDefaults
	if !j.Rig.Drive.SupplySinks {
		set.Bus = j.Rig.Drive.BusNominal
	}
	set.Edges = coarse(j.StepTrace, j.Tau) || j.SecondTrace != nil && coarse(j.SecondTrace, j.Tau)
	return set
}

// lookAhead gives the limiter the model, so that it sees a ceiling coming, and
// the experiments better numbers to be sized by.
func (j *Job) lookAhead(f *identify.Fit) {
	gain, _, _ := f.Value("gain")
	tau, _, ok := f.Value("tau")
	if !ok {
		return
	}
	j.Gain, j.Tau = gain, tau
	j.Env.Look.Gain, j.Env.Look.Tau, j.Env.Look.DeadTime = gain, seconds(tau), seconds(f.Model.DeadTime)
	j.lookMotor()
}

// lookMotor gives the limiter what the motor was seen to be: from which drive on it
// turns, twice its breakaway, and its winding, by which causes are told apart. It
// only tightens.
func (j *Job) lookMotor() {
	if e := j.electric; e != nil && e.R > 0 && e.Ke > 0 {
		j.Env.Look.Resistance, j.Env.Look.Ke = e.R, e.Ke
	}
	for _, b := range append(append([]float64(nil), j.BreakForward...), j.BreakReverse...) {
		j.Env.Look.StallVolts = max(j.Env.Look.StallVolts, si.Volts(2*b))
	}
	j.h.Look(j.Env.Look)
}

func reasons(f identify.Fit) string {
	if len(f.Reasons) == 0 {
		return "no reason given"
	}
	s := f.Reasons[0]
	for _, r := range f.Reasons[1:] {
		s += "; " + r
	}
	return s
}

// paramWords are the parameters with the halves of their 95 % intervals.
func paramWords(f identify.Fit) string {
	s := ""
	for _, p := range f.Params {
		if p.Name == "offset" || p.Name == "drift" {
			continue
		}
		if s != "" {
			s += ", "
		}
		v, pm, unit := p.Value, 1.96*p.SD, p.Unit
		if unit == "s" {
			v, pm, unit = v*1000, pm*1000, "ms"
		}
		s += fmt.Sprintf("%s %.4g ± %.2g %s", words[p.Name], v, pm, unit)
	}
	return s
}

// words are the names of fitted numbers as people read them.
var words = map[string]string{"gain": "gain", "tau": "time constant", "tau2": "second time constant", "dead_time": "dead time",
	"natural_frequency": "natural frequency", "damping": "damping", "slope": "slope", "offset": "offset", "drift": "drift"}

func (j *Job) keepFit(f *identify.Fit, set FitSettings, chosen bool) (file string, err error) {
	var curve *trace.Trace
	if chosen {
		curve = j.StepTrace
	}
	rec, err := fitRecord(f, set, j.StepFile, j.SecondFile, curve)
	if err != nil {
		return "", err
	}
	return j.h.KeepFile("fit", f.Model.Kind, rec)
}

// fitRecord is a fit for the record. The chosen one has its curve over the step
// record; for the others step is nil.
func fitRecord(f *identify.Fit, set FitSettings, stepFile, secondFile string, step *trace.Trace) (rec sheet.FitRecord, err error) {
	rec = sheet.FitRecord{Kind: f.Model.Kind, InputFiles: []string{stepFile}, Used: f.Used, Masked: f.Masked,
		NRMSE: sheet.Known(f.NRMSE), HoldoutNRMSE: sheet.Known(f.HoldoutNRMSE), VAF: sheet.Known(f.VAF * 100), WhitenessP: sheet.Known(f.WhitenessP),
		Verdict: string(f.Verdict), Reasons: f.Reasons, Helps: f.Helps}
	if secondFile != "" {
		rec.HoldoutFiles = []string{secondFile}
	}
	if rec.Model, err = rawJSON(f); err != nil {
		return rec, err
	}
	if rec.Settings, err = rawJSON(set); err != nil {
		return rec, err
	}
	for _, p := range f.Params {
		rec.Params = append(rec.Params, sheet.Quantity{Name: p.Name, Value: ptr(p.Value), Unit: p.Unit, PlusMinus: ptr(1.96 * p.SD),
			Why: fmt.Sprintf("output-error least squares, %s, %d samples of %s", f.Model.Kind, f.Used, stepFile)})
	}
	if step != nil {
		t, y, yh := simulated(about(step), f.Model)
		rec.Curve = &sheet.FitCurve{TimeS: t, MeasuredRadS: y, FittedRadS: yh}
	}
	return rec, nil
}

// keepMotor keeps the row of values that a later job is compared with.
func (j *Job) keepMotor() error {
	m := sheet.MotorRecord{CountsPerTurn: sheet.Known(j.Rig.CountsPerMotorTurn()), Sign: ptr(1.0), GearRatio: sheet.Known(j.Rig.Encoder.GearRatio), LoadState: j.Rig.Load.State}
	if len(j.BreakForward) > 0 {
		m.BreakawayForwardV = ptr(mean(j.BreakForward))
	}
	if len(j.BreakReverse) > 0 {
		m.BreakawayReverseV = ptr(mean(j.BreakReverse))
	}
	gain, tau := 0.0, 0.0
	if f := j.Fit.Best(); f != nil {
		gain, _, _ = f.Value("gain")
		tau, _, _ = f.Value("tau")
		m.GainRadSPerV = sheet.Known(gain)
		if tau > 0 {
			m.TauS = &tau
		}
		m.DeadTimeS = ptr(f.Model.DeadTime)
	}
	if j.Margins != nil {
		m.PhaseMarginDeg = sheet.Known(float64(j.Margins.PhaseMargin))
	}
	if f := j.Fit.Best(); f != nil && tau > 0 {
		if tau2, _, two := f.Value("tau2"); two {
			tau += tau2
		}
	}
	j.electric.motor(&m, gain, tau)
	if v := j.Verified; v != nil && v.Step != nil {
		m.OvershootPercent, m.OvershootTarget = v.Step.OvershootPercent, sheet.Known(j.Rig.Targets.Overshoot)
	}
	j.MotorValues = &m
	j.showEarlier()
	return j.h.Keep("fit", sheet.NameMotor, m)
}

// simulated is the model's answer to a record, offset and start at their best,
// at the samples that are used.
func simulated(tr *trace.Trace, m model.Linear) (t, y, yh []float64) {
	sim, err := identify.Simulate(tr, m)
	if err != nil {
		return nil, nil, nil
	}
	for i, v := range sim {
		if !math.IsNaN(v) {
			t, y, yh = append(t, tr.Time[i]), append(y, tr.Speed[i]), append(yh, v)
		}
	}
	return t, y, yh
}

func points(t, v []float64) []Point {
	p := make([]Point, 0, len(t))
	for i := range t {
		if i < len(v) {
			p = append(p, Point{t[i] - t[0], v[i]})
		}
	}
	return p
}

// showModel puts the fit on the screens.
func (j *Job) showModel() {
	res := j.Fit
	m := &ModelView{}
	show := res.Best()
	if show == nil {
		show = &res.Models[0]
	}
	verdict, why := j.judgedOf(show)
	m.Verdict, m.Reasons, m.Helps = string(verdict), why, show.Helps
	for _, p := range show.Params {
		v, pm, unit := p.Value, 1.96*p.SD, p.Unit
		if unit == "s" {
			v, pm, unit = v*1000, pm*1000, "ms"
		}
		m.Params = append(m.Params, Fact{Name: words[p.Name], Value: fmt.Sprintf("%.4g ± %.2g %s", v, pm, unit),
			Why: fmt.Sprintf("output-error least squares in continuous time on %d samples of %s; ± is 1.96 standard deviations, corrected for coloured residuals", show.Used, j.StepFile)})
	}
	m.Params = append(m.Params, Fact{Name: "NRMSE, on data not seen", Value: fmt.Sprintf("%.3f", show.HoldoutNRMSE), Limit: "0.224",
		Why: "‖y − ŷ‖ / ‖y − mean y‖ of the simulated output on " + j.SecondFile})
	for i := range res.Models {
		f := &res.Models[i]
		m.Candidates = append(m.Candidates, Candidate{Kind: f.Model.Kind, NRMSE: fmt.Sprintf("%.3f", f.NRMSE), Holdout: fmt.Sprintf("%.3f", f.HoldoutNRMSE),
			AICc: fmt.Sprintf("%.1f", f.AICc), Verdict: string(f.Verdict), Chosen: f == res.Best()})
	}
	j.frictionFacts(m)
	t, y, yh := simulated(about(j.StepTrace), show.Model)
	m.Data, m.Fit = points(t, y), points(t, yh)
	for i := range m.Fit {
		m.Residual = append(m.Residual, Point{m.Fit[i].T, m.Data[i].V - m.Fit[i].V})
	}
	if j.SecondTrace != nil {
		t, y, yh := simulated(about(j.SecondTrace), show.Model)
		m.HoldData, m.HoldFit = points(t, y), points(t, yh)
	}
	m.Plausible = j.plausible(show)
	j.h.Show(func(v *View) {
		if v.Model != nil {
			m.Stairs = v.Model.Stairs
		}
		v.Model, v.Busy = m, ""
	})
}

func (j *Job) frictionFacts(m *ModelView) {
	if len(j.BreakForward) > 0 {
		m.Friction = append(m.Friction, Fact{Name: "breakaway forward", Value: fmt.Sprintf("%.3g ± %.2g V", mean(j.BreakForward), 2*spread(j.BreakForward))})
	}
	if len(j.BreakReverse) > 0 {
		m.Friction = append(m.Friction, Fact{Name: "breakaway reverse", Value: fmt.Sprintf("%.3g ± %.2g V", mean(j.BreakReverse), 2*spread(j.BreakReverse))})
	}
	if s := j.Static; s != nil {
		m.Friction = append(m.Friction, Fact{Name: "sliding friction", Value: fmt.Sprintf("%.3g V forward, %.3g V reverse", s.CoulombForward, s.CoulombReverse)})
	}
}

// plausible compares what was found with what motors are like. The ranges are
// common practice, no source.
func (j *Job) plausible(f *identify.Fit) []Fact {
	var out []Fact
	add := func(name, value, limit string, ok bool, why string) {
		v := "ok"
		if !ok {
			v = "odd"
		}
		out = append(out, Fact{Name: name, Value: value, Limit: limit, Verdict: v, Why: why})
	}
	gain, _, _ := f.Value("gain")
	if gain > 0 {
		ke := 1 / gain
		add("1/gain, near Ke", fmt.Sprintf("%.4g V·s/rad", ke), "0.005 to 0.15", ke >= 0.005 && ke <= 0.15, "gain ≈ 1/Ke where viscous friction is small; common practice, no source")
		if want := j.Rig.Motor.Ke; want > 0 {
			r := ke / want
			add("against Ke of the rig file", fmt.Sprintf("x%.2f", r), "0.8 to 1.25", r >= 0.8 && r <= 1.25, "another winding, or counts read x2, would show here")
		}
	}
	if tau, _, ok := f.Value("tau"); ok {
		add("time constant", fmt.Sprintf("%.4g ms", tau*1000), "1 ms to 5 s", tau >= 0.001 && tau <= 5, "bare motors 3 to 30 ms, loaded up to seconds; common practice, no source")
	}
	if m, ok := j.Motor(); ok {
		add("R", fmt.Sprintf("%.3g ± %.2g Ω", m.R, 1.96*m.RSD), "0.05 to 50", m.R >= 0.05 && m.R <= 50, "slope of current over volts before the first motion; 12 to 48 V motors 0.1 to 20 Ω; common practice, no source")
		add("Ke", fmt.Sprintf("%.4g ± %.2g V·s/rad", m.Ke, 1.96*m.KeSD), "0.005 to 0.15", m.Ke >= 0.005 && m.Ke <= 0.15, "V − R·I over speed on the levels of the staircase; in SI units it is the torque constant too; common practice, no source")
		if m.J > 0 {
			add("inertia", fmt.Sprintf("%.3g kg·m²", m.J), "over 0", true, "J = τ·Ke/(gain·R)")
		}
	} else {
		out = append(out, Fact{Name: "R, Ke, J, friction torque", Value: "not identifiable", Why: "the current is not measured: gain and time constants alone fit any R with some Ke and J; friction is known in volts only"})
	}
	if n := len(j.BreakForward); n > 0 {
		share := mean(j.BreakForward) / j.Rig.Motor.VoltageRated
		add("breakaway of rated volts", fmt.Sprintf("%.1f %%", share*100), "under 30 %", share < 0.3, "bare 2 to 8 %, geared 5 to 20 %; common practice, no source")
	}
	if s := j.Static; s != nil && s.CoulombForward > 0 && len(j.BreakForward) > 0 {
		r := mean(j.BreakForward) / s.CoulombForward
		add("breakaway over sliding friction", fmt.Sprintf("%.2f", r), "1 to 3", r > 0.9 && r < 3, "common practice, no source")
	}
	return out
}
