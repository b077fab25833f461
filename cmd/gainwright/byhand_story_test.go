package main

import (
	"slices"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

func gainRow(v *job.View, name string) string {
	for _, f := range v.Design.Gains {
		if strings.TrimLeft(f.Name, "> ") == name {
			return f.Value
		}
	}
	return ""
}

// A person changes gains on the design page: margins and worst case follow every
// key, one key goes back, gains that do not keep the margins are not pushed, and
// what is pushed can be computed again from the record.
func TestGainsByHandByKeys(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.upTo(job.StepPush)
		p.press("l") // the open loop follows the bound, on its own page
		was := p.live.View().Design.Bode
		p.press("j")
		p.wait(2 * time.Second)
		if now := p.live.View().Design.Bode; len(was.Gain) == 0 || *now.Crossover == *was.Crossover || !strings.Contains(p.see(), "gain, dB") {
			t.Errorf("the loop does not follow the bound:\n%s", p.see())
		}
		p.press("k")
		p.wait(2 * time.Second)
		if now := p.live.View().Design.Bode; *now.Crossover != *was.Crossover {
			t.Errorf("crossover %g after a step and back, %g before", *now.Crossover, *was.Crossover)
		}
		p.press("8")
		rule := p.live.View().Design
		p.press("+")
		if v := p.live.View(); v.Design.ByHand {
			t.Fatal("a gain changed before one was in hand")
		}
		p.press("n")
		before := gainRow(p.live.View(), "kp")
		p.press("+")
		p.press("+")
		p.wait(time.Second)
		two := p.live.View().Design
		if gainRow(p.live.View(), "kp") == before || slices.Equal(two.Margins, rule.Margins) || slices.Equal(two.Worst, rule.Worst) || two.Keys != 2 {
			t.Errorf("margins or worst case do not follow:\n%s", p.see())
		}
		if !strings.Contains(p.see(), "BY HAND") || !strings.Contains(p.see(), "before") || len(two.BeforeStep) == 0 {
			t.Errorf("the page does not say so:\n%s", p.see())
		}
		p.press("u")
		p.press("u")
		p.wait(time.Second)
		if got := p.live.View().Design; gainRow(p.live.View(), "kp") != before || !slices.Equal(got.Margins, rule.Margins) {
			t.Errorf("two keys back are not where it began:\n%s", p.see())
		}
		for range 15 {
			p.press("+")
		}
		p.wait(time.Second)
		p.press("enter")
		p.until("the refusal", func(v *job.View) bool { return v.Refusal != nil && v.Refusal.Number == 735 })
		p.press("8")
		for range 13 {
			p.press("u")
		}
		p.wait(time.Second)
		want := gainRow(p.live.View(), "kp")
		p.upToFrom(job.StepPush, job.StepFirstLoop)
		dir := p.leave()
		r, problems := sheet.Open(dir)
		if len(problems) > 0 {
			t.Fatal(problems)
		}
		out, err := job.Recompute(r)
		if err != nil || len(out.Differences) > 0 {
			t.Errorf("computed again: %v, %+v", err, out.Differences)
		}
		var kept sheet.ProposalRecord
		if err := r.LastJSON(sheet.KindProposal, job.RuleByHand, &kept); err != nil || !kept.Chosen {
			t.Errorf("the record does not say that the gains were set by hand: %v, %+v", err, kept)
		}
		if v := p.live.View(); v.Push == nil || !strings.HasPrefix(want, v.Push.Rows[0].New) {
			t.Errorf("pushed %+v, by hand was %s", v.Push, want)
		}
	})
}
