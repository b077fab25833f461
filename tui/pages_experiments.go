package tui

import (
	"fmt"
	"strings"

	"gainwright/tui/palette"
	"gainwright/tui/strip"
	"gainwright/tune/job"
)

// experiments draws one of the experiments that were done: what was found, whether
// that is believed, and its curves.
func (p *painter) experiments(a area) {
	list := p.v.Experiments
	if len(list) == 0 {
		a.put(1, 0, palette.Plain, "No experiment was done yet.")
		return
	}
	at := p.s.selected(PageExperiments, p.v)
	x := list[at]
	end := a.put(1, 0, palette.Strong, x.Title)
	if x.Verdict != "" {
		role := palette.Strong
		if x.Verdict != "believed" {
			role = palette.Caution
		}
		a.put(end+2, 0, role, " "+strings.ToUpper(p.tame(x.Verdict))+" ")
	}
	a.right(a.w-1, 0, palette.Plain, fmt.Sprintf("%d of %d   j k", at+1, len(list)))
	say := x.Finding
	if len(x.Reasons) > 0 {
		say += "; " + strings.Join(x.Reasons, "; ")
	}
	y := 1 + a.sub(1, 1, a.w-2, min(4, a.h-1)).wrap(0, palette.Plain, say)
	pics := a.sub(0, y, a.w, a.h-y)
	switch len(x.Charts) {
	case 0:
		p.rows(pics, 0, p.widths(pics.w, x.Facts), x.Facts)
	case 1:
		p.picture(pics, x.Charts[0])
	case 2:
		top := pics.h / 2
		p.picture(pics.sub(0, 0, pics.w, top), x.Charts[0])
		p.picture(pics.sub(0, top, pics.w, pics.h-top), x.Charts[1])
	default:
		top, left := pics.h/2, pics.w*3/5
		p.picture(pics.sub(0, 0, left, top), x.Charts[0])
		p.picture(pics.sub(0, top, left, pics.h-top), x.Charts[1])
		p.picture(pics.sub(left, 0, pics.w-left, pics.h), x.Charts[2])
	}
}

// picture draws one chart of an experiment over the whole of a. Lines come first,
// then points with the ends of their ±.
func (p *painter) picture(a area, c job.ChartView) {
	scale := 1.0
	if c.Unit == "rad/s" {
		scale = rpmPerRad
	}
	pl := plot{title: c.Title, unit: c.XUnit, scale: scale, powers: c.Powers, zero: c.Zero, dots: c.Dots, bars: c.Bars}
	for _, l := range c.Levels {
		pl.levels = append(pl.levels, level{at: l.V * scale})
	}
	var cs []curve
	for _, m := range c.Model {
		cs = append(cs, curve{strip.Forecast, m.Points})
	}
	for _, l := range c.Lines {
		cs = append(cs, curve{strip.Data, l.Points})
	}
	p.curves(a, pl, cs...)
}
