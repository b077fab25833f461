package tui

import (
	"strings"

	"gainwright/tui/palette"
	"gainwright/tui/strip"
	"gainwright/tune/job"
)

// Page names one page of the console.
type Page uint8

// The pages, in the order of their keys.
const (
	PageNone Page = iota // follow the job
	PagePath
	PagePorts
	PageFound
	PageChecks
	PagePlan
	PageLive
	PageModel
	PageDesign
	PagePush
	PageVerify
	PageCard
	PageAlarms
	PageHelp
	PageWords
	PageInterlocks
	PageEarlier
	PageLoop
	PageExperiments
	pageCount
)

var pageNames = [pageCount]string{
	PagePath: "path", PagePorts: "ports", PageFound: "as-found", PageChecks: "checks", PagePlan: "plan",
	PageLive: "run", PageModel: "model", PageDesign: "design", PagePush: "push", PageVerify: "verify",
	PageCard: "card", PageAlarms: "alarms", PageHelp: "keys", PageWords: "words", PageInterlocks: "interlocks", PageEarlier: "earlier", PageLoop: "loop", PageExperiments: "experiments",
}

// String returns the name of the page as it is shown.
func (p Page) String() string {
	if p >= pageCount || p == PageNone {
		return ""
	}
	return pageNames[p]
}

// Look says what the terminal can show.
type Look struct {
	NoColour bool         // attributes, but no colours
	Dumb     bool         // no sequences at all; implies ASCII
	ASCII    bool         // no characters beyond ASCII
	Hand     Hand         // which hand is free for the keys
	Glyphs   strip.Glyphs // of the charts; ASCII where ASCII is set
}

// HandVariable names the setting for the free hand in the surroundings.
const HandVariable = "GAINWRIGHT_HAND"

// LookFrom reads what the terminal can show from its surroundings: NO_COLOR
// (set and not empty: no colour), TERM=dumb (no sequences), TERM=linux (no
// braille), GAINWRIGHT_HAND (left or right: the keys under that hand), and the locale (ASCII unless it says UTF-8; a system without any
// locale variables at all, as Windows is, counts as UTF-8).
func LookFrom(getenv func(string) string) Look {
	var l Look
	l.NoColour = getenv("NO_COLOR") != ""
	l.Hand, _ = HandNamed(getenv(HandVariable))
	switch getenv("TERM") {
	case "dumb":
		l.Dumb = true
	case "linux":
		l.Glyphs = strip.Block
	}
	for _, name := range []string{"LC_ALL", "LC_CTYPE", "LANG"} {
		if v := strings.ToLower(getenv(name)); v != "" {
			l.ASCII = !strings.Contains(v, "utf-8") && !strings.Contains(v, "utf8")
			break
		}
	}
	if l.Dumb || l.ASCII {
		l.ASCII, l.Glyphs = true, strip.ASCII
	}
	return l
}

// local is a small matter between the screen and the person that the job does
// not see yet.
type local uint8

const (
	localNone    local = iota
	localQuit          // leave?
	localRemark        // the text of a remark
	localSkip          // the reason for leaving a step out
	localMenu          // choose a page
	localShelve        // the reason for shelving an alarm
	localService       // the reason for taking one out of service
)

// Screen is what the console remembers between keys. It is a value; the zero
// value with a Look from New follows the job.
type Screen struct {
	look   Look
	styles *palette.Styles

	picked Page // chosen by the person, PageNone to follow the job
	over   Page // what the job would have shown then; a change of it ends the choice

	row     int  // selected row, or first row shown
	rowPage Page // the page that row belongs to
	why     bool // the reasons of numbers are shown
	whyRow  int

	local  local
	typed  string // text typed so far
	askID  int    // the question that typed belongs to, if no local matter does
	left   int    // the question whose field the person left; 0 none
	notice string // what the last key could not do, and why
}

// New returns the screen at the start.
func New(look Look) Screen {
	if look.Dumb {
		look.ASCII = true
	}
	if look.ASCII {
		look.Glyphs = strip.ASCII
	}
	return Screen{
		look:   look,
		styles: palette.New(palette.Options{NoColour: look.NoColour, Dumb: look.Dumb}),
	}
}

// The phases of the drive as a View names them.
const (
	disarmed  = "DISARMED"
	arming    = "ARMING"
	armed     = "ARMED"
	countDown = "COUNT-DOWN"
	running   = "RUNNING"
	stopping  = "STOPPING"
	tripped   = "TRIPPED"
)

// Hot reports whether every key but the mark key means a stop: in the
// count-down, in a run, and while the shaft turns. A shaft that turns in the
// hand of the person who was asked to turn it is no motion in this sense.
func Hot(v *job.View) bool {
	if v == nil {
		return false
	}
	switch v.Drive.Phase {
	case countDown, running, stopping:
		return true
	case disarmed, "":
		if v.Ask != nil && v.Ask.Kind == job.AskHandTurn {
			return false
		}
	}
	return v.Drive.Moving
}

// standing reports whether keys may act as words and choices: disarmed and
// still as far as is known.
func standing(v *job.View) bool {
	return !Hot(v) && (v.Drive.Phase == disarmed || v.Drive.Phase == "")
}

// asksText reports whether the question takes typed text.
func asksText(q *job.Question) bool {
	return q != nil && (q.Kind == job.AskText || q.Kind == job.AskWord || q.Kind == job.AskNumber)
}

// typing reports whether letters go into a field.
func (s Screen) typing(v *job.View) bool {
	if v == nil || !standing(v) {
		return false
	}
	if s.local == localRemark || s.local == localSkip || s.local == localShelve || s.local == localService {
		return true
	}
	return s.local == localNone && asksText(v.Ask) && (s.left == 0 || s.left != v.Ask.ID)
}

// field returns the text typed so far.
func (s Screen) field(v *job.View) string {
	if s.local == localNone && v.Ask != nil && s.askID != v.Ask.ID {
		return ""
	}
	return s.typed
}

// page returns the page that is shown.
func (s Screen) page(v *job.View) Page {
	auto, forced := follow(v)
	if forced || s.picked == PageNone || s.over != auto {
		return auto
	}
	return s.picked
}

// follow returns the page that the job leads to, and whether nothing else may
// be shown now.
func follow(v *job.View) (page Page, forced bool) {
	switch v.Drive.Phase {
	case arming, armed, countDown:
		return PagePlan, true
	case running, stopping:
		return PageLive, true
	case tripped:
		return PageAlarms, !v.Drive.Acked
	}
	switch {
	case v.Current == job.StepPort && !asks(v):
		return PagePorts, false
	case v.Plan != nil:
		return PagePlan, false
	case v.Doing || asks(v):
		return working(v), false
	}
	return result(v), false
}

func asks(v *job.View) bool { return v.Ask != nil }

// working returns the page of the step in work.
func working(v *job.View) Page {
	switch v.Current {
	case job.StepPort:
		return PagePorts
	case job.StepIdentity, job.StepAsLeft:
		return PageFound
	case job.StepCount, job.StepSign, job.StepStop, job.StepSilence, job.StepLimits:
		return PageChecks
	case job.StepInterlocks:
		return PageInterlocks
	case job.StepSwap:
		return PageEarlier
	case job.StepBreakaway, job.StepStaircase, job.StepStep, job.StepSecond, job.StepFirstLoop:
		if v.Live != nil {
			return PageLive
		}
	case job.StepFit:
		if v.Model != nil {
			return PageModel
		}
	case job.StepDesign:
		if v.Design != nil {
			return PageDesign
		}
	case job.StepPush, job.StepStore:
		if v.Push != nil {
			return PagePush
		}
	case job.StepVerify:
		if v.Verify != nil {
			return PageVerify
		}
		if v.Live != nil {
			return PageLive
		}
	case job.StepCard:
		return PageCard
	}
	return PagePath
}

// result returns the page of what the last step brought, so that it can be read
// before the next one begins.
func result(v *job.View) Page {
	if st := step(v, v.Current); st != nil && st.ID == job.StepCard && st.Status == job.Done && v.Card != "" {
		return PageCard // the job is over
	}
	last := job.StepID("")
	for _, st := range v.Steps {
		if st.ID == v.Current {
			break
		}
		if st.Status == job.Done {
			last = st.ID
		}
	}
	switch {
	case last == job.StepIdentity && v.Found != nil, last == job.StepAsLeft && v.Found != nil:
		return PageFound
	case last == job.StepFit && v.Model != nil:
		return PageModel
	case last == job.StepDesign && v.Design != nil:
		return PageDesign
	case last == job.StepPush && v.Push != nil, last == job.StepStore && v.Push != nil:
		return PagePush
	case last == job.StepVerify && v.Verify != nil:
		return PageVerify
	case last == job.StepCard && v.Card != "":
		return PageCard
	case (last == job.StepStaircase || last == job.StepStep || last == job.StepSecond || last == job.StepFirstLoop) && v.Live != nil:
		return PageLive
	}
	return PagePath
}

// step returns the step with an id, or nil.
func step(v *job.View, id job.StepID) *job.StepView {
	for i := range v.Steps {
		if v.Steps[i].ID == id {
			return &v.Steps[i]
		}
	}
	return nil
}

// selected returns the row that is selected on page p: of the path, the step
// that is offered unless the person moved away.
func (s Screen) selected(p Page, v *job.View) int {
	n, first := 0, 0
	switch p {
	case PagePath:
		n = len(v.Steps)
		for i, st := range v.Steps {
			if st.ID == v.Current {
				first = i
			}
		}
	case PagePorts:
		n = len(v.Ports)
	case PageExperiments:
		n = len(v.Experiments)
		first = max(0, n-1) // the newest kind
	default:
		n = 400 // rows scrolled; the page stops at its own end
	}
	if s.rowPage != p {
		return first
	}
	return max(0, min(s.row, n-1))
}
