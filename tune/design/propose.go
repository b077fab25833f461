package design

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"math/cmplx"

	"gainwright/protocol/si"
	"gainwright/tune/model"
)

// Options says what a design is wanted for.
type Options struct {
	// Rule is a name of Rules, "all" for every rule, or empty for our own beside
	// a few published ones.
	Rule string
	// MsMax bounds Ms for our own rule; 1.1 to 3, 0 means 1.6.
	MsMax float64
	// SampleTime and ComputeDelay of the loop in s; a SampleTime of 0 means
	// continuous.
	SampleTime, ComputeDelay float64
	// Law is LawPI (also empty) or LawPID.
	Law string
	// Discretisation of the board's law; empty means BackwardEuler.
	Discretisation string
	// Noise, if above 0, bounds the noise gain of our own rule: V of drive per
	// rad/s of speed noise, both RMS (see NoiseGain).
	Noise float64
	// UMax, if above 0, is the drive in V that a setpoint step of Step must not
	// exceed under our own rule.
	UMax float64
	// Step is the setpoint step in rad/s that UMax is for; 0 means a fifth of the
	// speed at UMax.
	Step float64
}

// DefaultMsMax is the bound on Ms where none is given. *Common practice, no
// source*: 1.6 to 1.8.
const DefaultMsMax = 1.6

// Proposal is what one rule proposes, or why it does not.
type Proposal struct {
	Rule    string
	Gains   Gains
	Margins Margins
	// NoiseGain is in V per rad/s, as NoiseGain says. PeakDrive is the largest
	// drive in V per rad/s of setpoint step.
	NoiseGain, PeakDrive Value
	Notes                []string
	Refused              string // empty unless the rule does not apply
}

// MarshalJSON leaves out gains and margins of a rule that does not apply.
func (p Proposal) MarshalJSON() ([]byte, error) {
	notes := p.Notes
	if notes == nil {
		notes = []string{}
	}
	if p.Refused != "" {
		return json.Marshal(struct {
			Rule    string   `json:"rule"`
			Refused string   `json:"refused"`
			Notes   []string `json:"notes"`
		}{p.Rule, p.Refused, notes})
	}
	return json.Marshal(struct {
		Rule      string   `json:"rule"`
		Gains     Gains    `json:"gains"`
		Margins   Margins  `json:"margins"`
		NoiseGain Value    `json:"noise_gain"`
		PeakDrive Value    `json:"peak_drive"`
		Notes     []string `json:"notes"`
	}{p.Rule, p.Gains, p.Margins, p.NoiseGain, p.PeakDrive, notes})
}

// beside are the rules shown next to ours where none is asked for by name.
var beside = []string{"simc", "tyreus-luyben", "pole-placement"}

// Propose designs gains for m. chosen is the index of the proposal to take: that
// of our own rule, or of the one rule asked for; −1 if it was refused. Errors
// are for ill-formed input; a rule that does not apply is a refused Proposal.
func Propose(m model.Linear, o Options) (proposals []Proposal, chosen int, err error) {
	if err := m.Validate(); err != nil {
		return nil, -1, err
	}
	if o, err = o.complete(); err != nil {
		return nil, -1, err
	}
	var names []string
	switch o.Rule {
	case "":
		names = append([]string{RuleLargestKi}, beside...)
	case "all":
		names = Rules()
	default:
		names = []string{o.Rule}
	}
	// Rules are written for a positive gain; a motor wired the other way gets
	// the same gains with the other sign.
	flip := m.Num[len(m.Num)-1]*firstNotZeroFromEnd(m.Den) < 0
	work := m
	if flip {
		work = m.Scale(-1)
	}
	f, factsErr := newFacts(work, o.SampleTime, o.ComputeDelay)
	if factsErr != nil && !errors.Is(factsErr, ErrRefused) {
		return nil, -1, factsErr
	}
	chosen = -1
	for _, name := range names {
		p := Proposal{Rule: name}
		ruleErr := factsErr
		if ruleErr == nil {
			ruleErr = o.tooSlow(f)
		}
		if ruleErr == nil {
			p, ruleErr = o.propose(work, f, name)
		}
		if ruleErr == nil && flip {
			p.Gains.Kp, p.Gains.Ki, p.Gains.Kd = -p.Gains.Kp, -p.Gains.Ki, -p.Gains.Kd
			p.Notes = append(p.Notes, "the model's gain is negative, so the gains are")
		}
		switch {
		case ruleErr != nil && errors.Is(ruleErr, ErrRefused):
			p = Proposal{Rule: name, Notes: p.Notes, Refused: reason(ruleErr)}
		case ruleErr != nil:
			return nil, -1, ruleErr
		case chosen < 0 && (name == RuleLargestKi || name == o.Rule):
			chosen = len(proposals)
		}
		proposals = append(proposals, p)
	}
	return proposals, chosen, nil
}

func reason(err error) string {
	const prefix = "design: refused: "
	text := err.Error()
	if len(text) > len(prefix) && text[:len(prefix)] == prefix {
		return text[len(prefix):]
	}
	return text
}

func firstNotZeroFromEnd(p []float64) float64 {
	for i := len(p) - 1; i >= 0; i-- {
		if p[i] != 0 {
			return p[i]
		}
	}
	return 0
}

// complete checks o and fills in its defaults.
func (o Options) complete() (Options, error) {
	for _, c := range []struct {
		name  string
		value float64
	}{
		{"sample time", o.SampleTime}, {"compute delay", o.ComputeDelay}, {"bound on Ms", o.MsMax},
		{"bound on the noise gain", o.Noise}, {"bound on the drive", o.UMax}, {"setpoint step", o.Step},
	} {
		if !si.Finite(c.value) || c.value < 0 {
			return o, fmt.Errorf("design: %s is %g: it must be 0 or more", c.name, c.value)
		}
	}
	if o.MsMax == 0 {
		o.MsMax = DefaultMsMax
	}
	if o.MsMax < 1.1 || o.MsMax > 3 {
		return o, fmt.Errorf("design: the bound on Ms is %g: give 1.1 to 3", o.MsMax)
	}
	switch o.Law {
	case "":
		o.Law = LawPI
	case LawPI, LawPID:
	default:
		return o, fmt.Errorf("design: law %q is not known: use pi or pid", o.Law)
	}
	if o.Rule != "" && o.Rule != "all" {
		for _, name := range Rules() {
			if name == o.Rule {
				return o, nil
			}
		}
		return o, fmt.Errorf("design: rule %q is not known: use one of %q, or all", o.Rule, Rules())
	}
	return o, nil
}

// tooSlow refuses a loop that samples less than twice a lag. *Common practice,
// no source*: ten and more are usual.
func (o Options) tooSlow(f facts) error {
	if len(f.lags) > 0 && f.velocity == 0 && o.SampleTime > f.lags[0]/2 {
		return refuse("the loop period of %.3g s is too slow for a motor with a time constant of %.3g s: %.2g s or less is needed",
			o.SampleTime, f.lags[0], f.lags[0]/4)
	}
	return nil
}

func (o Options) shape() Gains {
	g := PI(0, 0, o.SampleTime, o.ComputeDelay)
	g.Discretisation = o.Discretisation
	return g
}

func (o Options) propose(m model.Linear, f facts, name string) (Proposal, error) {
	var g Gains
	var notes []string
	var err error
	if name == RuleLargestKi {
		g, notes, err = o.largestKi(m, f)
	} else {
		g, notes, err = o.publishedRule(f, name)
	}
	p := Proposal{Rule: name, Gains: g, Notes: notes}
	if err != nil {
		return p, err
	}
	p.Margins, err = Judge(m, g)
	if err != nil {
		return p, err
	}
	if !p.Margins.Stable {
		return p, refuse("the loop it gives is not stable on this model")
	}
	if err := resonance(m, p.Margins); err != nil {
		return p, err
	}
	noise, err := NoiseGain(m, g)
	if err != nil {
		return p, err
	}
	peak, err := PeakDrive(m, g, 1)
	p.NoiseGain, p.PeakDrive = Value(noise), Value(peak)
	p.Notes = append(p.Notes, o.advice(f, g, p.Margins)...)
	return p, err
}

// resonance refuses a crossover above a third of a lightly damped pole.
// *Common practice, no source*.
func resonance(m model.Linear, margins Margins) error {
	for _, p := range m.Poles() {
		w := cmplx.Abs(p)
		if imag(p) > 0 && -real(p) < 0.3*w && margins.Crossover.Known() && float64(margins.Crossover) > w/3 {
			return refuse("the crossover of %.3g rad/s is above a third of the resonance at %.3g rad/s: ask for a lower --ms-max, or stiffen the coupling",
				float64(margins.Crossover), w)
		}
	}
	return nil
}

// advice says what else belongs to the gains.
func (o Options) advice(f facts, g Gains, m Margins) []string {
	var notes []string
	if len(f.lags) > 0 && o.SampleTime > f.lags[0]/10 {
		notes = append(notes, fmt.Sprintf("the loop samples only %.2g times a time constant; ten and more are usual", f.lags[0]/o.SampleTime))
	}
	if g.Ki != 0 && g.Kp != 0 {
		tracking := g.Kp / g.Ki
		if g.Kd != 0 {
			tracking = math.Sqrt(tracking * g.Kd / g.Kp)
		}
		notes = append(notes, fmt.Sprintf("anti-windup: clamp, or back-calculation with %.3g s", tracking))
	}
	if m.Step.Overshoot > 10 && g.SetpointWeight > 0 {
		notes = append(notes, fmt.Sprintf("a setpoint step overshoots by %.0f %%: a setpoint weight of 0 or a ramp takes that away, the margins stay", float64(m.Step.Overshoot)))
	}
	return notes
}

// publishedRule applies the named rule for the law asked for, or for PI where it
// has no other.
func (o Options) publishedRule(f facts, name string) (Gains, []string, error) {
	var found *rule
	for i := range published {
		if r := &published[i]; r.name == name && (r.law == o.Law || found == nil) {
			found = r
		}
	}
	notes := []string{"source: " + found.source}
	if found.law != o.Law {
		notes = append(notes, "the rule knows no "+o.Law+" controller; this is its "+found.law)
	}
	g, more, err := found.apply(f)
	notes = append(notes, more...)
	if err != nil {
		return Gains{}, notes, err
	}
	shape := o.shape()
	filter := g.Td / 10
	if g.Form == FormParallel && g.Kd != 0 {
		filter = g.Kd / g.Kp / 10
	}
	if filter > 0 {
		if o.Discretisation == Tustin || o.Discretisation == ForwardEuler {
			filter = math.Max(filter, o.SampleTime)
		}
		notes = append(notes, "derivative filter of a tenth of the derivative time added; published robustness is for none")
	}
	if g.Form == FormSeries {
		notes = append(notes, "stated for the series form; shown converted")
	}
	p := g.Parallel()
	shape.Kp, shape.Ki, shape.Kd, shape.DerivativeFilter = p.Kp, p.Ki, p.Kd, filter
	return shape, notes, shape.Validate()
}
