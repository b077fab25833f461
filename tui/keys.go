package tui

import (
	"fmt"
	"strings"

	"gainwright/tune/job"
)

// binding is one key: what it is called, when it does something, and what. The
// table below is the only place that says so; dispatch, the bottom row, the
// page of keys and the table in the README are made from it.
type binding struct {
	keys  string // names as the terminal library gives them, separated by blanks
	label string // as shown
	short string // in the bottom row; "" keeps it out of there
	group string
	help  string
	when  func(Screen, *job.View) bool
	act   func(Screen, *job.View, string) (Screen, []job.Intent)
}

func (b *binding) has(key string) bool {
	for _, k := range strings.Fields(b.keys) {
		if k == key {
			return true
		}
	}
	return false
}

// The groups of the key table.
const (
	groupAlways = "always"
	groupMotion = "in count-down and motion"
	groupArmed  = "armed"
	groupTrip   = "tripped"
	groupAsk    = "when a question waits"
	groupPlan   = "when a plan waits"
	groupDesign = "on the design page"
	groupStill  = "disarmed and still"
)

type intents = []job.Intent

// say makes the act of a key that only means an intent.
func say(in job.Intent) func(Screen, *job.View, string) (Screen, intents) {
	return func(s Screen, _ *job.View, _ string) (Screen, intents) { return s, intents{in} }
}

// shown makes the act of a key that only picks a page.
func shown(p Page) func(Screen, *job.View, string) (Screen, intents) {
	return func(s Screen, v *job.View, _ string) (Screen, intents) { return s.show(p, v), nil }
}

// toggled makes the act of a key that picks a page and leaves it again.
func toggled(p Page) func(Screen, *job.View, string) (Screen, intents) {
	return func(s Screen, v *job.View, _ string) (Screen, intents) {
		if s.page(v) == p {
			return s.show(PageNone, v), nil
		}
		return s.show(p, v), nil
	}
}

func onDesign(s Screen, v *job.View) bool {
	return free(s, v) && v.Design != nil && len(v.Design.Bode.Gain) > 0 && s.page(v) != PagePorts
}

func free(s Screen, v *job.View) bool { return standing(v) && s.local == localNone }

func asking(kinds ...job.QuestionKind) func(Screen, *job.View) bool {
	return func(s Screen, v *job.View) bool {
		if v.Ask == nil || !free(s, v) {
			return false
		}
		for _, k := range kinds {
			if v.Ask.Kind == k {
				return true
			}
		}
		return false
	}
}

func answer(yes bool) func(Screen, *job.View, string) (Screen, intents) {
	return func(s Screen, v *job.View, _ string) (Screen, intents) {
		return s, intents{job.GiveAnswer{Answer: job.Answer{ID: v.Ask.ID, Yes: yes}}}
	}
}

func on(p Page) func(Screen, *job.View) bool {
	return func(s Screen, v *job.View) bool { return free(s, v) && s.page(v) == p }
}

func planWaits(s Screen, v *job.View) bool {
	return free(s, v) && v.Plan != nil && v.Ask == nil && s.page(v) == PagePlan
}

// bindings is the key table. The first row whose key matches and that does
// something now wins.
var bindings = []binding{
	{"", "space", "", groupAlways, "Stop. It goes ahead of everything else, from every page and out of every field; the top rows say what it does now. It is not a substitute for the E-stop.", never, nil},
	{"m", "m", "mark", groupMotion, "Mark this moment of the run.", func(_ Screen, v *job.View) bool { return Hot(v) }, say(job.SetMark{})},
	{"", "any other", "stops", groupMotion, "Stop as well.", func(_ Screen, v *job.View) bool { return Hot(v) }, nil},

	{"y", "y", "area is clear", groupArmed, "Say that everyone is clear of the shaft. Taken no sooner than 2 s after the question.", func(_ Screen, v *job.View) bool { return inArm(v) && v.Drive.ClearAsk }, sayClear},
	{"g", "g", "go", groupArmed, "Start the count-down; any key ends it. Armed for inching: after the first, move one bounded inch at once.", func(_ Screen, v *job.View) bool { return inArm(v) && v.Drive.Clear && !v.Drive.ClearAsk }, say(job.Go{})},
	{"", "any other", "", groupArmed, "Armed for inching and an inch made: disarm. {g} is the next inch.", never, nil},
	{"x n b", "x", "disarm", groupArmed, "Withdraw the arm.", func(_ Screen, v *job.View) bool { return inArm(v) }, say(job.Disarm{})},

	{"e", "e", "acknowledge", groupTrip, "Seen. Changes nothing in the drive.", func(_ Screen, v *job.View) bool { return mayAcknowledge(v) }, say(job.Acknowledge{})},
	{"z", "z", "reset", groupTrip, "Clear a trip that was acknowledged. Nothing starts by it.", func(_ Screen, v *job.View) bool { return v.Drive.Phase == tripped && v.Drive.Acked }, say(job.ResetTrip{})},

	{"y", "y", "yes", groupAsk, "Yes.", asking(job.AskYesNo), answer(true)},
	{"n", "n", "no", groupAsk, "No.", asking(job.AskYesNo), answer(false)},
	{"enter", "enter", "seen, go on", groupAsk, "Seen, done, or: take what was typed.", asking(job.AskEnter, job.AskHandTurn, job.AskPower), answer(true)},
	{"enter", "enter", "to the field", groupAsk, "Go back to a field that was left with esc.", asking(job.AskText, job.AskWord, job.AskNumber), backToField},
	{"1 2 3 4 5 6 7 8 9", "1..9", "answer", groupAsk, "One of the answers that are listed.", asking(job.AskChoice), chosen},
	{"o", "o", "work the input", groupAsk, "Simulated rig only: work the input that is asked for.", func(s Screen, v *job.View) bool {
		return v.Simulated && v.Ask != nil && v.Ask.Kind == job.AskInput && !Hot(v) && s.local == localNone
	}, say(job.WorkInput{})},
	{"t", "t", "turn the shaft", groupAsk, "Simulated rig only: turn the shaft one turn by hand.", func(s Screen, v *job.View) bool {
		return v.Hand && asking(job.AskHandTurn)(s, v)
	}, say(job.TurnHand{})},
	{"o", "o", "power off and on", groupAsk, "Simulated rig only: switch the board off and on.", func(s Screen, v *job.View) bool {
		return v.Simulated && asking(job.AskPower)(s, v)
	}, say(job.CyclePower{})},
	{"", "esc", "", groupAsk, "Leave a field; backspace and ctrl-u take back what was typed.", never, nil},

	{"a", "a", "arm", groupPlan, "Arm the plan that is shown. The arm lapses by itself.", planWaits, say(job.Arm{})},
	{"j down", "j", "smaller", groupPlan, "A smaller run, with a new forecast.", nudges(PagePlan), say(job.Nudge{By: -1})},
	{"k up", "k", "larger", groupPlan, "A larger run, inside the envelope.", nudges(PagePlan), say(job.Nudge{By: 1})},
	{"j down", "j", "more margin", groupDesign, "A lower bound on Ms: calmer, slower.", nudges(PageDesign), say(job.Nudge{By: -1})},
	{"k up", "k", "more speed", groupDesign, "A higher bound on Ms: quicker, nearer to hunting.", nudges(PageDesign), say(job.Nudge{By: 1})},

	{"n", "n", "by hand", groupDesign, "Change gains by hand: the next gain of the board; the first press takes them in hand.", edits(false), say(job.PickGain{By: 1})},
	{"+ =", "+", "larger", groupDesign, "The gain in hand up by a twentieth; forecast, margins and worst case follow.", edits(true), say(job.TurnGain{By: 1})},
	{"- _", "-", "smaller", groupDesign, "The gain in hand down by a twentieth.", edits(true), say(job.TurnGain{By: -1})},
	{"u", "u", "take back", groupDesign, "Take the last key on a gain back; with none left, back to the rule's gains.", edits(true), say(job.TakeBack{})},
	{"u", "u", "take old gains", groupDesign, "On the page of the earlier record: the gains that were left then are the ones to be pushed, exact where only counts or gear changed.", scales, say(job.TakeOld{})},

	{"y", "y", "leave", groupStill, "Leave, when asked.", func(s Screen, v *job.View) bool { return s.local == localQuit }, say(job.Quit{})},
	{"n b esc q", "n", "stay", groupStill, "Stay, when asked.", func(s Screen, v *job.View) bool { return s.local == localQuit }, func(s Screen, v *job.View, _ string) (Screen, intents) {
		s.local = localNone
		return s, nil
	}},
	{"enter", "enter", "open", groupStill, "Open the port that is selected.", func(s Screen, v *job.View) bool {
		return on(PagePorts)(s, v) && v.Ask == nil && !v.Doing && len(v.Ports) > 0
	}, pickPort},
	{"l", "l", "look again", groupStill, "List the ports anew.", on(PagePorts), say(job.LookAgain{})},
	{"enter", "enter", "do this step", groupStill, "Do the step that is selected, or the one that comes next.", mayBegin, begin},
	{"j down", "j", "down", groupStill, "Next row.", hasRows, moved(1)},
	{"k up", "k", "up", groupStill, "Row before.", hasRows, moved(-1)},
	{"enter", "enter", "show", groupStill, "Show the page that is selected in the list of pages.", func(s Screen, v *job.View) bool { return s.local == localMenu }, func(s Screen, v *job.View, _ string) (Screen, intents) {
		return s.show(Page(min(s.row, int(pageCount)-2)+1), v), nil
	}},
	{"b esc", "b", "back", groupStill, "Put a plan, a question or long work aside; otherwise back to where the job is, or to the path.", hasBack, back},
	{"s", "s", "skip", groupStill, "Leave the step out that is selected on the path, with a reason.", func(s Screen, v *job.View) bool {
		return on(PagePath)(s, v) && !v.Doing && len(v.Steps) > 0
	}, opened(localSkip)},
	{"s", "s", "shelve", groupStill, "On the alarms page: put the newest alarm that is no trip aside for a quarter of an hour, with a reason.", mayShelve, opened(localShelve)},
	{"u", "u", "out of service", groupStill, "On the alarms page: take that alarm out of service until it returns, with a reason.", mayShelve, opened(localService)},
	{"v", "v", "revert", groupStill, "Push the gains of as-found back.", func(s Screen, v *job.View) bool { return (on(PagePush)(s, v) || on(PageVerify)(s, v)) && !v.Doing }, say(job.Revert{})},
	{"w", "w", "why", groupStill, "Where a number comes from; {j} and {k} step from number to number.", func(s Screen, v *job.View) bool { return free(s, v) && len(facts(s.page(v), v)) > 0 }, toggleWhy},
	{"r", "r", "remark", groupStill, "Keep a remark in the record.", free, opened(localRemark)},
	{"p", "p", "pages", groupStill, "List of all pages.", func(s Screen, v *job.View) bool { return standing(v) && s.local != localQuit }, menu},
	{"1 2 3 4 5 6 7 8 9 0", "1..9 0", "", groupStill, "Page by its number: 1 path, 2 ports, 3 as-found, 4 checks, 5 plan, 6 run, 7 model, 8 design, 9 push, 0 verify.", free, numbered},
	{"c", "c", "", groupStill, "Card.", free, shown(PageCard)},
	{"f", "f", "", groupStill, "Alarms, and what happened.", free, shown(PageAlarms)},
	{"l", "l", "", groupStill, "The open loop of the proposal: gain and phase over frequency, with its margins and its worst case.", onDesign, shown(PageLoop)},
	{"t", "t", "", groupStill, "The experiments that were done, each with its curves: {j} and {k} go from one to the next.", free, shown(PageExperiments)},
	{"x", "x", "", groupStill, "The earlier record of this rig: how it was left, what differs now, its motor against this one.", free, shown(PageEarlier)},
	{"i", "i", "", groupStill, "Interlocks: every input, as it stands now and as it was seen.", free, shown(PageInterlocks)},
	{"? h", "?", "keys", groupStill, "This list, and back from it ({h} does the same).", free, toggled(PageHelp)},
	{"d", "d", "", groupStill, "Words: what the terms mean.", free, shown(PageWords)},
	{"q ctrl+c", "q", "quit", groupStill, "Leave; it asks first.", func(s Screen, v *job.View) bool {
		return s.local != localQuit && (standing(v) || v.Drive.Phase == tripped)
	}, opened(localQuit)},
	{"", "ctrl-l", "", groupStill, "Draw the screen anew.", never, nil},
}

func never(Screen, *job.View) bool { return false }

func inArm(v *job.View) bool {
	return !Hot(v) && (v.Drive.Phase == armed || v.Drive.Phase == arming)
}

func mayAcknowledge(v *job.View) bool {
	if v.Drive.Phase == tripped {
		return !v.Drive.Acked
	}
	for _, a := range v.Alarms {
		if standing(v) && !a.Acked && unacknowledged(a.State) {
			return true
		}
	}
	return false
}

// nudges reports whether the number of page p can be stepped now.
func nudges(p Page) func(Screen, *job.View) bool {
	return func(s Screen, v *job.View) bool {
		on := s.page(v)
		if on == PageLoop {
			on = PageDesign // the same proposal, drawn over frequency
		}
		if !free(s, v) || s.why || asksText(v.Ask) || on != p {
			return false
		}
		if p == PagePlan {
			return v.Plan != nil && v.Plan.Resize
		}
		return v.Design != nil && v.Design.CanBeMoved
	}
}

// edits reports whether gains can be changed by hand now, or only once they are
// in hand.
func edits(inHand bool) func(Screen, *job.View) bool {
	return func(s Screen, v *job.View) bool {
		return s.page(v) == PageDesign && nudges(PageDesign)(s, v) && !v.Doing && v.Design.Refused == "" && (v.Design.ByHand || !inHand)
	}
}

// scales reports whether the gains of the earlier record can be taken.
func scales(s Screen, v *job.View) bool {
	return free(s, v) && !s.why && !asksText(v.Ask) && !v.Doing && s.page(v) == PageEarlier && v.Earlier != nil && v.Earlier.Scales
}

// hasBack reports whether there is something to go back from.
func hasBack(s Screen, v *job.View) bool {
	if !standing(v) || s.local == localQuit {
		return false
	}
	return s.local != localNone || s.why || v.Ask != nil || v.Plan != nil || v.Busy != "" || s.page(v) != PagePath || s.picked != PageNone
}

// hasRows reports whether there is something to step through.
func hasRows(s Screen, v *job.View) bool {
	if !standing(v) || s.local == localQuit {
		return false
	}
	if s.why || s.local == localMenu {
		return true
	}
	switch s.page(v) {
	case PagePath, PagePorts, PageCard, PageAlarms, PageHelp, PageWords, PageInterlocks, PageEarlier, PageLoop, PageExperiments:
		return true
	}
	return false
}

func sayClear(s Screen, v *job.View, _ string) (Screen, intents) {
	if v.Drive.ClearWait > 0 {
		s.notice = "Too soon: look at the shaft first, then answer."
		return s, nil
	}
	return s, intents{job.SayClear{}}
}

// chosen answers a question that lists its answers.
func chosen(s Screen, v *job.View, key string) (Screen, intents) {
	n := int(key[0] - '1')
	if n >= len(v.Ask.Options) {
		s.notice = fmt.Sprintf("There are %d answers.", len(v.Ask.Options))
		return s, nil
	}
	return s, intents{job.GiveAnswer{Answer: job.Answer{ID: v.Ask.ID, Yes: true, Text: v.Ask.Options[n]}}}
}

// shelvable is the newest alarm that may be put aside, -1 where there is none.
func shelvable(v *job.View) int {
	for i := len(v.Alarms) - 1; i >= 0; i-- {
		if a := v.Alarms[i]; a.Active && a.MayShelve && a.Shelved == job.NotShelved {
			return i
		}
	}
	return -1
}

func mayShelve(s Screen, v *job.View) bool { return on(PageAlarms)(s, v) && shelvable(v) >= 0 }

// inchRest reports whether the arm waits for the press of the next inch.
func inchRest(v *job.View) bool { return v.Drive.Phase == armed && v.Drive.Inch && v.Drive.Inches > 0 }

// inchKey is a key between two inches: the next inch, or disarm.
func inchKey(s Screen, v *job.View, key string) (Screen, intents) {
	s.notice = ""
	switch {
	case key != "g" && key != "G":
		return s, intents{job.Disarm{}}
	case v.Drive.Moving:
		s.notice = "The shaft still turns: press again once it stands."
		return s, nil
	}
	return s, intents{job.Go{}}
}

func backToField(s Screen, v *job.View, _ string) (Screen, intents) {
	s.left = 0
	return s, nil
}

func pickPort(s Screen, v *job.View, _ string) (Screen, intents) {
	return s, intents{job.PickPort{Path: v.Ports[s.selected(PagePorts, v)].Path}}
}

func mayBegin(s Screen, v *job.View) bool {
	return free(s, v) && v.Ask == nil && !v.Doing && v.Plan == nil && len(v.Steps) > 0 && s.page(v) != PagePorts
}

func begin(s Screen, v *job.View, _ string) (Screen, intents) {
	id := v.Current
	if s.page(v) == PagePath {
		id = v.Steps[s.selected(PagePath, v)].ID
	}
	if st := step(v, id); st != nil && !st.Ready {
		s.notice = st.Title + " cannot begin yet. It needs: " + st.Needs
		return s, nil
	}
	s.picked, s.why = PageNone, false
	s.rowPage, s.row = PageNone, 0 // the path is at the job again once the step is over
	return s, intents{job.DoStep{Step: id}}
}

func moved(by int) func(Screen, *job.View, string) (Screen, intents) {
	return func(s Screen, v *job.View, _ string) (Screen, intents) {
		if s.local == localMenu {
			s.row = max(0, min(s.row+by, int(pageCount)-2))
			return s, nil
		}
		return s.move(v, by), nil
	}
}

func back(s Screen, v *job.View, _ string) (Screen, intents) {
	switch {
	case s.local != localNone:
		s.local, s.rowPage = localNone, PageNone
	case s.why:
		s.why = false
	case s.picked != PageNone && s.page(v) == s.picked:
		s.picked, s.rowPage = PageNone, PageNone
	case v.Ask != nil || v.Plan != nil || v.Busy != "":
		return s, intents{job.Decline{}}
	default:
		return s.show(PagePath, v), nil
	}
	return s, nil
}

func opened(l local) func(Screen, *job.View, string) (Screen, intents) {
	return func(s Screen, v *job.View, _ string) (Screen, intents) {
		s.local, s.typed = l, ""
		return s, nil
	}
}

func toggleWhy(s Screen, v *job.View, _ string) (Screen, intents) {
	s.why, s.whyRow = !s.why, 0
	return s, nil
}

func menu(s Screen, v *job.View, _ string) (Screen, intents) {
	if s.local == localMenu {
		s.local, s.rowPage = localNone, PageNone
		return s, nil
	}
	s.row, s.rowPage, s.local = int(s.page(v))-1, PageNone, localMenu
	return s, nil
}

func numbered(s Screen, v *job.View, key string) (Screen, intents) {
	n := int(key[0] - '0')
	if n == 0 {
		n = 10
	}
	return s.show(Page(n), v), nil
}

// KeyTableMarkdown returns the key table for the README.
func KeyTableMarkdown() string {
	var b strings.Builder
	b.WriteString("| when | key | what it does |\n|---|---|---|\n")
	for _, k := range bindings {
		fmt.Fprintf(&b, "| %s | `%s` | %s |\n", k.group, k.label, HandBoth.words(k.help))
	}
	return b.String()
}

// KeyRow is one line of the key table: when a key counts, which it is, what it does.
type KeyRow struct{ When, Keys, Does string }

// KeyTable returns the key table for texts other than the README.
func KeyTable() []KeyRow {
	rows := make([]KeyRow, len(bindings))
	for i, k := range bindings {
		rows[i] = KeyRow{k.group, k.label, HandBoth.words(k.help)}
	}
	return rows
}
