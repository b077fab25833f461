package tui

import (
	"strings"
	"sync"

	"gainwright/tui/palette"
	"gainwright/tui/strip"
	"gainwright/tune/job"
	"gainwright/tune/sheet/plain"
)

// The size at which everything needed is on screen, and the least at which the
// top rows and the keys still have their room.
const (
	fullWidth, fullHeight = 80, 24
	leastWidth            = 40
)

// painter holds what one Draw needs; painters are used again, so that a frame
// costs little more than its text.
type painter struct {
	canvas
	chart strip.Chart
	s     Screen
	v     *job.View
	page  Page
	fact  int // number of facts drawn so far
}

var painters = sync.Pool{New: func() any { return new(painter) }}

// Draw returns the screen as h rows of at most w columns, joined by line feeds.
func (s Screen) Draw(v *job.View, w, h int) string {
	if w <= 0 || h <= 0 {
		return ""
	}
	if v == nil {
		v = &job.View{}
	}
	if s.styles == nil {
		s = New(s.look)
	}
	p := painters.Get().(*painter)
	defer painters.Put(p)
	p.styles, p.ascii = s.styles, s.look.ASCII
	p.reset(w, h)
	p.s, p.v, p.page, p.fact = s, v, s.page(v), 0
	p.frame(area{&p.canvas, 0, 0, w, h})
	text := p.String()
	p.v, p.s = nil, Screen{}
	return text
}

// frame lays the rows out: two at the top, whatever happens; the keys at the
// bottom; then, as far as there is room, what comes next, the path, the title.
func (p *painter) frame(a area) {
	p.top(a.sub(0, 0, a.w, min(2, a.h)))
	if a.h < 3 {
		return
	}
	p.keys(a.sub(0, a.h-1, a.w, 1))
	low := a.h - 1
	if a.h >= 12 || a.h >= 6 && p.calls() {
		low--
		p.next(a.sub(0, low, a.w, 1))
	}
	high := 2
	tight := p.low() && p.urgent()
	if a.h >= 9 && !tight {
		p.path(a.sub(0, high, a.w, 1))
		high++
	}
	if a.h >= 7 && !tight {
		p.title(a.sub(0, high, a.w, 1))
		high++
	}
	if a.w < fullWidth || a.h < fullHeight {
		p.small(a.sub(0, high, a.w, 1), a.w, a.h)
		high++
	}
	body := a.sub(0, high, a.w, low-high)
	p.body(p.panels(body))
}

func (p *painter) small(a area, w, h int) {
	if w < leastWidth || h < 10 {
		a.put(1, 0, palette.Strong, "too small: 80x24 shows all")
		return
	}
	text := "smaller than 80x24: not all is shown"
	if w >= 70 {
		text = "This window is smaller than 80x24: some of the page is left out."
	}
	a.put(1, 0, palette.Strong, text)
}

// body draws the page into the room that the panels left.
func (p *painter) body(a area) {
	if a.h <= 0 || a.w <= 0 {
		return
	}
	if p.s.local == localMenu && standing(p.v) {
		p.pageMenu(a)
		return
	}
	if a.w > fullWidth {
		a = a.sub(1, 0, a.w-2, a.h)
	}
	switch p.page {
	case PagePorts:
		p.ports(a)
	case PageFound:
		p.found(a)
	case PageChecks:
		p.checks(a)
	case PagePlan:
		p.plan(a)
	case PageLive:
		p.live(a)
	case PageModel:
		p.model(a)
	case PageDesign:
		p.design(a)
	case PagePush:
		p.push(a)
	case PageVerify:
		p.verify(a)
	case PageCard:
		p.card(a)
	case PageAlarms:
		p.alarms(a)
	case PageHelp:
		p.help(a)
	case PageWords:
		p.words(a)
	case PageLoop:
		p.loop(a)
	case PageExperiments:
		p.experiments(a)
	case PageEarlier:
		p.earlier(a)
	case PageInterlocks:
		p.interlocks(a)
	default:
		p.steps(a)
	}
}

var titles = [pageCount]string{
	PagePath: "The job, step by step", PagePorts: "Ports", PageFound: "As-found: the board before the first touch",
	PageChecks: "Checks: seen working this session", PagePlan: "Plan and forecast", PageLive: "Run", PageModel: "Model",
	PageDesign: "Proposal", PagePush: "Push: gains to the board", PageVerify: "Verify: measured against forecast",
	PageCard: "Card", PageAlarms: "Alarms, and what happened", PageHelp: "Keys", PageWords: "Words", PageInterlocks: "Interlocks", PageEarlier: "Earlier record: then and now", PageLoop: "Open loop of the proposal", PageExperiments: "Experiments",
}

func (p *painter) title(a area) {
	a.fill(0, 0, palette.Bar)
	name := titles[p.page]
	switch {
	case p.page == PagePlan && p.v.Plan != nil:
		name += ": " + p.v.Plan.Name
	case p.page == PageLive && p.v.Live != nil:
		name += ": " + p.v.Live.Name
	}
	end := a.put(1, 0, palette.Bar, name)
	side := p.page.String()
	if p.v.Simulated {
		side = "simulated rig: nothing real moves"
	}
	if e := p.v.Drive.Enabling; e != "" {
		side = "enabling switch: " + e
	}
	if end+len(side)+2 < a.w {
		a.right(a.w-1, 0, palette.Bar, side)
	}
}

// wantsStop reports whether the run is there for the stop key to be pressed.
func (p *painter) wantsStop() bool {
	return p.v.Drive.Phase == running && p.v.Current == job.StepStop
}

// calls reports whether the row above the keys says what cannot wait.
func (p *painter) calls() bool { return p.s.notice != "" || p.v.Call != "" || p.wantsStop() }

// next says what comes next, or what the last key could not do.
func (p *painter) next(a area) {
	if p.s.notice != "" {
		a.put(1, 0, palette.Caution, " "+p.s.notice+" ")
		return
	}
	v := p.v
	if p.wantsStop() {
		a.put(1, 0, palette.Caution, " Press space now: this run waits for it, and times it. ")
		return
	}
	if v.Call != "" {
		a.put(1, 0, palette.Caution, " "+v.Call+" ")
		return
	}
	if v.Busy != "" {
		x := a.put(1, 0, palette.Strong, v.Busy)
		p.progress(a, x+2, 0, min(30, a.w-x-16), v.Share)
		return
	}
	st := step(v, v.Current)
	if st == nil {
		return
	}
	word := "NEXT"
	if v.Doing {
		word = "NOW"
	}
	x := a.put(1, 0, palette.Strong, word)
	x = a.put(x+2, 0, palette.Strong, st.Title)
	why := st.For
	if st.Note != "" {
		why = st.Note // the job file's own word
	}
	if why != "" {
		a.put(x, 0, palette.Plain, ": "+why)
	}
}

// progress draws a bar of n cells with its percentage.
func (p *painter) progress(a area, x, y, n int, share float64) {
	if !(share >= 0) {
		share = 0
	}
	share = min(share, 1)
	full, rest := "█", "░"
	if p.ascii {
		full, rest = "#", "."
	}
	if n > 2 {
		k := int(share*float64(n) + 0.5)
		x = a.put(x, y, palette.Plain, strings.Repeat(full, k)+strings.Repeat(rest, n-k)) + 1
	}
	a.put(x, y, palette.Strong, percent(share))
}

// keys fills the bottom row from the key table with what does something now.
func (p *painter) keys(a area) {
	if Hot(p.v) {
		x := a.put(1, 0, palette.Moving, " space STOP ")
		x = a.put(x+2, 0, palette.Key, p.keyed("{m}"))
		x = a.put(x+1, 0, palette.Plain, "mark")
		a.put(x+2, 0, palette.Strong, "any other key stops too")
		return
	}
	if p.s.typing(p.v) {
		a.put(1, 0, palette.Plain, "type, then enter   backspace takes back   esc leaves the field")
		return
	}
	if p.v.Ask != nil && p.v.Ask.Kind == job.AskStopKey && free(p.s, p.v) {
		x := a.put(1, 0, palette.Key, "space")
		x = a.put(x+1, 0, palette.Plain, "the stop key, asked for now")
		a = a.sub(x+1, 0, a.w, 1)
	}
	const always = 8 // room kept for the key to the list of keys
	x := 1
	seen := ""
	for i := range 2 * len(bindings) { // what leads onward stands first
		b := &bindings[i%len(bindings)]
		if b.short == "" || b.short == "keys" || b.label != "enter" && i < len(bindings) || strings.Contains(seen, " "+b.label+" ") || !b.when(p.s, p.v) {
			continue
		}
		short := b.short
		if b.group == groupArmed && b.label == "y" && p.v.Drive.ClearWait > 0 {
			short += ", in " + seconds(p.v.Drive.ClearWait)
		}
		if x+len(b.label)+len(short)+3+always > a.w {
			continue
		}
		seen += " " + b.label + " "
		x = a.put(x, 0, palette.Key, p.s.look.Hand.Key(b.label))
		x = a.put(x+1, 0, palette.Plain, short) + 2
	}
	if standing(p.v) && p.s.local == localNone && x+6 <= a.w {
		x = a.put(x, 0, palette.Key, "?")
		a.put(x+1, 0, palette.Plain, "keys")
	}
}

// table writes cells into columns of the given widths; a width of 0 takes the
// rest of the row.
func (a area) table(y int, role palette.Role, widths []int, texts ...string) {
	x := 0
	for i, text := range texts {
		w := a.w - x
		if i < len(widths) && widths[i] > 0 {
			w = min(w, widths[i])
		}
		if w <= 0 {
			return
		}
		a.sub(x, y, w-1, 1).put(0, 0, role, text)
		x += w
	}
}

// width is the number of columns that s takes once it is tame.
func (c *canvas) width(s string) int { return plain.Width(c.tame(s)) }
