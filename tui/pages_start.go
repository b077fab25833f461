package tui

import (
	"fmt"
	"strings"

	"gainwright/tui/palette"
	"gainwright/tune/job"
)

// steps draws the path: every step with where it stands, and below it what the
// selected one is for, needs, does, takes and gives.
func (p *painter) steps(a area) {
	v := p.v
	n := len(v.Steps)
	if n == 0 {
		a.put(1, 0, palette.Plain, "No steps yet.")
		return
	}
	sel := p.s.selected(PagePath, v)
	columns := 1
	const detail = 7
	if a.w >= fullWidth && n > a.h-detail {
		columns = 2
	}
	each := (n + columns - 1) / columns
	each = max(1, min(each, a.h-detail))
	first := 0
	if per := each * columns; sel >= per {
		first = sel - per + 1
	}
	colW := a.w / columns
	for i := first; i < n && i < first+each*columns; i++ {
		k := i - first
		p.stepRow(a.sub(k/each*colW, k%each, colW-1, 1), i, v.Steps[i], i == sel)
	}
	p.stepDetail(a.sub(0, each+1, a.w, a.h-each-1), v.Steps[sel])
}

func (p *painter) stepRow(a area, i int, st job.StepView, chosen bool) {
	role := palette.Plain
	if chosen {
		role = palette.Chosen
		a.fill(0, 0, role)
	}
	a.put(1, 0, role, fmt.Sprintf("%s %2d %s", p.sign(st.Status), i+1, st.Title))
	word := string(st.Status)
	if st.Status == job.ToDo && !st.Ready {
		word = "not yet"
	} else if st.Status == job.ToDo && st.Optional {
		word = "as wanted"
	}
	if st.Status == job.Refused && !chosen {
		role = palette.Caution
	}
	a.right(a.w-1, 0, role, " "+word)
}

func (p *painter) stepDetail(a area, st job.StepView) {
	y := 0
	row := func(name, text string) {
		if text == "" || y >= a.h {
			return
		}
		a.put(1, y, palette.Strong, name)
		y = a.sub(9, 0, a.w-10, a.h).wrap(y, palette.Plain, text)
	}
	row("For", st.For)
	row("Job", st.Note)
	row("Needs", st.Needs)
	row("Motor", st.Moves)
	row("Takes", st.Takes)
	row("Gives", st.Gives)
	row("Why", st.Reason)
	row("Result", st.Result)
}

// ports lists what could be opened.
func (p *painter) ports(a area) {
	v := p.v
	y := a.sub(1, 0, a.w-2, a.h).wrap(0, palette.Plain, "Opening a port sends no motion command; it may restart the board.") + 1
	if len(v.Ports) == 0 {
		y = a.sub(1, 0, a.w-2, a.h).wrap(y, palette.Strong, "No port was found.")
		a.sub(1, 0, a.w-2, a.h).wrap(y, palette.Plain, "Plug the board in, then l to look again. A port can also be named when the console is started.")
		return
	}
	sel := p.s.selected(PagePorts, v)
	widths := []int{2, 26, 22, 16, 0}
	a.sub(1, 0, a.w-2, a.h).table(y, palette.Strong, widths, "", "port", "board", "serial number", "")
	y++
	room := max(1, a.h-y)
	first := max(0, sel-room+1)
	for i := first; i < len(v.Ports) && y < a.h; i++ {
		o := v.Ports[i]
		role, hand := palette.Plain, " "
		if i == sel {
			role, hand = palette.Chosen, ">"
			a.sub(1, 0, a.w-2, a.h).fill(0, y, role)
		}
		name := o.Product
		if name == "" {
			name = o.Name
		}
		a.sub(1, 0, a.w-2, a.h).table(y, role, widths, hand, o.Path, name, o.Serial, o.Note)
		y++
	}
}

// found shows the board as it was found.
func (p *painter) found(a area) {
	f := p.v.Found
	if f == nil {
		a.put(1, 0, palette.Plain, "Nothing was read from the board yet.")
		return
	}
	y := 0
	if f.File != "" {
		x := a.put(1, y, palette.Strong, "AS-FOUND saved")
		a.put(x+2, y, palette.Plain, f.File)
		y += 2
	}
	half := a.w / 2 // the gains take what they need, the rest is the board's
	need := 3
	for _, w := range p.widths(half, f.Running, f.Stored) {
		need += w
	}
	half = max(half, a.w-max(need, 28))
	left := a.sub(0, y, half-1, a.h-y)
	p.rows(left, p.heading(left, 0, " Board"), p.widths(left.w, f.Lines), f.Lines)
	right := a.sub(half, y, a.w-half, a.h-y)
	gains := p.widths(right.w, f.Running, f.Stored)
	ry := p.heading(right, 0, " Gains running")
	ry = p.rows(right, ry, gains, f.Running) + 1
	ry = p.heading(right, ry, " Gains stored")
	ry = p.rows(right, ry, gains, f.Stored) + 1
	if f.Same {
		right.put(1, ry, palette.Plain, "running = stored")
	} else {
		right.put(1, ry, palette.Caution, " running and stored DIFFER ")
	}
}

// checks lists what was seen working this session.
func (p *painter) checks(a area) {
	y := 0
	if len(p.v.Checks) == 0 {
		a.put(1, 0, palette.Plain, "No check was made yet.")
		y = 1
	}
	for _, c := range p.v.Checks {
		if y >= a.h {
			return
		}
		sign, role := job.ToDo, palette.Plain
		switch c.State {
		case "seen working":
			sign = job.Done
		case "failed":
			sign, role = job.Refused, palette.Caution
		}
		a.put(1, y, palette.Plain, p.sign(sign)+" "+c.Name)
		a.put(20, y, role, c.State)
		y = max(y+1, a.sub(35, 0, a.w-36, a.h).wrap(y, palette.Plain, c.Detail))
	}
	y++
	if q := p.v.Ask; q != nil && q.Kind == job.AskHandTurn && p.v.Drive.Counts != nil {
		text := fmt.Sprint(*p.v.Drive.Counts)
		x := p.big(a, 3, y, text)
		a.put(x+1, min(y+4, a.h-1), palette.Plain, "counts")
		return
	}
	a.sub(1, 0, a.w-2, a.h).wrap(y, palette.Plain, "Three layers stop this motor: hardware (E-stop, guard switch, breaker), board (limits, trips, timeout), laptop (plan, forecast, questions). The laptop is never a safety function.")
}

// pageMenu lists the pages.
func (p *painter) pageMenu(a area) {
	keys := [pageCount]string{PagePath: "1", PagePorts: "2", PageFound: "3", PageChecks: "4", PagePlan: "5", PageLive: "6", PageModel: "7", PageDesign: "8", PagePush: "9", PageVerify: "0", PageCard: "c", PageAlarms: "f", PageHelp: "?", PageWords: "d", PageInterlocks: "i", PageEarlier: "x", PageLoop: "l", PageExperiments: "t"}
	for pg := PagePath; pg < pageCount; pg++ {
		role := palette.Plain
		if int(pg)-1 == min(p.s.row, int(pageCount)-2) {
			role = palette.Chosen
		}
		a.put(2, int(pg)-1, role, fmt.Sprintf(" %s  %-10s %s ", p.s.look.Hand.Key(keys[pg]), pg, titles[pg]))
	}
}

// earlier shows what the newest earlier record of the rig says beside this job.
func (p *painter) earlier(a area) {
	e := p.v.Earlier
	if e == nil {
		y := a.sub(1, 0, a.w-2, a.h).wrap(0, palette.Plain, "No earlier record of this rig was found.")
		a.sub(1, 0, a.w-2, a.h).wrap(y, palette.Plain, "Records are looked for in the data directory, or in the folder named with --records.")
		return
	}
	var rows []line
	for i, l := range e.Lines {
		role := palette.Plain
		switch {
		case i == 0:
			role = palette.Strong
		case strings.HasPrefix(l, "retune") || strings.Contains(l, "NOT STABLE") || strings.HasSuffix(l, "OUTSIDE") || strings.HasSuffix(l, "MISMATCH"):
			role = palette.Caution
		}
		for _, s := range lines(p.tame(l), a.w-2) {
			rows = append(rows, line{role, s})
		}
	}
	p.scroll(a, 0, rows)
}
