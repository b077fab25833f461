package tui

import (
	"fmt"

	"gainwright/tui/palette"
	"gainwright/tune/job"
)

// facts lists the numbers of a page in the order in which they are drawn, for
// stepping from one to the next and asking where they come from.
func facts(p Page, v *job.View) []job.Fact {
	var all []job.Fact
	switch p {
	case PageFound:
		if f := v.Found; f != nil {
			all = append(append(append(all, f.Lines...), f.Running...), f.Stored...)
		}
	case PagePlan:
		if v.Plan != nil {
			all = append(all, v.Plan.Facts...)
		}
	case PageModel:
		if m := v.Model; m != nil {
			all = append(append(append(append(all, m.Params...), m.Friction...), m.Plausible...), experimentFacts(v)...)
		}
	case PageDesign:
		if d := v.Design; d != nil {
			all = append(append(append(append(append(all, d.Gains...), d.Margins...), d.Worst...), d.Targets...), d.Found...)
		}
	case PageVerify:
		if v.Verify != nil {
			all = append(all, v.Verify.Rows...)
		}
	}
	return all
}

// mark returns the role of the next fact drawn: chosen where the person asks
// for its reason.
func (p *painter) mark(role palette.Role) palette.Role {
	p.fact++
	if p.s.why && p.fact-1 == p.s.whyRow {
		return palette.Chosen
	}
	return role
}

// verdictRole makes a verdict stand out where it is not good.
func verdictRole(v string) palette.Role {
	switch v {
	case "", "ok", "OK", "pass", "passed", "believed", "equal":
		return palette.Plain
	}
	return palette.Caution
}

// widths gives each column of a list of facts the room that its longest text
// needs; where that is too much for w columns, the widest ones give way.
func (p *painter) widths(w int, lists ...[]job.Fact) []int {
	var need [4]int
	for _, list := range lists {
		for _, f := range list {
			for i, text := range [4]string{f.Name, f.Value, f.Limit, f.Verdict} {
				if n := p.width(text); n > 0 {
					need[i] = max(need[i], n+2)
				}
			}
		}
	}
	for need[0]+need[1]+need[2]+need[3] > w-1 {
		widest := 0
		for i := range need {
			if need[i] > need[widest] {
				widest = i
			}
		}
		if need[widest] <= 6 {
			break
		}
		need[widest]--
	}
	return need[:]
}

// rows draws facts from row y on, one a row: name, value, limit, verdict. It
// returns the next free row. Where there is no room for all, the last row says
// how many are left out.
func (p *painter) rows(a area, y int, widths []int, list []job.Fact) int {
	for i, f := range list {
		if y >= a.h {
			p.fact += len(list) - i
			return y
		}
		if y == a.h-1 && i < len(list)-1 {
			a.put(1, y, palette.Plain, fmt.Sprintf("and %d more in a larger window", len(list)-i))
			p.fact += len(list) - i
			return y + 1
		}
		p.oneRow(a, y, widths, f)
		y++
	}
	return y
}

// oneRow draws one fact; columns without a width are left out.
func (p *painter) oneRow(a area, y int, widths []int, f job.Fact) {
	role := p.mark(palette.Plain)
	x := 1
	for i, text := range [4]string{f.Name, f.Value, f.Limit, f.Verdict} {
		w := min(a.w-x, widths[i])
		if w <= 1 {
			continue
		}
		r := role
		if r == palette.Plain {
			switch i {
			case 1:
				r = palette.Strong
			case 3:
				r = verdictRole(text)
			}
		}
		a.sub(x, y, w-1, 1).put(0, 0, r, text)
		x += w
	}
}

// heading writes a short title over a group of rows and returns the next row.
func (p *painter) heading(a area, y int, text string) int {
	a.put(0, y, palette.Strong, text)
	return y + 1
}
