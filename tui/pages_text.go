package tui

import (
	"fmt"
	"strings"

	"gainwright/tui/palette"
	"gainwright/tune/job"
)

// scroll draws rows from the one that the person scrolled to, and says how many
// are left below.
func (p *painter) scroll(a area, x int, rows []line) {
	first := 0
	if p.s.rowPage == p.page {
		first = max(0, min(p.s.row, len(rows)-a.h))
	}
	for y := 0; y < a.h && first+y < len(rows); y++ {
		a.put(x, y, rows[first+y].role, rows[first+y].text)
	}
	if rest := len(rows) - first - a.h; rest > 0 && a.h > 1 {
		a.fill(0, a.h-1, palette.Plain)
		a.put(1, a.h-1, palette.Key, p.keyed("{j}: ")+number(float64(rest+1), 0)+" more rows below")
	}
}

// card shows the card as it will be printed.
func (p *painter) card(a area) {
	if p.v.Card == "" {
		a.put(1, 0, palette.Plain, "The card is written when the job is done.")
		return
	}
	x := 0 // the card is as wide as the least screen
	if a.w > fullWidth {
		x = (a.w - fullWidth) / 2
	}
	var rows []line
	for _, s := range strings.Split(strings.TrimRight(p.v.Card, "\n"), "\n") {
		rows = append(rows, line{palette.Plain, strings.TrimRight(strings.ReplaceAll(s, "\t", "    "), "\r")})
	}
	p.scroll(a, x, rows)
}

// help lists the keys from the key table.
func (p *painter) help(a area) {
	var rows []line
	group := ""
	for i := range bindings {
		b := &bindings[i]
		if b.group != group {
			if group != "" {
				rows = append(rows, line{})
			}
			group = b.group
			rows = append(rows, line{palette.Strong, group})
		}
		for k, s := range lines(p.keyed(b.help), a.w-14) {
			label := ""
			if k == 0 {
				label = p.s.look.Hand.Key(b.label)
			}
			rows = append(rows, line{palette.Plain, "  " + label + strings.Repeat(" ", max(1, 11-len(label))) + s})
		}
	}
	p.scroll(a, 1, rows)
}

// glossary holds the words of the console, each with one meaning.
var glossary = [][2]string{
	{"arm", "give permission to drive for one run; it lapses by itself"},
	{"as-found", "the board and its gains before the first touch"},
	{"as-left", "the board and its gains when the job ended"},
	{"breakaway", "the voltage at which a shaft at rest begins to turn"},
	{"check", "a test in each session that something was seen working"},
	{"cut", "output off; the motor coasts"},
	{"dead time", "how long the speed does not answer a change of voltage"},
	{"disarmed", "will not be commanded to turn; it may still coast"},
	{"enabling switch", "a switch held in its middle position to permit motion; released or pressed through it stops"},
	{"envelope", "the limits that no run may cross: volts, speed, current, bus, turns, heat, time"},
	{"forecast", "what a plan is expected to do"},
	{"gain K", "steady speed for each volt"},
	{"GM", "gain margin: how much more gain the loop bears"},
	{"hold-out", "data kept back from the fit, on which it is judged"},
	{"inch", "one bounded move of the shaft for one press of a key"},
	{"interlock", "an input of the board that has to be in its working position: a guard switch, an E-stop"},
	{"look-only", "connected, never driving"},
	{"Ms", "peak of the sensitivity: how near the loop comes to hunting; less is calmer"},
	{"NRMSE", "error of the model as a share of the spread of the data; 0 is perfect"},
	{"plan", "segments of drive with an end, held against the envelope"},
	{"PM", "phase margin: how much more delay the loop bears, as an angle"},
	{"proposal", "gains with their margins, forecast and worst case"},
	{"push", "write gains to the board's RAM"},
	{"ramp and cut", "bring to rest under power, then output off"},
	{"re-read", "read the gains back after the power was off"},
	{"rig", "motor, driver, board and load as one thing with a name"},
	{"sheet", "the record of one job: a folder readable without this program"},
	{"shelved", "an alarm put aside for a time, with a reason; a trip never is"},
	{"silence", "the check that the board stops by itself when it hears nothing"},
	{"speed ceiling", "the speed at which the board trips"},
	{"staircase", "steady speeds at rising and falling voltages"},
	{"store", "keep gains in memory that lasts; an act of its own"},
	{"trip", "a limiter stopped the motor; kept with its first cause until acknowledged and reset"},
	{"verdict", "believed, usable with care, or refused, with reasons"},
	{"verify", "the closed loop, measured against its forecast"},
}

// words shows the glossary.
func (p *painter) words(a area) {
	var rows []line
	for _, g := range glossary {
		for k, s := range lines(g[1], a.w-20) {
			name := ""
			if k == 0 {
				name = g[0]
			}
			rows = append(rows, line{palette.Plain, name + strings.Repeat(" ", max(1, 17-len(name))) + s})
		}
	}
	rows = append(rows, line{palette.Plain, ""}, line{palette.Strong, "What the numbers mean. From 700 on, the job's own: cause and remedy stand beside them."})
	for _, n := range job.Numbers() {
		text := n.Words
		if n.Do != "" {
			text += ". " + strings.ToUpper(n.Do[:1]) + n.Do[1:]
		}
		for k, s := range lines(text, a.w-8) {
			name := "   "
			if k == 0 {
				name = fmt.Sprint(n.Number)
			}
			rows = append(rows, line{palette.Plain, name + "  " + s})
		}
	}
	p.scroll(a, 1, rows)
}
