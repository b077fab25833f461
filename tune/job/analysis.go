package job

import (
	"errors"
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// The analysis of a job is two pure functions, FitSettings.Identify and
// DesignSettings.Design. Everything they depend on is an argument, and every
// argument is in the record: the same gains can be computed again from there.

// FitSettings is what a fit was told.
type FitSettings struct {
	Kind      string  `json:"kind"`
	Holdout   float64 `json:"holdout"`
	FreeStart bool    `json:"free_start"`
	Edges     bool    `json:"edges,omitempty"`         // work out when the drive changed between two samples
	Bus       float64 `json:"bus_nominal_V,omitempty"` // a bus above it, after braking, is no reference for a sag
}

// fitDefaults is how a job fits.
var fitDefaults = FitSettings{Kind: identify.KindAuto, Holdout: 0.5, FreeStart: true}

// Identify fits the models to a step record and judges them on a second one, or
// on the step record's last part where second is nil.
func (set FitSettings) Identify(step, second *trace.Trace) (identify.Result, error) {
	if set.Bus > 0 {
		step = busAtMost(step, set.Bus)
		if second != nil {
			second = busAtMost(second, set.Bus)
		}
	}
	if set.Edges {
		step = edges(step)
		if second != nil {
			second = edges(second)
		}
	}
	traces := []*trace.Trace{about(step)}
	if second != nil {
		traces = append(traces, about(second))
	}
	return identify.RunJoint(traces, identify.Options{Kind: set.Kind, Holdout: set.Holdout, FreeStart: set.FreeStart})
}

// busAtMost cuts the bus of a record to the supply's nominal voltage: where the
// supply takes nothing back a record may begin and end with a bus that braking
// has raised.
func busAtMost(tr *trace.Trace, nominal float64) *trace.Trace {
	if tr.Bus == nil {
		return tr
	}
	out := *tr
	out.Bus = make([]float64, len(tr.Bus))
	for i, v := range tr.Bus {
		out.Bus[i] = math.Min(v, nominal)
	}
	return &out
}

// Law is what a board says of the loop that it closes, as far as gains and
// margins depend on it.
type Law struct {
	Form           string   `json:"form"`
	Number         string   `json:"number"`
	DerivativeOn   string   `json:"derivative_on"`
	Discretisation string   `json:"discretisation"`
	AntiWindup     string   `json:"anti_windup"`
	Quadrants      int      `json:"quadrants"`
	SampleTime     float64  `json:"sample_time"`   // s
	ComputeDelay   float64  `json:"compute_delay"` // s
	Window         float64  `json:"window_s"`
	Slots          []string `json:"slots"` // of a gain set, in order
	// GainLSB is what one unit of each integer gain stands for; nil: binary32.
	GainLSB []float64 `json:"gain_lsb,omitempty"`
}

// LawOf takes the law from a board's identity.
func LawOf(id protocol.Identity) Law {
	return Law{Form: id.Form, Number: id.Number, DerivativeOn: id.Derivative, Discretisation: id.Discretisation, AntiWindup: id.AntiWindup,
		Quadrants: id.Quadrants, SampleTime: id.Loop.Seconds(), ComputeDelay: id.ComputeDelay.Seconds(), Window: id.Window().Seconds(), Slots: id.GainNames, GainLSB: id.GainLSB}
}

// identity is the law as gain sets take it.
func (l Law) identity() protocol.Identity {
	whole := func(s float64) time.Duration { return time.Duration(math.Round(s * 1e9)) }
	return protocol.Identity{Form: l.Form, Number: l.Number, Derivative: l.DerivativeOn, Discretisation: l.Discretisation, AntiWindup: l.AntiWindup,
		Quadrants: l.Quadrants, Loop: whole(l.SampleTime), ComputeDelay: whole(l.ComputeDelay), GainNames: l.Slots, GainLSB: l.GainLSB}
}

// DesignSettings is what the proposal was told beside the fit.
type DesignSettings struct {
	MsMax     float64 `json:"ms_max"`
	Overshoot float64 `json:"overshoot_target_percent"`
	Settling  float64 `json:"settling_target_s"` // 0: no target
	Law
	DriveMax float64  `json:"drive_max_V"`
	Noise    float64  `json:"noise_gain_max,omitempty"` // V of drive per rad/s of speed noise; 0: not bounded
	Found    []string `json:"found_words"`              // gains as found, eight digits a slot
	Running  []string `json:"running_words"`            // gains running before the push

	// ByHand are the words of the set that a person chose instead of the rule's.
	ByHand []string `json:"by_hand_words,omitempty"`

	Feed *Feed `json:"feed_forward,omitempty"`

	// The motors of the worst case.
	Seed            uint64  `json:"worst_seed,string"`
	GainMin         float64 `json:"worst_gain_min"` // factors; both 0: not varied
	GainMax         float64 `json:"worst_gain_max"`
	WarmMin         float64 `json:"worst_warm_min_K"`
	WarmMax         float64 `json:"worst_warm_max_K"`
	MagnetPerKelvin float64 `json:"worst_magnet_per_K"`
	InertiaMin      float64 `json:"worst_inertia_min,omitempty"` // factors; both 0: not varied
	InertiaMax      float64 `json:"worst_inertia_max,omitempty"`
	BusLow          float64 `json:"worst_bus_low,omitempty"` // lowest bus over nominal, where the board does not make up for it; 0: not varied
	Keep95          bool    `json:"worst_keeps_bound,omitempty"`
}

// Designed is what came of a design.
type Designed struct {
	Found     *design.Margins // of the gains as found; nil where they cannot be judged
	Proposals []design.Proposal
	Chosen    int  // in Proposals; -1 where no rule applies
	NoChange  bool // the gains as found meet targets and bounds
	Set       *GainSet
	Gains     *design.Gains // as the board will hold them, or holds them with NoChange
	Margins   *design.Margins
	Worst     *design.Worst // nil with NoChange
}

// ErrNoRule is inside the refusal of a design for which no rule applies.
var ErrNoRule = errors.New("no rule applies")

// Design judges the gains as found, proposes, rounds to what the board holds,
// and judges that, also in the worst case. With an error, what was found before
// it is returned.
func (s DesignSettings) Design(f identify.Fit) (Designed, error) {
	out := Designed{Chosen: -1}
	found, err := wordsSet(s.identity(), s.Found)
	if err != nil {
		return out, err
	}
	running, err := wordsSet(s.identity(), s.Running)
	if err != nil {
		return out, err
	}
	id, loop := s.identity(), LoopModel(f.Model, s.Window)
	held, heldErr := found.Design(id, s.DriveMax)
	if heldErr == nil {
		if m, err := design.Judge(loop, linear(held)); err == nil {
			out.Found = &m
		}
	}
	if out.Proposals, out.Chosen, err = s.keeping(loop, f); err != nil {
		return out, err
	}
	if s.ByHand != nil {
		return out, s.byHand(&out, loop, f)
	}
	if out.Chosen < 0 {
		why := ErrNoRule.Error()
		if len(out.Proposals) > 0 {
			why = out.Proposals[0].Refused
		}
		return out, refuse(732, "proposal refused", why, "see the rules one by one on the design page")
	}
	if out.NoChange = s.goodEnough(out.Found, out.Proposals[out.Chosen]); out.NoChange {
		out.Gains, out.Margins = &held, out.Found
		return out, nil
	}
	s.tracking(&out.Proposals[out.Chosen])
	s.feedForward(loop, &out.Proposals[out.Chosen])
	if err := s.round(&out, loop, running, id); err != nil {
		return out, err
	}
	w, err := design.WorstCase(loop, linear(*out.Gains), s.spread(f, loop))
	if err == nil {
		out.Worst = &w
	}
	return out, err
}

// Caution with a dead time that is not well known (our choice).
const (
	deadSigmas = 1.645 // one-sided 95 %
	deadUnseen = 0.5   // of a loop period, where the fit ends at no dead time
)

// cautious is the loop with the dead time that it has at most: that which a rule
// is given, so that the bound holds where the fit is uncertain. Margins are judged
// with the dead time that was found.
func (s DesignSettings) cautious(loop model.Linear, f identify.Fit) model.Linear {
	dead, sd, ok := f.Value("dead_time")
	switch {
	case !ok:
	case dead == 0:
		loop.DeadTime += math.Max(deadUnseen*s.SampleTime, deadSigmas*sd)
	default:
		loop.DeadTime += deadSigmas * sd
	}
	return loop
}

// linear takes the drive limits off: margins and the unit step are those of the
// linear loop.
func linear(g design.Gains) design.Gains {
	g.UMin, g.UMax = nil, nil
	return g
}

// propose asks the rules, and finds among the answers a setpoint weight that
// keeps the overshoot target where the board has one.
func (s DesignSettings) propose(loop model.Linear) (proposals []design.Proposal, chosen int, err error) {
	bound := s.MsMax
	for {
		proposals, chosen, err = design.Propose(loop, design.Options{MsMax: bound, Noise: s.Noise, SampleTime: s.SampleTime, ComputeDelay: s.ComputeDelay,
			Discretisation: s.Discretisation})
		if err != nil || chosen < 0 {
			return proposals, chosen, err
		}
		p := &proposals[chosen]
		want := 0.8 * s.Overshoot
		if float64(p.Margins.Step.Overshoot) <= want {
			return proposals, chosen, nil
		}
		if contains(s.Slots, "b") {
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

// goodEnough reports whether the as-found gains keep targets and bound, and are
// not so slow that the proposal would more than halve the answer to a load.
func (s DesignSettings) goodEnough(m *design.Margins, best design.Proposal) bool {
	if m == nil || !m.Stable || !m.Step.SettlingTime.Known() {
		return false
	}
	if float64(m.Ms) > s.MsMax+0.05 || float64(m.PhaseMargin) < 45 || float64(m.Step.Overshoot) > s.Overshoot ||
		s.Settling > 0 && float64(m.Step.SettlingTime) > s.Settling {
		return false
	}
	return float64(m.LoadStep.IAE) <= 2*float64(best.Margins.LoadStep.IAE)
}

// round puts the gains into the board's words, and judges what the board will
// hold. Rounding may not cost the bound.
func (s DesignSettings) round(out *Designed, loop model.Linear, running GainSet, id protocol.Identity) error {
	set, err := running.With(out.Proposals[out.Chosen].Gains, id)
	if err != nil {
		return refuse(733, "proposal", err.Error(), "the firmware has to offer that slot, or another law")
	}
	held, err := set.Design(id, s.DriveMax)
	if err != nil {
		return err
	}
	m, err := design.Judge(loop, linear(held))
	if err != nil {
		return err
	}
	if !m.Stable || float64(m.Ms) > s.MsMax*1.01+1e-3 {
		return refuse(734, "proposal", fmt.Sprintf("rounded to what the board holds, Ms is %.3f, over the bound of %.2f", float64(m.Ms), s.MsMax),
			"choose a smaller bound, or firmware with finer gains")
	}
	out.Set, out.Gains, out.Margins = &set, &held, &m
	return nil
}

// spread is the motors that the worst case is drawn from: the ± of the model,
// and what changes in service.
func (s DesignSettings) spread(f identify.Fit, loop model.Linear) design.Spread {
	sp := design.Spread{Seed: s.Seed, Cov: f.Cov, GainMin: s.GainMin, GainMax: s.GainMax, WarmMin: s.WarmMin, WarmMax: s.WarmMax,
		MagnetPerKelvin: s.MagnetPerKelvin}
	sp.InertiaMin, sp.InertiaMax = s.InertiaMin, s.InertiaMax
	if s.BusLow > 0 && sp.GainMin == 0 {
		sp.GainMin, sp.GainMax = 1, 1
	}
	if s.BusLow > 0 {
		sp.GainMin *= s.BusLow
	}
	for _, p := range f.Params {
		v := p.Value
		if p.Name == "dead_time" {
			v = loop.DeadTime
		}
		sp.Names, sp.Values = append(sp.Names, p.Name), append(sp.Values, v)
	}
	return sp
}

// gainSpread is how far apart the gains of the two directions are, as factors on
// the forward one; 0, 0 where that is not known.
func gainSpread(s *identify.Static) (low, high float64) {
	if s == nil || !(s.GainForward > 0) || !(s.GainReverse > 0) {
		return 0, 0
	}
	r := s.GainReverse / s.GainForward
	return math.Min(1, r), math.Max(1, r)
}

// digits is a gain set as its words on the wire, eight digits a slot.
func (s GainSet) digits() []string {
	var w []string
	for _, b := range s.Bits {
		w = append(w, fmt.Sprintf("%08X", b))
	}
	return w
}

// wordsSet turns words back into a set.
func wordsSet(id protocol.Identity, words []string) (GainSet, error) {
	s, slots := newGainSet(id), id.GainNames
	if len(words) != len(slots) {
		return s, fmt.Errorf("%d words for %d gains", len(words), len(slots))
	}
	for i, w := range words {
		bits, ok := protocol.ParseHex32([]byte(w))
		if !ok {
			return s, fmt.Errorf("gain %s: %q is not eight hex digits", slots[i], w)
		}
		s.Bits = append(s.Bits, bits)
	}
	return s, nil
}
