package tui

import (
	"fmt"
	"strings"

	"gainwright/tui/palette"
	"gainwright/tui/strip"
	"gainwright/tune/job"
)

// model draws the fitted model with its judgement: the data it had not seen,
// what is left of it, the numbers with their width, and the other candidates.
func (p *painter) model(a area) {
	m := p.v.Model
	if m == nil {
		a.put(1, 0, palette.Plain, "No model yet: it comes from the fit.")
		return
	}
	role, word := palette.Strong, strings.ToUpper(p.tame(m.Verdict))
	switch m.Verdict {
	case "believed":
	case "":
		word = "NONE YET"
	default:
		role = palette.Caution
	}
	x := a.put(1, 0, palette.Plain, "verdict")
	x = a.put(x+1, 0, role, " "+word+" ")
	say := strings.Join(m.Reasons, "; ")
	if m.Helps != "" {
		say += "; would help: " + m.Helps
	}
	y := max(1, a.sub(x+1, 0, a.w-x-2, a.h).wrap(0, palette.Plain, say))

	left := 42
	if a.w > 100 {
		left = 48
	}
	text := a.sub(0, y, left-1, a.h-y)
	p.modelText(text, m)
	pics := a.sub(left, y, a.w-left, a.h-y)
	data, fit, title := m.HoldData, m.HoldFit, "hold-out, rpm   dotted: model"
	if len(data) == 0 {
		data, fit, title = m.Data, m.Fit, "fitted data, rpm   dotted: model"
	}
	parts := []int{6, 3, 0, 0}
	if a.h >= 34 {
		parts = []int{5, 3, 4, 4}
	}
	at := 0
	part := func(i int) area {
		h := pics.h * parts[i] / (parts[0] + parts[1] + parts[2] + parts[3])
		if i == 3 || (i == 1 && parts[2] == 0) {
			h = pics.h - at
		}
		sub := pics.sub(0, at, pics.w, h)
		at += h
		return sub
	}
	p.curves(part(0), plot{title: title, unit: "s", scale: rpmPerRad}, curve{strip.Data, data}, curve{strip.Forecast, fit})
	p.curves(part(1), plot{title: "residual, rpm", unit: "s", scale: rpmPerRad, zero: true}, curve{strip.Second, m.Residual})
	if parts[2] > 0 {
		p.curves(part(2), plot{title: "fitted data, rpm   dotted: model", unit: "s", scale: rpmPerRad}, curve{strip.Data, m.Data}, curve{strip.Forecast, m.Fit})
		p.stairs(part(3), m.Stairs)
	}
}

func (p *painter) modelText(a area, m *job.ModelView) {
	var params []job.Fact
	for _, list := range [][]job.Fact{m.Params, m.Friction} {
		for _, f := range list {
			f.Limit, f.Verdict = "", "" // the reasons of the verdict say more
			params = append(params, f)
		}
	}
	y := p.rows(a, 0, p.widths(a.w, params), params)
	if len(m.Candidates) > 0 && y < a.h {
		a.table(y, palette.Strong, []int{14, 7, 9, 0}, " candidate", "NRMSE", "hold-out", "")
		y++
		for _, c := range m.Candidates {
			role, hand := palette.Plain, " "
			if c.Chosen {
				role, hand = palette.Strong, ">"
			}
			a.table(y, role, []int{14, 7, 9, 0}, hand+c.Kind, c.NRMSE, c.Holdout, c.Verdict)
			y++
		}
	}
	if len(m.Plausible) > 0 && y < a.h-1 {
		y = p.heading(a, y, " plausible?")
		list := make([]job.Fact, len(m.Plausible))
		for i, f := range m.Plausible {
			f.Limit = "" // w shows it with its reason
			list[i] = f
		}
		y = p.rows(a, y, p.widths(a.w, list), list)
	}
	if list := experimentFacts(p.v); len(list) > 0 && y < a.h-1 {
		y = p.heading(a, y, " experiments")
		p.rows(a, y, p.widths(a.w, list), list)
	}
}

// experimentFacts are the numbers of the optional experiments, with a verdict
// where one is not believed.
func experimentFacts(v *job.View) []job.Fact {
	var list []job.Fact
	for _, x := range v.Experiments {
		for i, f := range x.Facts {
			if i == 0 && x.Verdict != "believed" {
				f.Verdict = x.Verdict
			}
			f.Name = x.Title + ": " + f.Name
			list = append(list, f)
		}
	}
	return list
}

// design draws the proposal: gains, margins beside what was found and what is
// asked for, the forecast, and the rules side by side.
func (p *painter) design(a area) {
	d := p.v.Design
	if d == nil {
		a.put(1, 0, palette.Plain, "No proposal yet: it comes from the model.")
		return
	}
	y := p.designHead(a, d)
	rules := 0
	if len(d.Rules) > 0 {
		rules = min(len(d.Rules)+1, max(0, a.h-y-10))
	}
	if a.h >= 30 {
		rules = len(d.Rules) + 1
	}
	left := 55
	if a.w > 100 {
		left = 62
	}
	mid := a.sub(0, y, a.w, a.h-y-rules)
	p.marginTable(mid.sub(0, 0, left-1, mid.h), d)
	pics := mid.sub(left, 0, mid.w-left, mid.h)
	top := pics.h * 3 / 5
	title := "step, rpm"
	before := d.FoundStep
	if len(before) > 0 {
		title = "rpm   dotted: found"
	}
	if d.ByHand {
		before, title = d.BeforeStep, "rpm   dotted: before"
	}
	p.curves(pics.sub(0, 0, pics.w, top), plot{title: title, unit: "s", scale: rpmPerRad, zero: true},
		curve{strip.Forecast, before}, curve{strip.Data, d.Step})
	p.curves(pics.sub(0, top, pics.w, pics.h-top), plot{title: "drive, V", unit: "s", scale: 1, zero: true, limit: float64(p.v.Drive.VoltsMax), near: true},
		curve{strip.Second, d.Drive})
	p.rules(a.sub(0, a.h-rules, a.w, rules), d)
}

func (p *painter) designHead(a area, d *job.DesignView) int {
	switch {
	case d.ByHand:
		return p.handHead(a, d)
	case d.Refused != "":
		x := a.put(1, 0, palette.Caution, " REFUSED ")
		return a.sub(x+1, 0, a.w-x-2, a.h).wrap(0, palette.Plain, d.Refused)
	case d.NoChange:
		x := a.put(1, 0, palette.Good, " NO ADJUSTMENT NEEDED ")
		a.put(x+2, 0, palette.Plain, "The gains as found meet the targets.")
		return 1
	}
	x := a.put(1, 0, palette.Plain, "bound on Ms")
	x = a.put(x+1, 0, palette.Strong, number(d.MsMax, 2))
	if d.CanBeMoved {
		x = a.put(x+3, 0, palette.Plain, p.keyed("{j} more margin   {k} more speed"))
	}
	if len(d.Notes) > 0 {
		a.put(x+3, 0, palette.Plain, strings.Join(d.Notes, "; "))
	}
	return 1
}

// handHead is the head of the page while a person is at the gains.
func (p *painter) handHead(a area, d *job.DesignView) int {
	x := a.put(1, 0, palette.Strong, " BY HAND ")
	x = a.put(x+1, 0, palette.Plain, p.keyed("{n} next gain   + larger   - smaller   "))
	back := p.keyed("{u} leave")
	if d.Keys > 0 {
		back = fmt.Sprintf(p.keyed("{u} take back (%d)"), d.Keys)
	}
	a.put(x, 0, palette.Plain, back)
	if len(d.Notes) == 0 {
		return 1
	}
	a.put(1, 1, palette.Caution, p.tame(strings.Join(d.Notes, "; ")))
	return 2
}

// marginTable joins the margins of the proposal with the worst case, what was
// found and the targets, by their names.
func (p *painter) marginTable(a area, d *job.DesignView) {
	y := p.rows(a, 0, p.widths(a.w, d.Gains), d.Gains)
	widths, heads := []int{14, 11, 9, 9, 10}, []string{"", "new", "worst", "found", "target"}
	if a.w > 58 {
		widths = []int{17, 11, 11, 11, 11}
	}
	in := a.sub(1, 0, a.w-1, a.h)
	in.table(y, palette.Strong, widths, heads...)
	y++
	base := len(d.Gains)
	for _, name := range names(d.Margins, d.Worst, d.Targets, d.Found) {
		if y >= a.h {
			break
		}
		n, ni := find(d.Margins, name)
		w, wi := find(d.Worst, name)
		t, ti := find(d.Targets, name)
		f, fi := find(d.Found, name)
		at := base
		x := 0
		put := func(i int, fact job.Fact, index, offset int) {
			role := palette.Plain
			if i == 1 {
				role = palette.Strong
			}
			if p.s.why && index >= 0 && at+offset+index == p.s.whyRow {
				role = palette.Chosen
			} else if fact.Verdict != "" && verdictRole(fact.Verdict) == palette.Caution {
				role = palette.Caution
			}
			in.sub(x, y, widths[i]-1, 1).put(0, 0, role, fact.Value)
			x += widths[i]
		}
		in.sub(0, y, widths[0]-1, 1).put(0, 0, palette.Plain, name)
		x = widths[0]
		put(1, n, ni, 0)
		put(2, w, wi, len(d.Margins))
		put(3, f, fi, len(d.Margins)+len(d.Worst)+len(d.Targets))
		put(4, t, ti, len(d.Margins)+len(d.Worst))
		y++
	}
}

// names lists the names of facts in the order of their first appearance.
func names(lists ...[]job.Fact) []string {
	var out []string
	seen := map[string]bool{}
	for _, l := range lists {
		for _, f := range l {
			if !seen[f.Name] {
				seen[f.Name] = true
				out = append(out, f.Name)
			}
		}
	}
	return out
}

func find(list []job.Fact, name string) (job.Fact, int) {
	for i, f := range list {
		if f.Name == name {
			return f, i
		}
	}
	return job.Fact{}, -1
}

func (p *painter) rules(a area, d *job.DesignView) {
	if a.h <= 0 {
		return
	}
	widths := []int{18, 8, 8, 6, 6, 8, 6, 8, 0}
	a.table(0, palette.Strong, widths, " rule", "Kp", "Ki", "Ms", "PM", "GM", "over", "settle", "")
	for i, r := range d.Rules {
		role, hand := palette.Plain, " "
		if r.Chosen {
			role, hand = palette.Strong, ">"
		}
		a.table(i+1, role, widths, hand+r.Rule, r.Kp, r.Ki, r.Ms, r.PM, r.GM, r.Overshoot, r.Settling, r.Note)
	}
}

// push draws a change of gains: old, new, and what the board read back.
func (p *painter) push(a area) {
	u := p.v.Push
	if u == nil {
		a.put(1, 0, palette.Plain, "No change of gains was proposed to the board yet.")
		return
	}
	x := a.put(1, 0, palette.Plain, "state")
	a.put(x+1, 0, pushRole(u.State), " "+strings.ToUpper(p.tame(u.State))+" ")
	in := a.sub(1, 2, a.w-2, a.h-2)
	widths := []int{16, 14, 14, 14, 0}
	in.table(0, palette.Strong, widths, "gain", "old", "new", "read back", "unit")
	y := 1
	for _, r := range u.Rows {
		in.table(y, palette.Plain, widths, r.Name, r.Old, r.New, r.ReadBack, r.Unit)
		in.sub(widths[0]+widths[1], y, widths[2]-1, 1).put(0, 0, palette.Strong, r.New)
		y++
	}
	y++
	if u.Stored != "" {
		x := in.put(0, y, palette.Strong, "stored")
		in.put(x+2, y, palette.Plain, u.Stored)
		y++
	}
	in.wrap(y, palette.Plain, "Gains go to the board's RAM first. Storing is a step of its own, after they were verified. v pushes the gains of as-found back.")
}

// pushRole makes a push that did not end well stand out.
func pushRole(state string) palette.Role {
	if strings.Contains(state, "fail") || strings.Contains(state, "differ") {
		return palette.Caution
	}
	return palette.Strong
}

// verify draws measured against forecast, with the band, and the targets.
func (p *painter) verify(a area) {
	e := p.v.Verify
	if e == nil {
		a.put(1, 0, palette.Plain, "Nothing was verified yet.")
		return
	}
	if e.Passed {
		a.put(1, 0, palette.Good, " PASSED ")
	} else {
		a.put(1, 0, palette.Caution, " NOT PASSED ")
	}
	if e.Hunting != "" {
		a.put(15, 0, palette.Caution, " "+e.Hunting+" ")
	}
	title := "speed, rpm   dotted: forecast, shaded: its band   dashed: setpoint"
	if len(e.Earlier) > 0 {
		title = "rpm  dotted: forecast, shaded: its band  dashed: setpoint  thin: last time"
	}
	rows := min(len(e.Rows)+1, a.h/2)
	p.curves(a.sub(0, 1, a.w, a.h-1-rows), plot{
		title: title, unit: "s", scale: rpmPerRad, low: e.BandLow, high: e.BandHigh,
	}, curve{strip.Setpoint, e.Setpoint}, curve{strip.Second, e.Earlier}, curve{strip.Forecast, e.Forecast}, curve{strip.Data, e.Measured})
	foot := a.sub(0, a.h-rows, a.w, rows)
	w := p.widths(foot.w, e.Rows, []job.Fact{{Name: "target", Value: "measured", Limit: "limit", Verdict: "verdict"}})
	foot.sub(1, 0, foot.w-1, 1).table(0, palette.Strong, w, "target", "measured", "limit", "verdict")
	p.rows(foot, 1, w, e.Rows)
}
