package tui

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"gainwright/tune/job"
)

// press sends keys one after another and gathers what they mean.
func press(s Screen, v *job.View, keys ...string) (Screen, []job.Intent) {
	var all []job.Intent
	for _, k := range keys {
		var in []job.Intent
		s, in = s.Update(k, v)
		all = append(all, in...)
	}
	return s, all
}

func view(f func(*job.View)) *job.View {
	v := at(job.StepStep, true)
	f(v)
	return v
}

func TestKeysMean(t *testing.T) {
	withPlan := func(v *job.View) { v.Plan = stepPlan() }
	ask := func(k job.QuestionKind) func(*job.View) {
		return func(v *job.View) { v.Ask = &job.Question{ID: 5, Kind: k, Want: "PUMP-3", Default: "24.0"} }
	}
	phase := func(p string, clear, asks bool, wait time.Duration) func(*job.View) {
		return func(v *job.View) {
			withPlan(v)
			v.Drive.Phase, v.Drive.Clear, v.Drive.ClearAsk, v.Drive.ClearWait = p, clear, asks, wait
		}
	}
	give := func(yes bool, text string) []job.Intent {
		return []job.Intent{job.GiveAnswer{Answer: job.Answer{ID: 5, Yes: yes, Text: text}}}
	}
	ports := stages()[0].view
	meant := map[string]bool{}
	one := func(in job.Intent) []job.Intent { return []job.Intent{in} }
	for _, tt := range []struct {
		name, why string
		view      *job.View
		keys      string
		want      []job.Intent
	}{
		{"arm", "a arms the plan that is shown", view(withPlan), "a", one(job.Arm{})},
		{"no plan", "there is nothing to arm", view(func(*job.View) {}), "a", nil},
		{"arm from elsewhere", "a plan is armed only where it is seen", view(withPlan), "? a", nil},
		{"go without clear", "the question comes first", view(phase(armed, false, true, 0)), "g", nil},
		{"clear too soon", "an answer in the first 2 s is not taken", view(phase(armed, false, true, time.Second)), "y", nil},
		{"clear", "", view(phase(armed, false, true, 0)), "y", one(job.SayClear{})},
		{"go", "another key than the arm key", view(phase(armed, true, false, 0)), "a g", one(job.Go{})},
		{"disarm", "", view(phase(armed, true, false, 0)), "x", one(job.Disarm{})},
		{"armed, locked shift", "a locked shift key changes nothing", view(phase(armed, true, false, 0)), "G", one(job.Go{})},
		{"count-down", "every key but the mark key is a stop, which went ahead", view(phase(countDown, true, false, 0)), "g a x y n enter q b", nil},
		{"mark", "", view(phase(running, true, false, 0)), "m", one(job.SetMark{})},
		{"yes", "", view(ask(job.AskYesNo)), "y", give(true, "")},
		{"no", "", view(ask(job.AskYesNo)), "n", give(false, "")},
		{"enter is no yes", "a yes is a key of its own", view(ask(job.AskYesNo)), "enter", nil},
		{"seen", "", view(ask(job.AskEnter)), "enter", give(true, "")},
		{"word", "", view(ask(job.AskWord)), "P U M P - 3 enter", give(true, "PUMP-3")},
		{"wrong word", "nothing happens on a word that differs", view(ask(job.AskWord)), "p u m p - 3 enter", nil},
		{"empty word", "a default never stands in for the word", view(ask(job.AskWord)), "enter", nil},
		{"number", "", view(ask(job.AskNumber)), "5 0 x backspace 0 enter", give(true, "500")},
		{"number with comma", "half of the world writes 24,5", view(ask(job.AskNumber)), "2 4 , 5 enter", give(true, "24.5")},
		{"no number", "", view(ask(job.AskNumber)), "n a n enter", nil},
		{"default", "enter takes what is offered", view(ask(job.AskNumber)), "enter", give(true, "24.0")},
		{"letters are text", "in a field no letter is a command", view(ask(job.AskText)), "a g q enter", give(true, "agq")},
		{"left field", "esc leaves the field, then letters are commands", view(ask(job.AskText)), "h i esc q y", one(job.Quit{})},
		{"quit asks", "", view(func(*job.View) {}), "q", nil},
		{"quit", "", view(func(*job.View) {}), "q y", one(job.Quit{})},
		{"stay", "", view(func(*job.View) {}), "q n y", nil},
		{"remark", "", view(func(*job.View) {}), "r l o u d enter", one(job.AddRemark{Text: "loud"})},
		{"skip", "the step and the reason", view(func(v *job.View) { v.Doing = false }), "1 k s n o enter", one(job.SkipStep{Step: job.StepStaircase, Reason: "no"})},
		{"do another step", "a person who knows goes straight to any step that can begin", view(func(v *job.View) { v.Doing = false }), "1 k k enter", one(job.DoStep{Step: job.StepBreakaway})},
		{"not ready", "what it needs is not there", view(func(v *job.View) { v.Doing = false }), "1 j j enter", nil},
		{"put aside", "", view(withPlan), "b", one(job.Decline{})},
		{"size", "", view(withPlan), "j k k", []job.Intent{job.Nudge{By: -1}, job.Nudge{By: 1}, job.Nudge{By: 1}}},
		{"by hand", "a gain has to be in hand first", view(func(v *job.View) { v.Doing, v.Design = false, designView() }), "8 + - u n", one(job.PickGain{By: 1})},
		{"old gains", "exact scaling is chosen on the earlier record's page", view(func(v *job.View) { v.Doing, v.Earlier = false, &job.EarlierView{Scales: true} }), "u x u", one(job.TakeOld{})},
		{"gains", "", view(byHand), "8 n + = - u", []job.Intent{job.PickGain{By: 1}, job.TurnGain{By: 1}, job.TurnGain{By: 1}, job.TurnGain{By: -1}, job.TakeBack{}}},
		{"trip", "reset comes only after acknowledge", view(func(v *job.View) { v.Drive.Phase = tripped }), "z e", one(job.Acknowledge{})},
		{"reset", "", view(func(v *job.View) { v.Drive.Phase, v.Drive.Acked = tripped, true }), "e z", one(job.ResetTrip{})},
		{"turning by hand", "the shaft turns because the person was asked to", view(func(v *job.View) { ask(job.AskHandTurn)(v); v.Drive.Moving = true }), "enter", give(true, "")},
		{"coasting", "a shaft that turns otherwise makes every key a stop", view(func(v *job.View) { ask(job.AskEnter)(v); v.Drive.Moving = true }), "enter", nil},
		{"revert", "", view(func(v *job.View) { v.Doing = false; v.Push = pushView("pushed") }), "9 v", one(job.Revert{})},
		{"ports", "the one that is selected", ports, "j enter l", []job.Intent{job.PickPort{Path: "/dev/ttyUSB0"}, job.LookAgain{}}},
		{"simulated hand", "", view(func(v *job.View) { simulate(v); ask(job.AskHandTurn)(v) }), "t", one(job.TurnHand{})},
		{"simulated switch", "", view(func(v *job.View) { simulate(v); ask(job.AskPower)(v) }), "o", one(job.CyclePower{})},
		{"no simulated switch", "a real board is switched by hand", view(ask(job.AskPower)), "o t", nil},
	} {
		for _, in := range tt.want {
			meant[fmt.Sprintf("%T", in)] = true
		}
		t.Run(tt.name, func(t *testing.T) {
			_, got := press(New(Look{}), tt.view, strings.Fields(tt.keys)...)
			if d := cmp.Diff(tt.want, got); d != "" {
				t.Errorf("%s; keys %s (-want +got):\n%s", tt.why, tt.keys, d)
			}
		})
	}
	for _, in := range []job.Intent{job.Arm{}, job.Go{}, job.SayClear{}, job.Disarm{}, job.DoStep{}, job.SkipStep{}, job.GiveAnswer{}, job.Decline{},
		job.Acknowledge{}, job.ResetTrip{}, job.SetMark{}, job.AddRemark{}, job.Nudge{}, job.PickGain{}, job.TurnGain{}, job.TakeBack{}, job.TakeOld{}, job.PickPort{}, job.LookAgain{}, job.TurnHand{},
		job.CyclePower{}, job.Revert{}, job.Quit{}} {
		if !meant[fmt.Sprintf("%T", in)] {
			t.Errorf("no key is tried that means %T", in)
		}
	}
}

func TestStopKeyIsABlankInAField(t *testing.T) {
	v := view(func(v *job.View) { v.Ask = &job.Question{ID: 5, Kind: job.AskText} })
	_, got := press(New(Look{}), v, "a", " ", "b", "enter")
	want := []job.Intent{job.GiveAnswer{Answer: job.Answer{ID: 5, Yes: true, Text: "a b"}}}
	if d := cmp.Diff(want, got); d != "" {
		t.Errorf("(-want +got):\n%s", d)
	}
}

func TestTextOfOneQuestionNeverAnswersAnother(t *testing.T) {
	v := view(func(v *job.View) { v.Ask = &job.Question{ID: 5, Kind: job.AskText} })
	s, _ := press(New(Look{}), v, "h", "i")
	v = view(func(v *job.View) { v.Ask = &job.Question{ID: 6, Kind: job.AskText, Default: "none"} })
	_, got := press(s, v, "enter")
	want := []job.Intent{job.GiveAnswer{Answer: job.Answer{ID: 6, Yes: true, Text: "none"}}}
	if d := cmp.Diff(want, got); d != "" {
		t.Errorf("(-want +got):\n%s", d)
	}
}

// TestBottomRowKeysWork: every key that the bottom row names does something.
func TestBottomRowKeysWork(t *testing.T) {
	named := 0
	for _, st := range stages() {
		s := screenAt(st, Look{})
		if Hot(st.view) || s.typing(st.view) {
			continue
		}
		for i := range bindings {
			b := &bindings[i]
			if b.short == "" || b.keys == "" || !b.when(s, st.view) {
				continue
			}
			named++
			key := strings.Fields(b.keys)[0]
			after, wants := s.Update(key, st.view)
			was, is := s.Draw(st.view, 120, 40), after.Draw(st.view, 120, 40)
			if len(wants) == 0 && was == is && key != "j" && key != "k" {
				t.Errorf("%s: key %s (%s) does nothing", st.name, b.label, b.short)
			}
		}
	}
	if named < 100 {
		t.Errorf("only %d keys were tried", named)
	}
}

// TestKeyTable: what the table promises of its keys holds.
func TestKeyTable(t *testing.T) {
	text := KeyTableMarkdown()
	for i := range bindings {
		b := &bindings[i]
		if b.help == "" || b.label == "" || b.group == "" {
			t.Errorf("row %d of the key table is not complete: %+v", i, b)
		}
		if !strings.Contains(text, "`"+b.label+"` | "+HandBoth.words(b.help)) {
			t.Errorf("the table for the README leaves %q out", b.label)
		}
		if (b.act == nil) != (b.keys == "") {
			t.Errorf("%s %s: keys and act do not belong together", b.group, b.label)
		}
		for _, k := range strings.Fields(b.keys) {
			if k == "space" || strings.ToLower(k) != k {
				t.Errorf("%s: %q is not a single key without shift", b.group, k)
			}
		}
	}
}

// TestWordsToAvoid: no word on any screen claims what this program cannot.
func TestWordsToAvoid(t *testing.T) {
	bad := []string{"safe", "guarantee", "emergency stop", "isolated", "protected", " dead "}
	for _, st := range stages() {
		text := strings.ToLower(screenAt(st, Look{Dumb: true}).Draw(st.view, 200, 100))
		text = strings.ReplaceAll(strings.ReplaceAll(text, "dead time", ""), "never a safety function", "")
		for _, w := range bad {
			if strings.Contains(text, w) {
				t.Errorf("%s says %q", st.name, w)
			}
		}
	}
}

func TestPageFollowsTheJob(t *testing.T) {
	want := map[string]Page{
		"ports": PagePorts, "as-found": PageFound, "count": PageChecks, "plan": PagePlan, "armed-go": PagePlan, "count-down": PagePlan,
		"running": PageLive, "ended": PageLive, "model": PageModel, "design": PageDesign, "pushed": PagePush, "verify": PageVerify, "tripped": PageAlarms,
	}
	for _, st := range stages() {
		if p, ok := want[st.name]; ok {
			if got := New(Look{}).page(st.view); got != p {
				t.Errorf("%s shows the page %s, want %s", st.name, got, p)
			}
			delete(want, st.name)
		}
	}
	if len(want) > 0 {
		t.Errorf("stages that are missing: %v", want)
	}
}

func TestChosenPageHoldsUntilTheJobMovesOn(t *testing.T) {
	v := at(job.StepDesign, false)
	v.Model = modelView()
	s, _ := press(New(Look{}), v, "1")
	if got := s.page(v); got != PagePath {
		t.Fatalf("page %s, want the path", got)
	}
	run := view(func(v *job.View) { v.Live = runningLive(1); v.Drive.Phase = running })
	if got := s.page(run); got != PageLive {
		t.Errorf("in a run the page is %s, want the run", got)
	}
	if got := s.page(v); got != PagePath {
		t.Errorf("page %s, want the path again", got)
	}
}

// TestATripIsSeenFirst: until it is acknowledged, a trip keeps its page, also
// from a person who chose another one over the alarms before.
func TestATripIsSeenFirst(t *testing.T) {
	v := view(func(v *job.View) { v.Drive.Phase, v.Drive.Acked = tripped, true })
	s := New(Look{})
	s.picked, s.over = PagePath, PageAlarms
	if got := s.page(v); got != PagePath {
		t.Fatalf("acknowledged: page %s, want the chosen one", got)
	}
	v.Drive.Acked = false
	if got := s.page(v); got != PageAlarms {
		t.Errorf("not acknowledged: page %s, want the alarms", got)
	}
}

func TestLookFrom(t *testing.T) {
	for _, tt := range []struct {
		env  map[string]string
		want Look
	}{
		{map[string]string{}, Look{}},
		{map[string]string{"LANG": "en_GB.UTF-8", "TERM": "xterm-256color"}, Look{}},
		{map[string]string{"NO_COLOR": "1"}, Look{NoColour: true}},
		{map[string]string{"NO_COLOR": ""}, Look{}},
		{map[string]string{"TERM": "dumb"}, Look{Dumb: true, ASCII: true, Glyphs: 2}},
		{map[string]string{"TERM": "linux", "LANG": "C.UTF-8"}, Look{Glyphs: 1}},
		{map[string]string{"LC_ALL": "C", "LANG": "en_GB.UTF-8"}, Look{ASCII: true, Glyphs: 2}},
	} {
		if got := LookFrom(func(k string) string { return tt.env[k] }); got != tt.want {
			t.Errorf("%v: %+v, want %+v", tt.env, got, tt.want)
		}
	}
}
