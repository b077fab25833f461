package job

import (
	"fmt"
	"math"
	"slices"

	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
)

// RuleByHand is the rule of gains that a person set.
const RuleByHand = "by-hand"

// Bounds of gains that are set by hand, on the fitted model: the largest bound
// that a proposal can be asked for; and by how much a key changes a gain (our choice).
const (
	handMsMax  = 2.0
	handFactor = 1.05
	handWeight = 0.05
)

// hand is a person at the gains: the set as it stands, what it was before each
// key, and the slot in hand.
type hand struct {
	set    GainSet
	now    Designed
	before []handStep
	slot   int
	step   []Point // forecast of the gains before the first key
}

// handStep is a set with what came of it.
type handStep struct {
	set GainSet
	was Designed
}

// PickGain goes on to the next gain of the board, and begins with the first.
func (j *Job) PickGain(by int) {
	if !j.mayEdit() {
		return
	}
	if j.hand == nil {
		from := j.NewSet
		if from == nil {
			from = &j.Running
		}
		j.hand = &hand{set: from.Clone(), now: Designed{Found: j.FoundMargins, Proposals: j.Proposals, Chosen: j.Chosen, NoChange: j.NoChange,
			Set: j.NewSet, Gains: j.Gains, Margins: j.Margins, Worst: j.Worst}}
		if j.Gains != nil {
			j.hand.step, _, _ = j.forecastStep(*j.Gains, j.VerifySpeed())
		}
	} else {
		n := len(j.hand.set.Names)
		j.hand.slot = ((j.hand.slot+by)%n + n) % n
	}
	j.showDesign()
}

// TurnGain makes the gain in hand larger or smaller by a key's worth, and judges
// the new set like any other.
func (j *Job) TurnGain(by int) {
	if j.hand == nil || !j.mayEdit() || by == 0 {
		return
	}
	h := j.hand
	to := h.set.Clone()
	name := to.Names[h.slot]
	bits, err := to.rounded(h.slot, j.turned(name, to.at(h.slot), by))
	if err != nil {
		j.h.Say("by hand: %v", err)
		return
	}
	if bits == to.Bits[h.slot] && to.LSB != nil { // under one unit
		bits = uint32(int32(bits) + int32(by))
	}
	if bits == to.Bits[h.slot] {
		return
	}
	to.Bits[h.slot] = bits
	set := j.designSettings()
	set.ByHand = to.digits()
	d, err := set.Design(*j.Fit.Best())
	if err != nil {
		j.h.Say("by hand: %v", err)
		return
	}
	h.before = append(h.before, handStep{h.set, h.now})
	h.set, h.now = to, d
	j.takeHand()
}

// TakeBack undoes the last key; before the first it leaves the gains to the rule.
func (j *Job) TakeBack() {
	if j.hand == nil || !j.mayEdit() {
		return
	}
	h := j.hand
	n := len(h.before) - 1
	if n < 0 {
		j.hand = nil
		j.showDesign()
		return
	}
	h.set, h.now, h.before = h.before[n].set, h.before[n].was, h.before[:n]
	j.takeHand()
}

// takeHand makes the set in hand the one to be pushed; what was done with another
// has to be done again.
func (j *Job) takeHand() {
	d := j.hand.now
	j.FoundMargins, j.Proposals, j.Chosen, j.NoChange = d.Found, d.Proposals, d.Chosen, d.NoChange
	j.NewSet, j.Gains, j.Margins, j.Worst = d.Set, d.Gains, d.Margins, d.Worst
	for _, id := range []StepID{StepPush, StepFirstLoop, StepVerify, StepStore} {
		if j.steps[id].Status == Done {
			j.steps[id].Status = ToDo
		}
	}
	j.publish()
	j.showDesign()
}

func (j *Job) mayEdit() bool {
	return j.Fit != nil && j.Fit.Best() != nil && j.steps[StepDesign].Status == Done && j.Gains != nil && len(j.Running.Names) > 0
}

// turned is a gain after one key.
func (j *Job) turned(name string, v float64, by int) float64 {
	if name == "b" {
		return math.Max(0, math.Round((v+float64(by)*handWeight)*100)/100)
	}
	first := j.firstOf(name)
	switch {
	case v == 0 && by > 0:
		return first
	case v == 0 || by < 0 && math.Abs(v) < first && slices.Contains([]string{"kd", "kv", "ks", "tf", "td"}, name):
		return 0
	}
	return v * math.Pow(handFactor, float64(by))
}

// firstOf is what a gain of nothing becomes by the first key.
func (j *Job) firstOf(name string) float64 {
	p := j.Gains.Parallel()
	switch name {
	case "kd":
		return 0.05 * p.Kp * j.Tau
	case "td":
		return 0.05 * j.Tau
	case "kv":
		return 0.1 / j.Gain
	case "ks":
		return math.Max(0.1*j.slidingVolts(), 1e-3)
	case "kp", "kc":
		return 0.1 / j.Gain
	case "ki":
		return 0.1 / (j.Gain * j.Tau)
	}
	return j.ID.Loop.Seconds()
}

// byHand judges the set that a person chose, and puts it beside the rules.
func (s DesignSettings) byHand(out *Designed, loop model.Linear, f identify.Fit) error {
	id := s.identity()
	set, err := wordsSet(id, s.ByHand)
	if err != nil {
		return err
	}
	if err := set.Finite(); err != nil {
		return err
	}
	held, err := set.Design(id, s.DriveMax)
	if err == nil {
		err = held.Validate()
	}
	if err != nil {
		return err
	}
	m, err := design.Judge(loop, linear(held))
	if err != nil {
		return err
	}
	p := design.Proposal{Rule: RuleByHand, Gains: held, Margins: m}
	switch {
	case !m.Stable:
		p.Refused = "the loop is not stable on the fitted model"
	case float64(m.Ms) > handMsMax:
		p.Refused = fmt.Sprintf("Ms is %.2f on the fitted model, over the largest bound that may be chosen, %.1f", float64(m.Ms), handMsMax)
	case s.Noise > 0 && held.Parallel().Kp > s.Noise:
		p.Refused = fmt.Sprintf("one step of the reported speed would move the drive by over %.0f %% of its range", 100*noiseShare)
	}
	out.Proposals, out.Chosen, out.NoChange = append(out.Proposals, p), len(out.Proposals), false
	out.Set, out.Gains, out.Margins = &set, &held, &m
	if !m.Stable {
		return nil
	}
	w, err := design.WorstCase(loop, linear(held), s.spread(f, loop))
	if err == nil {
		out.Worst = &w
	}
	return err
}

// keepHand keeps the gains that a person chose before they are pushed, or refuses
// them.
func (j *Job) keepHand() error {
	if j.hand == nil || len(j.hand.before) == 0 {
		return nil
	}
	if why := j.Proposals[j.Chosen].Refused; why != "" {
		return refuse(735, "push", "gains set by hand: "+why, "take keys back on the design page until the margins hold")
	}
	set := j.designSettings()
	set.ByHand = j.hand.set.digits()
	return j.keepProposals(set, true)
}

// handRows are the slots of the board for the design page, the one in hand marked.
func (j *Job) handRows(d *DesignView) {
	h := j.hand
	if h == nil {
		return
	}
	first := h.set
	if len(h.before) > 0 {
		first = h.before[0].set
	}
	d.Gains = nil
	for i, n := range h.set.Names {
		f := Fact{Name: "  " + n, Value: number(h.set.at(i)) + " " + gainUnits[n], Why: "set by hand, as the board will hold it; n picks, + and - change it, u takes back"}
		if i == h.slot {
			f.Name = "> " + n
		}
		if h.set.Bits[i] != first.Bits[i] {
			f.Value += ", was " + number(first.at(i))
		}
		d.Gains = append(d.Gains, f)
	}
	d.ByHand, d.Keys, d.BeforeStep = true, len(h.before), h.step
	d.Notes = nil
	if why := j.Proposals[max(j.Chosen, 0)].Refused; why != "" && len(h.before) > 0 {
		d.Notes = []string{"not to be pushed: " + why}
	}
}
