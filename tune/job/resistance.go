package job

import (
	"fmt"
	"math"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Angles of the locked-rotor test (our choice): brushes on other bars read other
// resistances, so one angle is not enough.
const (
	lockedAngles, lockedAnglesMost = 3, 6
	lockedWidth                    = 0.03 // half of the 95 % interval, of the value
	fullHeatRise                   = 80.0 // K, of a winding whose heat budget is used up; common practice, no source
)

// doResistance takes the resistance at several angles of the shaft.
func (j *Job) doResistance() (result, error) {
	if !j.hasCurrent() {
		return "", refuse(774, "resistance", "this board does not measure the current: R, Ke, Kt and J cannot be told apart, only gain, time constants and friction in volts",
			"fit a current sensor, or measure R with a four-wire meter at several angles and put it into the rig file")
	}
	set := ExperimentSettings{Experiment: StepResistance, Numbers: map[string]float64{"dwell": excite.LockedDwell(j.sizing()), "nameplate": j.Rig.Motor.Resistance}}
	var traces []*trace.Trace
	var files []string
	for n := 0; n < lockedAngles || n < lockedAnglesMost && !j.lockedEnough(traces); n++ {
		if n > 0 {
			if _, err := j.h.Ask(Question{Kind: AskHandTurn, Text: "Turn the shaft to another angle, let go, then enter",
				Detail: []string{fmt.Sprintf("Angle %d of the resistance. The drive is off and disarmed.", n+1)}}); err != nil {
				return "", err
			}
		}
		plan := excite.LockedRotor(j.sizing())
		plan.Name = fmt.Sprintf("locked rotor %d", n+1)
		plan.Purpose += "; " + j.lockedPrice(plan)
		r, err := j.run(StepResistance, plan, nil)
		if err != nil {
			return "", err
		}
		if r.Reason != safety.EndDone {
			return "", j.notDone(r)
		}
		traces, files = append(traces, j.traceOf(plan.Name, r.Samples)), append(files, r.File)
		if t := r.Samples; len(t) > 0 && t[len(t)-1].Slow.HasTmp {
			set.Numbers["temperature"] = float64(t[len(t)-1].Slow.Temp)
		}
	}
	return j.experiment(set, traces, files)
}

// lockedPrice is what a plan with the shaft held costs: all of it is heat.
func (j *Job) lockedPrice(p safety.Plan) string {
	ohms := j.lowOhms()
	if !(ohms > 0) {
		return "its heat is not known"
	}
	joule := 0.0
	for _, s := range p.Segments {
		joule += (s.From*s.From + s.From*s.To + s.To*s.To) / 3 / ohms * s.Duration.Seconds()
	}
	words := fmt.Sprintf("costs at most %.2g J", joule)
	if i := float64(j.Env.CurrentContinuous); i > 0 && j.Env.HeatTau > 0 {
		words += fmt.Sprintf(", %.2g K of the winding", fullHeatRise*joule/(i*i*ohms*j.Env.HeatTau.Seconds()))
	}
	return words
}

// lockedEnough reports whether the mean over the angles is known well enough.
func (j *Job) lockedEnough(traces []*trace.Trace) bool {
	var r, sd []float64
	for _, tr := range traces {
		if l, err := identify.FitLocked(tr, excite.LockedDwell(j.sizing())); err == nil {
			r, sd = append(r, l.R), append(sd, l.RSD)
		}
	}
	m := identify.MeanOf(r, sd)
	j.learnt(fmt.Sprintf("R %.4g ± %.2g Ω; one more angle: ± %.2g", m.Value, 1.96*m.SD, 1.96*m.SD*math.Sqrt(float64(m.N)/float64(m.N+1))))
	return 1.96*m.SD < lockedWidth*m.Value
}

// analyseResistance takes the mean over angles. Numbers: dwell in s, nameplate in Ω
// (0: not known), temperature in degC where reported.
func analyseResistance(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	var r, sd []float64
	col := []sheet.Series{{Name: "angle", Unit: "1"}, {Name: "R", Unit: "ohm"}, {Name: "±", Unit: "ohm"}}
	for i, tr := range traces {
		l, err := identify.FitLocked(tr, set.Numbers["dwell"])
		if err != nil {
			return fmt.Errorf("angle %d: %w", i+1, err)
		}
		r, sd = append(r, l.R), append(sd, l.RSD)
		for k, v := range []float64{float64(i + 1), l.R, 1.96 * l.RSD} {
			col[k].Values = append(col[k].Values, sheet.Known(v))
		}
	}
	rec.Columns = col
	m := identify.MeanOf(r, sd)
	lo, hi := r[0], r[0]
	for _, x := range r {
		lo, hi = math.Min(lo, x), math.Max(hi, x)
	}
	quantity(rec, "resistance", "ohm", m.Value, m.SD, fmt.Sprintf("slope of current over volts with the shaft at rest, both signs, mean of %d angles; winding with leads, brushes and driver", m.N))
	quantity(rec, "largest over smallest angle", "1", hi/lo, 0, "brushes on other bars")
	rec.Finding = fmt.Sprintf("R %.4g ± %.2g Ω over %d angles", m.Value, 1.96*m.SD, m.N)
	if t, ok := set.Numbers["temperature"]; ok {
		at25 := m.Value / (1 + 0.00393*(t-25))
		quantity(rec, "resistance at 25 °C", "ohm", at25, m.SD*at25/m.Value, fmt.Sprintf("copper, 0.00393/K from 25 °C; the board says %.1f °C", t))
		rec.Finding += fmt.Sprintf(" at %.0f °C", t)
	}
	if hi/lo > 1.15 && m.Spread > 3 {
		doubt(rec, identify.Care, "R changes by x%.2f from angle to angle: brushes or a commutator that wants a look", hi/lo)
	}
	if n := set.Numbers["nameplate"]; n > 0 {
		quantity(rec, "over the rig file's", "1", m.Value/n, m.SD/n, "a current scale that is off shows here, as one known point")
		if m.Value/n < 0.75 || m.Value/n > 1.6 {
			doubt(rec, identify.Care, "R is x%.2f of the rig file's: another winding, or the scale of the current sensor", m.Value/n)
		}
	}
	return nil
}
