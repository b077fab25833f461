package job

import (
	"fmt"
	"slices"

	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
)

// ultimateRules are those that ask for the ultimate gain and period.
var ultimateRules = []string{"ziegler-nichols-ultimate", "tyreus-luyben", "improved-ziegler-nichols-ultimate", "amigo-frequency"}

// relayRules are the rules of the ultimate point on the plant that the relay showed,
// judged on the fitted model: two ways to the same gains, side by side. They are
// shown only; nothing is chosen among them.
func (j *Job) relayRules() []RuleRow {
	rec, ok := j.Experiments[StepRelay]
	if !ok || rec.Verdict == string(identify.Refused) {
		return nil
	}
	gain, _, okK := paramOf(rec, "gain")
	tau, _, okT := paramOf(rec, "time constant")
	dead, _, okL := paramOf(rec, "dead time")
	if !okK || !okT || !okL {
		return nil
	}
	m := model.FirstOrder(gain, tau, max(0, dead))
	if tau2, _, ok := paramOf(rec, "second time constant"); ok {
		m = model.SecondOrder(gain, tau, tau2, max(0, dead))
	}
	set := j.designSettings()
	list, _, err := design.Propose(LoopModel(m, set.Window), design.Options{MsMax: set.MsMax, Noise: set.Noise, SampleTime: set.SampleTime,
		ComputeDelay: set.ComputeDelay, Discretisation: set.Discretisation})
	if err != nil {
		return nil
	}
	loop := j.loopModel(j.Fit.Best())
	var rows []RuleRow
	for _, p := range list {
		if !slices.Contains(ultimateRules, p.Rule) {
			continue
		}
		p.Rule += ", relay"
		if p.Refused == "" {
			if p.Margins, err = design.Judge(loop, linear(p.Gains)); err != nil {
				p.Refused = err.Error()
			}
		}
		rows = append(rows, ruleRow(p))
	}
	return rows
}

// ruleRow is a proposal as the table of rules shows it.
func ruleRow(p design.Proposal) RuleRow {
	row := RuleRow{Rule: p.Rule, Note: p.Refused}
	if p.Refused == "" {
		g, m := p.Gains.Parallel(), p.Margins
		row.Kp, row.Ki, row.Ms = number(g.Kp), number(g.Ki), fmt.Sprintf("%.2f", float64(m.Ms))
		row.PM, row.GM = fmt.Sprintf("%.0f°", float64(m.PhaseMargin)), decibels(m.GainMarginDB)
		row.Overshoot, row.Settling = fmt.Sprintf("%.0f %%", float64(m.Step.Overshoot)), fmt.Sprintf("%.0f ms", float64(m.Step.SettlingTime)*1000)
	}
	return row
}
