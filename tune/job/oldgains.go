package job

import (
	"fmt"

	"gainwright/tune/design"
)

// TakeOld takes the gains that the earlier job left, in SI units, as the set to be
// pushed: exact where only counts or gear changed, for the board's own scale was
// changed with them. They are judged on this motor like gains set by hand.
func (j *Job) TakeOld() {
	if j.earlier == nil || !j.mayEdit() {
		return
	}
	last, err := LastDesign(j.earlier)
	if err != nil || last.Gains == nil {
		j.h.Say("%s holds no gains to take", j.earlierName())
		return
	}
	to, err := j.Running.With(*last.Gains, j.ID)
	if err != nil {
		j.h.Say("the gains of %s do not fit this board: %v", j.earlierName(), err)
		return
	}
	set := j.designSettings()
	set.ByHand = to.digits()
	d, err := set.Design(*j.Fit.Best())
	if err != nil {
		j.h.Say("the gains of %s: %v", j.earlierName(), err)
		return
	}
	if j.hand == nil {
		j.PickGain(0)
	}
	h := j.hand
	h.before = append(h.before, handStep{h.set, h.now})
	h.set, h.now = to, d
	j.h.Say("the gains that %s left are the ones to be pushed", j.earlierName())
	j.takeHand()
	j.showEarlier()
}

// ofRule are the margins of the rule's proposal, whatever a person has in hand.
func (j *Job) ofRule() *design.Margins {
	if j.hand != nil && len(j.hand.before) > 0 {
		return j.hand.before[0].was.Margins
	}
	return j.Margins
}

// bothMargins are the lines with the margins of both offers, once there is a
// proposal.
func (j *Job) bothMargins(old *design.Margins) []string {
	rule := j.ofRule()
	if old == nil || rule == nil || j.Gains == nil {
		return nil
	}
	taken := "press u to take them"
	if j.hand != nil && len(j.hand.before) > 0 {
		taken = "in hand"
	}
	return []string{"exact scaling: " + marginWords(*old) + ", " + taken, "retune:        " + marginWords(*rule)}
}

func marginWords(m design.Margins) string {
	if !m.Stable {
		return "NOT STABLE"
	}
	return fmt.Sprintf("phase margin %.0f deg, Ms %.2f", float64(m.PhaseMargin), float64(m.Ms))
}
