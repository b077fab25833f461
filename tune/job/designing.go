package job

import (
	"fmt"
	"math"

	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
)

// loopModel is the fitted model as the board's loop sees it: the speed is a mean
// over a window, which delays it by half of that window.
func (j *Job) loopModel(f *identify.Fit) model.Linear {
	return LoopModel(f.Model, j.ID.Window().Seconds())
}

// LoopModel adds half the speed window to a model's dead time. The mean over a
// window delays every frequency by exactly half of it; its loss of amplitude,
// sin(ωw/2)/(ωw/2), is under 1 % up to ω = 0.49/w and is left out.
func LoopModel(m model.Linear, window float64) model.Linear {
	m.DeadTime += window / 2
	return m
}

// MsMax is the robustness bound that proposals keep.
func (j *Job) MsMax() float64 { return j.opt.MsMax }

// Nudge steps the robustness bound and proposes anew.
func (j *Job) Nudge(by int) {
	if j.Fit == nil || j.Fit.Best() == nil || j.steps[StepDesign].Status == ToDo {
		return
	}
	j.opt.MsMax = math.Min(2, math.Max(1.2, math.Round((j.opt.MsMax+0.1*float64(by))*10)/10))
	_ = j.Do(StepDesign)
}

// designSettings is what the rules were told: enough to repeat the proposal from
// the record.
type designSettings struct {
	MsMax          float64 `json:"ms_max"`
	SampleTime     float64 `json:"sample_time"`
	ComputeDelay   float64 `json:"compute_delay"`
	Discretisation string  `json:"discretisation"`
	Window         float64 `json:"window_s"`
	Overshoot      float64 `json:"overshoot_target_percent"`
	Weight         bool    `json:"has_setpoint_weight"`
}

// Design proposes gains for a model under a bound, and among them a setpoint
// weight that keeps the overshoot target where the board has one. It is the
// whole computation of the step "proposal": the record holds its inputs.
func Design(m model.Linear, s designSettings) (proposals []design.Proposal, chosen int, err error) {
	loop := LoopModel(m, s.Window)
	bound := s.MsMax
	for {
		proposals, chosen, err = design.Propose(loop, design.Options{MsMax: bound, SampleTime: s.SampleTime, ComputeDelay: s.ComputeDelay,
			Discretisation: s.Discretisation})
		if err != nil || chosen < 0 {
			return proposals, chosen, err
		}
		p := &proposals[chosen]
		want := 0.8 * s.Overshoot
		if float64(p.Margins.Step.Overshoot) <= want {
			return proposals, chosen, nil
		}
		if s.Weight {
			return proposals, chosen, weigh(loop, p, want)
		}
		if bound -= 0.05; bound < 1.15 {
			p.Notes = append(p.Notes, fmt.Sprintf("the overshoot target of %.3g %% is not met even at Ms 1.2: the board has no setpoint weight; use a setpoint ramp", s.Overshoot))
			return proposals, chosen, nil
		}
	}
}

// weigh lowers the setpoint weight until the forecast overshoot keeps want, in
// percent. Margins do not depend on it.
func weigh(m model.Linear, p *design.Proposal, want float64) error {
	for b := 0.9; b > -0.05; b -= 0.1 {
		g := p.Gains
		g.SetpointWeight = math.Max(0, math.Round(b*10)/10)
		judged, err := design.Judge(m, g)
		if err != nil {
			return err
		}
		if float64(judged.Step.Overshoot) <= want || b < 0.05 {
			p.Gains, p.Margins = g, judged
			p.Notes = append(p.Notes, fmt.Sprintf("setpoint weight %.1f keeps the forecast overshoot at %.1f %%", g.SetpointWeight, float64(judged.Step.Overshoot)))
			return nil
		}
	}
	return nil
}

// doDesign judges the gains as found, then proposes.
func (j *Job) doDesign() (result, error) {
	f := j.Fit.Best()
	if f == nil {
		return "", refuse(731, "proposal", "the model is refused", "do the test that would help, then fit again")
	}
	loop := j.loopModel(f)
	j.judgeFound(loop)
	set := designSettings{MsMax: j.opt.MsMax, SampleTime: j.ID.Loop.Seconds(), ComputeDelay: j.ID.ComputeDelay.Seconds(), Discretisation: j.ID.Discretisation,
		Window: j.ID.Window().Seconds(), Overshoot: j.Rig.Targets.Overshoot, Weight: contains(j.ID.GainNames, "b")}
	proposals, chosen, err := Design(f.Model, set)
	if err != nil {
		return "", err
	}
	j.Proposals, j.Chosen = proposals, chosen
	if chosen < 0 {
		why := "no rule applies"
		if len(proposals) > 0 {
			why = proposals[0].Refused
		}
		j.Refused = why
		return "", refuse(732, "proposal refused", why, "see the rules one by one on the design page")
	}
	if j.NoChange = j.foundGoodEnough(); j.NoChange {
		j.Gains, j.Margins = nil, j.FoundMargins
		if g, err := j.Found.Design(j.ID, float64(j.Env.VoltsMax)); err == nil {
			j.Gains = &g
		}
		j.showDesign(set)
		return "the gains as found meet targets and bounds: no adjustment needed", j.keepProposals(set)
	}
	if err := j.round(loop, proposals[chosen].Gains); err != nil {
		return "", err
	}
	if err := j.worstCase(loop, f); err != nil {
		return "", err
	}
	j.showDesign(set)
	m := j.Margins
	return result(fmt.Sprintf("Kp %s V/(rad/s), Ki %s V/rad: Ms %.2f, PM %.0f°, forecast overshoot %.1f %%", number(j.Gains.Parallel().Kp), number(j.Gains.Parallel().Ki),
		float64(m.Ms), float64(m.PhaseMargin), float64(m.Step.Overshoot))), j.keepProposals(set)
}

// judgeFound judges the gains as found on the same model.
func (j *Job) judgeFound(loop model.Linear) {
	j.FoundMargins = nil
	g, err := j.Found.Design(j.ID, float64(j.Env.VoltsMax))
	if err != nil {
		return
	}
	g.UMin, g.UMax = nil, nil
	if m, err := design.Judge(loop, g); err == nil {
		j.FoundMargins = &m
	}
}

// foundGoodEnough reports whether the as-found gains keep targets and bound, and
// are not so slow that the proposal would more than halve the answer to a load.
func (j *Job) foundGoodEnough() bool {
	m := j.FoundMargins
	if m == nil || !m.Stable || !m.Step.SettlingTime.Known() {
		return false
	}
	t := j.Rig.Targets
	if float64(m.Ms) > j.opt.MsMax+0.05 || float64(m.PhaseMargin) < 45 || float64(m.Step.Overshoot) > t.Overshoot ||
		t.Settling > 0 && float64(m.Step.SettlingTime) > t.Settling {
		return false
	}
	best := j.Proposals[j.Chosen].Margins
	return float64(m.LoadStep.IAE) <= 2*float64(best.LoadStep.IAE)
}

// round puts the gains into the board's words, and judges what the board will
// hold. Rounding may not cost the bound.
func (j *Job) round(loop model.Linear, g design.Gains) error {
	set, err := j.Running.With(g, j.ID)
	if err != nil {
		return refuse(733, "proposal", err.Error(), "the firmware has to offer that slot, or another law")
	}
	held, err := set.Design(j.ID, float64(j.Env.VoltsMax))
	if err != nil {
		return err
	}
	free := held
	free.UMin, free.UMax = nil, nil // margins and unit step are those of the linear loop
	m, err := design.Judge(loop, free)
	if err != nil {
		return err
	}
	if !m.Stable || float64(m.Ms) > j.opt.MsMax*1.01+1e-3 {
		return refuse(734, "proposal", fmt.Sprintf("rounded to what the board holds, Ms is %.3f, over the bound of %.2f", float64(m.Ms), j.opt.MsMax),
			"choose a smaller bound, or firmware with finer gains")
	}
	j.NewSet, j.Gains, j.Margins = &set, &held, &m
	return nil
}

// worstCase judges the proposal on motors drawn from the ± of the model and from
// what changes in service: temperature, and the stated spread of gain between
// operating points and directions.
func (j *Job) worstCase(loop model.Linear, f *identify.Fit) error {
	s := design.Spread{Seed: uint64(j.opt.Seed), Cov: f.Cov, WarmMin: 0, WarmMax: 60, MagnetPerKelvin: -0.002}
	for _, p := range f.Params {
		v := p.Value
		if p.Name == "dead_time" {
			v = loop.DeadTime
		}
		s.Names, s.Values = append(s.Names, p.Name), append(s.Values, v)
	}
	if st := j.Static; st != nil && st.GainForward > 0 && st.GainReverse > 0 {
		r := st.GainReverse / st.GainForward
		s.GainMin, s.GainMax = math.Min(1, r), math.Max(1, r)
	}
	free := *j.Gains
	free.UMin, free.UMax = nil, nil
	j.h.Show(func(v *View) { v.Busy = "worst case" })
	w, err := design.WorstCase(loop, free, s)
	j.h.Show(func(v *View) { v.Busy = "" })
	if err != nil {
		return err
	}
	j.Worst = &w
	return nil
}

func (j *Job) keepProposals(set designSettings) error {
	settings, err := rawJSON(set)
	if err != nil {
		return err
	}
	for i, p := range j.Proposals {
		rec := sheet.ProposalRecord{Rule: p.Rule, Chosen: i == j.Chosen && !j.NoChange, Settings: settings, InputFiles: []string{j.FitFile}, Notes: p.Notes, Refused: p.Refused}
		if p.Refused == "" {
			rec.Gains, rec.Margins = sheet.Raw(p.Gains), sheet.Raw(p.Margins)
		}
		if rec.Chosen {
			rec.Gains, rec.Margins, rec.Worst = sheet.Raw(j.Gains), sheet.Raw(j.Margins), sheet.Raw(j.Worst)
			rec.Bode = j.bode()
		}
		if err := j.h.Keep("proposal", p.Rule, rec); err != nil {
			return err
		}
	}
	return j.keepMotor()
}

// showDesign puts the proposal on the screens.
func (j *Job) showDesign(set designSettings) {
	d := &DesignView{MsMax: j.opt.MsMax, NoChange: j.NoChange, CanBeMoved: true}
	for i, p := range j.Proposals {
		row := RuleRow{Rule: p.Rule, Chosen: i == j.Chosen && !j.NoChange, Note: p.Refused}
		if p.Refused == "" {
			g, m := p.Gains.Parallel(), p.Margins
			row.Kp, row.Ki, row.Ms = number(g.Kp), number(g.Ki), fmt.Sprintf("%.2f", float64(m.Ms))
			row.PM, row.GM = fmt.Sprintf("%.0f°", float64(m.PhaseMargin)), decibels(m.GainMarginDB)
			row.Overshoot, row.Settling = fmt.Sprintf("%.0f %%", float64(m.Step.Overshoot)), fmt.Sprintf("%.0f ms", float64(m.Step.SettlingTime)*1000)
		}
		d.Rules = append(d.Rules, row)
	}
	if j.FoundMargins != nil {
		d.Found = marginFacts(*j.FoundMargins)
	}
	if j.Gains != nil && j.Margins != nil {
		g := j.Gains.Parallel()
		d.Gains = []Fact{{Name: "Kp", Value: number(g.Kp) + " V/(rad/s)", Why: "largest integral gain with Ms under the bound, on the sampled loop with its exact dead time; rounded to binary32 as the board holds it"},
			{Name: "Ki", Value: number(g.Ki) + " V/rad", Why: "as Kp"}, {Name: "setpoint weight", Value: number(g.SetpointWeight), Why: "lowered from 1 until the forecast overshoot keeps 0.8 of the target"}}
		d.Margins = marginFacts(*j.Margins)
		d.Notes = append(d.Notes, "feed-forward declined: the integral takes up friction; a feed-forward would be judged by verify only")
		if !j.NoChange {
			d.Notes = append(d.Notes, j.Proposals[j.Chosen].Notes...)
		}
		d.SetPoint = j.VerifySpeed()
		if pts, volts, err := j.forecastStep(*j.Gains, d.SetPoint); err == nil {
			d.Step, d.Drive = pts, volts
		}
	}
	if g, err := j.Found.Design(j.ID, float64(j.Env.VoltsMax)); err == nil && j.FoundMargins != nil && j.FoundMargins.Stable {
		if pts, _, err := j.forecastStep(g, j.VerifySpeed()); err == nil {
			d.FoundStep = pts
		}
	}
	if w := j.Worst; w != nil && !j.NoChange {
		d.Worst = []Fact{{Name: "Ms, 95 % of " + fmt.Sprint(w.Draws), Value: fmt.Sprintf("%.2f", float64(w.Ms)), Why: "motors drawn from the ± of the fit, gain by direction, winding 0 to 60 K warmer"},
			{Name: "PM, 95 %", Value: fmt.Sprintf("%.0f°", float64(w.PhaseMargin))}, {Name: "overshoot, 95 %", Value: fmt.Sprintf("%.0f %%", float64(w.Overshoot))}}
	}
	t := j.Rig.Targets
	d.Targets = []Fact{{Name: "overshoot", Value: fmt.Sprintf("<= %.3g %%", t.Overshoot)}}
	if t.Settling > 0 {
		d.Targets = append(d.Targets, Fact{Name: "settling", Value: fmt.Sprintf("<= %.3g s", t.Settling)})
	}
	j.h.Show(func(v *View) { v.Design = d })
}

func decibels(v design.Value) string {
	if !v.Known() {
		return "none"
	}
	return fmt.Sprintf("%.1f dB", float64(v))
}

func marginFacts(m design.Margins) []Fact {
	if !m.Stable {
		return []Fact{{Name: "loop", Value: "NOT STABLE", Verdict: "impossible"}}
	}
	return []Fact{{Name: "Ms", Value: fmt.Sprintf("%.2f", float64(m.Ms)), Why: "largest |1/(1+L)| over all frequencies of the sampled loop"},
		{Name: "phase margin", Value: fmt.Sprintf("%.0f°", float64(m.PhaseMargin))}, {Name: "gain margin", Value: decibels(m.GainMarginDB)},
		{Name: "delay margin", Value: fmt.Sprintf("%.1f ms", float64(m.DelayMargin)*1000)}, {Name: "crossover", Value: fmt.Sprintf("%.1f rad/s", float64(m.Crossover))},
		{Name: "overshoot", Value: fmt.Sprintf("%.1f %%", float64(m.Step.Overshoot)), Why: "unit step of the setpoint, exact discrete simulation, drive not limited"},
		{Name: "settling 2 %", Value: fmt.Sprintf("%.0f ms", float64(m.Step.SettlingTime)*1000)},
		{Name: "load step", Value: fmt.Sprintf("%.3g rad/s per V", float64(m.LoadStep.Peak))}}
}
