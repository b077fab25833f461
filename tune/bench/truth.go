package bench

import (
	"math"

	"gainwright/link/simrig"
	"gainwright/tune/design"
	"gainwright/tune/job"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// TruthReport is the rig's own physics under the gains as the board holds them.
type TruthReport struct {
	Model        *model.Linear `json:"model"`
	Ms           *float64      `json:"ms"`
	PhaseMargin  *float64      `json:"phase_margin_deg"`
	LoadIAERatio *float64      `json:"load_iae_ratio"`
	BreakForward *float64      `json:"breakaway_forward_V"`
	BreakReverse *float64      `json:"breakaway_reverse_V"`
	Errors       *ModelErrors  `json:"errors"` // of the model, null without one
	Rules        []RuleReport  `json:"rules,omitempty"`
}

// ModelErrors is how far the fitted model is from the rig's own physics.
type ModelErrors struct {
	Gain      float64  `json:"gain_percent"`
	Tau       *float64 `json:"tau_percent"`       // of the slowest pole; null where the poles are complex
	DeadLoops float64  `json:"dead_time_loops"`   // in loop periods, against the dead time that a model of its kind needs
	Break     *float64 `json:"breakaway_percent"` // the worse direction

	// Where the current is measured; null otherwise.
	Resistance *float64 `json:"resistance_percent"` // winding at its temperature
	Ke         *float64 `json:"ke_percent"`
	Inertia    *float64 `json:"inertia_percent"` // rotor and load at the motor shaft
}

// RuleReport judges another rule on the rig's own physics, beside ours.
type RuleReport struct {
	Rule         string   `json:"rule"`
	Refused      string   `json:"refused,omitempty"`
	Stable       bool     `json:"stable"`
	Ms           *float64 `json:"ms"`
	LoadIAERatio *float64 `json:"load_iae_ratio"`
}

// truth judges the pushed gains on the rig's own physics, linearised at the
// speed of the verify.
func truth(v *Virtual, j *job.Job, rules bool) TruthReport {
	speed := j.VerifySpeed()
	if speed == 0 {
		speed = float64(v.s.core.Envelope().SpeedMax) / 3
	}
	t := v.rig.Truth(speed)
	m := model.Linear{Kind: model.KindSecondOrder, Num: t.Num, Den: t.Den, DeadTime: t.DeadTime, InputUnit: model.InputVolts}
	rep := TruthReport{Model: &m, BreakForward: sheet.Known(t.BreakawayForward), BreakReverse: sheet.Known(t.BreakawayReverse)}
	if j.Fit != nil && j.Fit.Best() != nil {
		rep.Errors = modelErrors(t, v.rig.Config(), j)
	}
	if j.Gains == nil {
		return rep
	}
	// The loop sees the mean over the speed window: half of it is delay.
	loop := m
	loop.DeadTime += t.Window / 2
	best := optimum(loop, *j.Gains, j.MsMax(), j.NoiseGainMax())
	ours := judgeOn(loop, *j.Gains, best)
	rep.Ms, rep.PhaseMargin, rep.LoadIAERatio = ours.Ms, ours.phase, ours.LoadIAERatio
	if !ours.Stable {
		rep.Ms = sheet.Known(math.Inf(1))
	}
	if rules {
		rep.Rules = otherRules(j, loop, best)
	}
	return rep
}

func modelErrors(t simrig.Truth, c simrig.Config, j *job.Job) *ModelErrors {
	m := j.Fit.Best().Model
	dead := t.DeadTime
	if m.Kind == model.KindFirstOrder {
		dead = t.FirstOrderDead
	}
	e := &ModelErrors{Gain: 100 * (m.DCGain()/t.Gain - 1), DeadLoops: (m.DeadTime - dead) / j.ID.Loop.Seconds()}
	if tau := slowestReal(m); tau > 0 && slowestReal(model.Linear{Num: t.Num, Den: t.Den}) > 0 {
		e.Tau = sheet.Known(100 * (tau/t.TimeConstant - 1))
	}
	if f := average(j.BreakForward); f != nil {
		worst := 100 * (*f/t.BreakawayForward - 1)
		if r := average(j.BreakReverse); r != nil {
			if x := 100 * (*r/t.BreakawayReverse - 1); math.Abs(x) > math.Abs(worst) {
				worst = x
			}
		}
		e.Break = &worst
	}
	if m, ok := j.Motor(); ok {
		// The winding was about at ambient when its resistance was taken.
		cold := c.Motor.Ohms * (1 + 0.00393*(c.Motor.Ambient-25))
		e.Resistance, e.Ke = sheet.Known(100*(m.R/cold-1)), sheet.Known(100*(m.Ke/c.Motor.K-1))
		if m.J > 0 {
			e.Inertia = sheet.Known(100 * (m.J/(c.Motor.Inertia+c.Load.Inertia/(c.Load.Gear*c.Load.Gear)) - 1))
		}
	}
	return e
}

// slowestReal is the longest time constant of real poles, 0 where the slowest
// are complex.
func slowestReal(m model.Linear) float64 {
	tau := 0.0
	for _, p := range m.Poles() {
		if math.Abs(imag(p)) > 1e-9*math.Abs(real(p)) {
			return 0
		}
		tau = math.Max(tau, -1/real(p))
	}
	return tau
}

// optimum is the load-disturbance IAE of the largest integral gain for the true
// plant under the same bounds; 0 where there is none.
func optimum(m model.Linear, g design.Gains, msMax, noise float64) float64 {
	best, chosen, err := design.Propose(m, design.Options{Rule: design.RuleLargestKi, MsMax: msMax, Noise: noise, SampleTime: g.SampleTime, ComputeDelay: g.ComputeDelay,
		Discretisation: g.Discretisation})
	if err != nil || chosen < 0 || !best[chosen].Margins.LoadStep.IAE.Known() {
		return 0
	}
	return float64(best[chosen].Margins.LoadStep.IAE)
}

// judged is a RuleReport with the phase margin.
type judged struct {
	RuleReport
	phase *float64
}

func judgeOn(m model.Linear, g design.Gains, best float64) (out judged) {
	f, err := design.JudgeFrequency(m, g)
	if err != nil || !f.Stable {
		return out
	}
	out.Stable, out.Ms, out.phase = true, sheet.Known(float64(f.Ms)), sheet.Known(float64(f.PhaseMargin))
	full, err := design.Judge(m, g)
	if err == nil && best > 0 && full.LoadStep.IAE.Known() {
		out.LoadIAERatio = sheet.Known(float64(full.LoadStep.IAE) / best)
	}
	return out
}

// otherRules judges SIMC on the same fitted model, and the step rule of Ziegler
// and Nichols on what a ruler finds on the first step of the step test.
func otherRules(j *job.Job, loop model.Linear, best float64) []RuleReport {
	g := *j.Gains
	var out []RuleReport
	for _, p := range j.Proposals {
		if p.Rule != "simc" {
			continue
		}
		r := RuleReport{Rule: p.Rule, Refused: p.Refused}
		if p.Refused == "" {
			r = judgeOn(loop, p.Gains, best).RuleReport
			r.Rule = p.Rule
		}
		out = append(out, r)
	}
	k, lag, tangent, ok := byHand(j.StepTrace, j.Bias, j.Amplitude)
	r := RuleReport{Rule: "ziegler-nichols-step, by hand"}
	if ok {
		kp := 0.9 * tangent / (k * lag)
		r = judgeOn(loop, design.Gains{Form: design.FormParallel, Kp: kp, Ki: kp * 0.3 / lag, SetpointWeight: 1, SampleTime: g.SampleTime,
			ComputeDelay: g.ComputeDelay, Discretisation: g.Discretisation, DerivativeOn: g.DerivativeOn}, best).RuleReport
		r.Rule = "ziegler-nichols-step, by hand"
	} else {
		r.Refused = "no step that a ruler could be laid on"
	}
	return append(out, r)
}

// byHand reads gain, apparent dead time and time constant off the first step up
// as with a ruler: the tangent at the steepest place, over a tenth of the rise.
func byHand(tr *trace.Trace, bias, amplitude float64) (gain, lag, tangent float64, ok bool) {
	if tr == nil || amplitude <= 0 {
		return 0, 0, 0, false
	}
	start, end := -1, -1
	for i := 1; i < tr.Len(); i++ {
		high := tr.Voltage[i] > bias+0.5*amplitude
		switch {
		case start < 0 && high:
			start = i
		case start >= 0 && !high:
			end = i
		}
		if end > 0 {
			break
		}
	}
	if start < 10 || end-start < 20 {
		return 0, 0, 0, false
	}
	mean := func(v []float64) float64 {
		s := 0.0
		for _, x := range v {
			s += x
		}
		return s / float64(len(v))
	}
	low, high := mean(tr.Speed[start-10:start]), mean(tr.Speed[end-(end-start)/5:end])
	span := max(3, (end-start)/40) // samples under the ruler
	best, at := 0.0, 0
	for i := start; i+span < end; i++ {
		if s := (tr.Speed[i+span] - tr.Speed[i]) / (tr.Time[i+span] - tr.Time[i]); s > best {
			best, at = s, i
		}
	}
	middle := (tr.Speed[at] + tr.Speed[at+span]) / 2
	when := (tr.Time[at]+tr.Time[at+span])/2 - tr.Time[start-1]
	gain, tangent = (high-low)/amplitude, (high-low)/best
	lag = when - (middle-low)/best
	return gain, lag, tangent, gain > 0 && lag > 0 && tangent > 0
}
