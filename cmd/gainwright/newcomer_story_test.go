package main

import (
	"os"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link/simrig"
	"gainwright/tui"
	"gainwright/tune/job"
)

// newcomer follows the screen and nothing else: the first key that the bottom row
// offers, what a question says of the simulated rig, and the word that it asks for.
type newcomer struct {
	*person
	w, h    int
	text    string
	worked  int // the question for which the simulated rig was worked
	without int // keys in a row that changed nothing
	waits   int // looks in a row that offered no key
}

func (n *newcomer) look() string {
	n.text = n.screen.Draw(n.live.View(), n.w, n.h)
	return n.text
}

// rest is the screen without its two top rows, which change by themselves.
func rest(text string) string { return strings.Join(strings.SplitN(text, "\n", 3)[2:], "") }

// act does what the screen says now and reports the key, "" for waiting.
func (n *newcomer) act() string {
	text := n.look()
	rows := strings.Split(strings.TrimRight(text, "\n"), "\n")
	bottom := strings.TrimSpace(rows[len(rows)-1])
	ask := n.live.View().Ask
	switch {
	case strings.Contains(text, "Press space now"), strings.HasPrefix(bottom, "space the stop key"):
		return " "
	case strings.HasPrefix(bottom, "space"), strings.HasPrefix(bottom, "y area is clear, in"), bottom == "":
		return ""
	case strings.HasPrefix(bottom, "type"):
		_, word, _ := strings.Cut(text, "Type this word to go on: ")
		word, _, _ = strings.Cut(word, "\n")
		for _, c := range strings.TrimSpace(word) {
			n.press(string(c))
		}
		return "enter"
	}
	for _, how := range []string{"t turns the simulated", "o switches the simulated", "o works the simulated"} {
		if ask != nil && ask.ID != n.worked && strings.Contains(text, how) {
			n.worked = ask.ID
			return how[:1]
		}
	}
	key, _, _ := strings.Cut(bottom, " ")
	if key == "b" {
		return "" // the way back only: the step is at work
	}
	return key
}

// follow goes on until ok, and counts what a newcomer should not meet.
func (n *newcomer) follow(most int, ok func(*job.View) bool) {
	n.t.Helper()
	for n.keys < most {
		if ok(n.live.View()) {
			return
		}
		key := n.act()
		if key == "" {
			if n.waits++; n.waits > 600 {
				n.t.Fatalf("nothing to do for two minutes:\n%s", n.text)
			}
			n.wait(200 * time.Millisecond)
			continue
		}
		n.waits = 0
		before := n.text
		n.press(key)
		n.wait(300 * time.Millisecond)
		if key == "t" {
			n.wait(2 * time.Second)
		}
		if n.without++; rest(n.look()) != rest(before) || n.live.View().Drive.Moving {
			n.without = 0
		}
		if n.without > 12 {
			n.t.Fatalf("a dead end, key %q:\n%s", key, n.text)
		}
	}
	n.t.Fatalf("after %d keys:\n%s", n.keys, n.text)
}

func done(id job.StepID) func(*job.View) bool {
	return func(v *job.View) bool {
		for _, s := range v.Steps {
			if s.ID == id {
				return s.Status == job.Done
			}
		}
		return false
	}
}

// Somebody who has never seen the console comes from the cable to the card by the
// keys that the screen offers first; GAINWRIGHT_LONG=1: also in the smallest window.
func TestANewcomerFollowsTheScreen(t *testing.T) {
	sizes := [][2]int{{80, 24}}
	if os.Getenv("GAINWRIGHT_LONG") != "" {
		sizes = append(sizes, [2]int{40, 10})
	}
	for _, size := range sizes {
		synctest.Test(t, func(t *testing.T) {
			p := newPerson(t, demoRig(t))
			defer p.leave()
			p.screen = tui.New(tui.Look{Dumb: true})
			n := &newcomer{person: p, w: size[0], h: size[1]}
			refused := 0
			n.follow(200, func(v *job.View) bool {
				if v.Refusal != nil {
					refused++
				}
				return done(job.StepCard)(v)
			})
			if refused > 0 {
				t.Errorf("at %v the screen led into a refusal", size)
			}
			t.Logf("at %v: %d keys", size, n.keys)
		})
	}
}

// The board restarts behind the checks: the screen leads back through them, and on.
func TestANewcomerComesBackFromARestart(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.screen = tui.New(tui.Look{Dumb: true})
		n := &newcomer{person: p, w: 40, h: 10}
		n.follow(120, done(job.StepBreakaway))
		p.sim.Rig(func(r *simrig.Rig) { r.Restart("brownout") })
		p.until("the restart", func(v *job.View) bool { return !done(job.StepCount)(v) })
		n.follow(p.keys+60, func(v *job.View) bool {
			if v.Refusal != nil && v.Refusal.Number == 507 {
				t.Fatalf("an arm was offered that the checks forbid:\n%s", n.look())
			}
			return done(job.StepStaircase)(v)
		})
	})
}

// A question put aside is no check that failed; an answer while the shaft still
// turns waits until it stands; and the page of checks shows the newest of each.
func TestAQuestionPutAsideFailsNoCheck(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := newPerson(t, demoRig(t))
		defer p.leave()
		p.upTo(job.StepCount)
		for again := range 2 {
			p.step(job.StepCount)
			if again == 0 {
				p.turnedByHand() // ambient and load are asked once
			}
			p.until("the question about the shaft", asked(job.AskHandTurn))
			p.press("t")
			p.press("enter") // most of the turn is still to come
			p.until("the question about the stop key", asked(job.AskStopKey))
			p.press("b")
			p.until("the end of the step", func(v *job.View) bool { return !v.Doing })
		}
		v := p.live.View()
		if len(v.Checks) != 1 || v.Checks[0].Name != "count" || v.Checks[0].State != "seen working" || v.Refusal != nil {
			t.Errorf("checks %+v, refusal %+v", v.Checks, v.Refusal)
		}
	})
}
