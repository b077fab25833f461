package job

import (
	"errors"
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
	j.hand = nil
	j.opt.MsMax = math.Min(2, math.Max(1.2, math.Round((j.opt.MsMax+0.1*float64(by))*10)/10))
	_ = j.Do(StepDesign)
}

// By how much one step of the reported speed may move the drive: a share of its
// range, and of what friction leaves of the drive over back-EMF that closed-loop
// runs may use. Over the second, counts alone would pass the current limit however
// slowly the setpoint moves (our choice).
const (
	noiseShare     = 0.15
	noiseOverdrive = 0.5
)

// NoiseGainMax is the bound on the noise gain of proposals, in V of drive per
// rad/s; 0 where the speed step is not known.
func (j *Job) NoiseGainMax() float64 {
	step := j.sizing().SpeedStep
	if step <= 0 {
		return 0
	}
	volts := noiseShare * float64(j.Env.VoltsMax)
	if over, _ := j.overdrive(); over > 0 {
		volts = math.Min(volts, noiseOverdrive*math.Max(over-j.slidingVolts(), 0.1*over))
	}
	return volts / step
}

// designSettings is what the proposal of this job depends on beside the fit. The
// worst case takes a winding up to 60 K warmer and ferrite magnets, −0.2 % per K
// (common practice, no source).
func (j *Job) designSettings() DesignSettings {
	s := DesignSettings{MsMax: j.opt.MsMax, Overshoot: j.Rig.Targets.Overshoot, Settling: j.Rig.Targets.Settling, Law: LawOf(j.ID),
		DriveMax: float64(j.Env.VoltsMax), Found: j.Found.digits(), Running: j.Running.digits(),
		Seed: uint64(j.opt.Seed), WarmMin: 0, WarmMax: 60, MagnetPerKelvin: -0.002}
	s.Noise, s.Feed = j.NoiseGainMax(), j.feed()
	s.GainMin, s.GainMax = gainSpread(j.Static)
	if l := j.Rig.Load; l.InertiaLeast > 0 && l.InertiaMost > 0 && (l.InertiaLeast != 1 || l.InertiaMost != 1) {
		s.InertiaMin, s.InertiaMax = l.InertiaLeast, l.InertiaMost
	}
	if d := j.Rig.Drive; !j.ID.BusMeasured && d.BusMin > 0 && d.BusMin < d.BusNominal {
		s.BusLow = d.BusMin / d.BusNominal
	}
	s.Keep95 = true
	return s
}

// doDesign judges the gains as found, then proposes.
func (j *Job) doDesign() (result, error) {
	f := j.Fit.Best()
	if f == nil {
		return "", refuse(731, "proposal", "the model is refused", "do the test that would help, then fit again")
	}
	set := j.designSettings()
	j.hand = nil
	j.h.Show(func(v *View) { v.Busy = "proposal and its worst case" })
	d, err := set.Design(*f)
	j.h.Show(func(v *View) { v.Busy = "" })
	j.FoundMargins, j.Proposals, j.Chosen, j.NoChange = d.Found, d.Proposals, d.Chosen, d.NoChange
	if err != nil {
		var r *RefusedError
		if errors.As(err, &r) {
			j.Refused = r.Cause
			if keep := j.keepProposals(set, false); keep != nil {
				err = errors.Join(err, keep)
			}
		}
		return "", err
	}
	j.NewSet, j.Gains, j.Margins, j.Worst = d.Set, d.Gains, d.Margins, d.Worst
	j.showDesign()
	j.showEarlier()
	if j.NoChange {
		const words = "the gains as found meet targets and bounds: no adjustment needed"
		if err := j.h.Keep("event", sheet.NameNoAdjustment, sheet.EventRecord{What: "no adjustment", Detail: words}); err != nil {
			return "", err
		}
		return words, j.keepProposals(set, true)
	}
	m := j.Margins
	return result(fmt.Sprintf("Kp %s V/(rad/s), Ki %s V/rad: Ms %.2f, PM %.0f°, forecast overshoot %.1f %%", number(j.Gains.Parallel().Kp), number(j.Gains.Parallel().Ki),
		float64(m.Ms), float64(m.PhaseMargin), float64(m.Step.Overshoot))), j.keepProposals(set, true)
}

// keepProposals keeps every rule's answer with its settings, and what the board
// will hold of the one that was chosen.
func (j *Job) keepProposals(set DesignSettings, usable bool) error {
	d := Designed{Found: j.FoundMargins, Proposals: j.Proposals, Chosen: j.Chosen, NoChange: j.NoChange, Gains: j.Gains, Margins: j.Margins, Worst: j.Worst}
	if !usable {
		d.Gains = nil
	}
	for i, p := range j.Proposals {
		rec, err := proposalRecord(d, i, set, j.loopModel(j.Fit.Best()), j.FitFile)
		if err != nil {
			return err
		}
		if err := j.h.Keep("proposal", p.Rule, rec); err != nil {
			return err
		}
	}
	return j.keepMotor()
}

// proposalRecord is a rule's answer for the record. One is chosen where something
// is to be changed and came out usable.
func proposalRecord(d Designed, i int, set DesignSettings, loop model.Linear, fitFile string) (rec sheet.ProposalRecord, err error) {
	p := d.Proposals[i]
	rec = sheet.ProposalRecord{Rule: p.Rule, Chosen: i == d.Chosen && d.Gains != nil && !d.NoChange, InputFiles: []string{fitFile}, Notes: p.Notes, Refused: p.Refused}
	if rec.Settings, err = rawJSON(set); err != nil {
		return rec, err
	}
	if p.Refused == "" {
		rec.Gains, rec.Margins = sheet.Raw(p.Gains), sheet.Raw(p.Margins)
	}
	if rec.Chosen {
		rec.Gains, rec.Margins, rec.Worst = sheet.Raw(d.Gains), sheet.Raw(d.Margins), sheet.Raw(d.Worst)
		rec.Bode, rec.Figures = bode(loop, *d.Gains, *d.Margins, d.Worst), figures(*d.Margins, d.Worst, set.alsoDrawn())
	}
	return rec, nil
}

// figures are margins and worst case for people, each with its unit and its why.
func figures(m design.Margins, w *design.Worst, also string) []sheet.Quantity {
	q := func(name, unit string, v design.Value, why string) sheet.Quantity {
		return sheet.Quantity{Name: name, Value: sheet.Known(float64(v)), Unit: unit, Why: why}
	}
	const loop = "on the sampled loop with its exact dead time, zero-order hold and computing delay, gains as the board holds them"
	out := []sheet.Quantity{q("Ms", "1", m.Ms, "largest |1/(1+L)| over all frequencies "+loop), q("phase margin", "deg", m.PhaseMargin, "at the gain crossover, "+loop),
		q("gain margin", "dB", m.GainMarginDB, "at the phase crossover, "+loop), q("delay margin", "s", m.DelayMargin, "phase margin over crossover frequency, the least of all crossovers"),
		q("gain crossover", "Hz", m.Crossover/(2*math.Pi), loop), q("overshoot forecast", "%", m.Step.Overshoot, "unit step of the setpoint, drive not limited, no friction"),
		q("settling forecast", "s", m.Step.SettlingTime, "the same step, within 2 %"), q("load step, peak", "rad/s per V", m.LoadStep.Peak, "speed lost to a step of load as large as 1 V of drive")}
	if w == nil {
		return out
	}
	why := fmt.Sprintf("kept by 95 %% of %d motors drawn from the ± of the fit, the gain of each direction and a winding 0 to 60 K warmer", w.Draws) + also
	return append(out, q("Ms, worst case", "1", w.Ms, why), q("phase margin, worst case", "deg", w.PhaseMargin, why))
}

// showDesign puts the proposal on the screens.
func (j *Job) showDesign() {
	d := &DesignView{MsMax: j.opt.MsMax, NoChange: j.NoChange, CanBeMoved: true}
	for i, p := range j.Proposals {
		row := ruleRow(p)
		row.Chosen = i == j.Chosen && !j.NoChange
		d.Rules = append(d.Rules, row)
	}
	d.Rules = append(d.Rules, j.relayRules()...)
	if j.FoundMargins != nil {
		d.Found = marginFacts(*j.FoundMargins)
	}
	if j.Gains != nil && j.Margins != nil {
		g := j.Gains.Parallel()
		d.Gains = []Fact{{Name: "Kp", Value: number(g.Kp) + " V/(rad/s)", Why: "largest integral gain with Ms under the bound, on the sampled loop with its exact dead time; rounded to binary32 as the board holds it"},
			{Name: "Ki", Value: number(g.Ki) + " V/rad", Why: "as Kp" + j.smallestError(*j.Gains)}, {Name: "setpoint weight", Value: number(g.SetpointWeight), Why: "lowered from 1 until the forecast overshoot keeps 0.8 of the target"}}
		if !j.NoChange {
			d.Gains = append(d.Gains, feedFact(*j.Gains, j.Proposals[j.Chosen].Notes))
		}
		d.Margins = append(marginFacts(*j.Margins), j.delayFact(*j.Margins, *j.Gains)...)
		if !j.NoChange {
			d.Notes = append(d.Notes, j.Proposals[j.Chosen].Notes...)
		}
		d.Bode = bodeView(bode(j.loopModel(j.Fit.Best()), *j.Gains, *j.Margins, j.Worst))
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
		why := fmt.Sprintf("kept by 95 %% of %d motors drawn from the ± of the fit, gain by direction, winding 0 to 60 K warmer", w.Draws) + j.designSettings().alsoDrawn()
		d.Worst = []Fact{{Name: "Ms", Value: fmt.Sprintf("%.2f", float64(w.Ms)), Why: why}, {Name: "phase margin", Value: fmt.Sprintf("%.0f°", float64(w.PhaseMargin)), Why: why},
			{Name: "overshoot", Value: fmt.Sprintf("%.0f %%", float64(w.Overshoot)), Why: why + "; setpoint weight 1 over the first swings"}}
	}
	j.handRows(d)
	t := j.Rig.Targets
	d.Targets = []Fact{{Name: "overshoot", Value: fmt.Sprintf("<= %.3g %%", t.Overshoot)}}
	if t.Settling > 0 {
		d.Targets = append(d.Targets, Fact{Name: nameSettling, Value: fmt.Sprintf("<= %.3g s", t.Settling)})
	}
	j.h.Show(func(v *View) { v.Design = d })
}

func decibels(v design.Value) string {
	if !v.Known() {
		return "none"
	}
	return fmt.Sprintf("%.1f dB", float64(v))
}

// nameSettling joins margins and targets into one row of the screen.
const nameSettling = "settling 2 %"

func marginFacts(m design.Margins) []Fact {
	if !m.Stable {
		return []Fact{{Name: "loop", Value: "NOT STABLE", Verdict: "impossible"}}
	}
	return []Fact{{Name: "Ms", Value: fmt.Sprintf("%.2f", float64(m.Ms)), Why: "largest |1/(1+L)| over all frequencies of the sampled loop"},
		{Name: "phase margin", Value: fmt.Sprintf("%.0f°", float64(m.PhaseMargin))}, {Name: "gain margin", Value: decibels(m.GainMarginDB)},
		{Name: "overshoot", Value: fmt.Sprintf("%.1f %%", float64(m.Step.Overshoot)), Why: "unit step of the setpoint, exact discrete simulation, drive not limited"},
		{Name: nameSettling, Value: fmt.Sprintf("%.0f ms", float64(m.Step.SettlingTime)*1000)},
		{Name: "delay margin", Value: fmt.Sprintf("%.1f ms", float64(m.DelayMargin)*1000)}, {Name: "crossover", Value: fmt.Sprintf("%.1f rad/s", float64(m.Crossover))},
		{Name: "load step", Value: fmt.Sprintf("%.3g rad/s per V", float64(m.LoadStep.Peak))}}
}
