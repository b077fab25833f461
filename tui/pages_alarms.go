package tui

import (
	"strings"

	"gainwright/tui/palette"
	"gainwright/tune/job"
)

func unacknowledged(state string) bool { return strings.Contains(state, "unack") }

// alarms lists the alarms in their standard states, the newest first, and then
// what happened. Only what is unacknowledged and not put aside flashes.
func (p *painter) alarms(a area) {
	v := p.v
	var rows []line
	if len(v.Alarms) == 0 {
		rows = append(rows, line{palette.Plain, "No alarm in this session."})
	}
	for i := len(v.Alarms) - 1; i >= 0; i-- {
		rows = append(rows, p.alarm(v.Alarms[i], a.w)...)
	}
	rows = append(rows, line{}, line{palette.Strong, "What happened, the newest first"})
	for i := len(v.Log) - 1; i >= 0 && len(rows) < 400; i-- {
		rows = append(rows, line{palette.Plain, clock(v.Log[i].At) + "  " + v.Log[i].Text})
	}
	p.scroll(a, 1, rows)
}

// alarm is one alarm on a few rows.
func (p *painter) alarm(al job.AlarmView, w int) []line {
	role, state := palette.Plain, strings.ToUpper(p.tame(al.State))
	switch {
	case al.Shelved != job.NotShelved:
		state = strings.ToUpper(al.Shelved.String())
		if al.Shelved == job.ShelvedForATime {
			state += ", " + whole(max(0, al.ShelvedUntil-p.v.Now)) + " left"
		}
	case al.Flashes() && al.Active:
		role = p.flash(true)
	case al.Flashes():
		role = palette.Caution // gone, and nobody has said that it was seen
		if flashes := p.flash(true); flashes == palette.AlarmOff {
			role = palette.Plain
		}
	case al.State == string(job.Acknowledged):
		role = palette.Strong
	}
	rows := []line{{role, clock(al.At) + "  " + state + "  " + al.Text}}
	for _, l := range [][2]string{{"first cause: ", al.Cause}, {"do: ", al.Do}, {"put aside: ", al.Why}} {
		if l[1] == "" {
			continue
		}
		for _, s := range lines(p.tame(l[0]+l[1]), w-12) {
			rows = append(rows, line{palette.Plain, "        " + s})
		}
	}
	return rows
}

// interlocks lists the inputs that the rig file names.
func (p *painter) interlocks(a area) {
	v := p.v
	if len(v.Interlocks) == 0 {
		a.put(1, 0, palette.Plain, "The rig file names no input.")
		return
	}
	widths := []int{22, 20, 0}
	in := a.sub(1, 0, a.w-2, a.h)
	in.table(0, palette.Strong, widths, "input", "now", "checked")
	var rows []line
	for _, r := range v.Interlocks {
		role := palette.Plain
		if r.Now == "OPEN" || r.Passed == "failed" {
			role = palette.Caution
		}
		name, now := p.tame(r.Name), p.tame(r.Now)
		head := name + strings.Repeat(" ", max(1, 22-p.width(name))) + now + strings.Repeat(" ", max(1, 20-p.width(now)))
		word := r.Passed
		if word == "" {
			word = "to do"
		}
		rows = append(rows, line{role, head + word})
		for _, l := range [][2]string{{"seen: ", r.Seen}, {"at creep: ", r.Stop}} {
			if l[1] == "" {
				continue
			}
			for _, s := range lines(p.tame(l[0]+l[1]), a.w-8) {
				rows = append(rows, line{palette.Plain, "    " + s})
			}
		}
	}
	rows = append(rows, line{}, line{palette.Plain, "What stops the shaft when an input opens is hardware and board; the laptop only looks."})
	p.scroll(a.sub(0, 1, a.w, a.h-1), 1, rows)
}
