package tui

import (
	"fmt"
	"math"
	"strings"
	"time"

	"gainwright/tui/palette"
	"gainwright/tune/job"
)

// top draws the two rows that are always there: is it live, is it moving, is
// the link fresh, what does the stop key do; whose rig it is and how much room
// is left inside the envelope.
func (p *painter) top(a area) {
	if a.w < fullWidth {
		p.topNarrow(a)
		return
	}
	text, role := p.phase()
	shaft, shaftRole := p.shaft()
	link, linkRole := p.link()
	cols := [4]int{15, 14, 20, a.w - 49}
	x := 0
	for i, c := range []struct {
		text string
		role palette.Role
	}{{text, role}, {"shaft " + shaft, shaftRole}, {link, linkRole}, {"space " + p.space(), palette.Strong}} {
		end := a.sub(x, 0, cols[i], 1).put(0, 0, c.role, " "+c.text)
		if end < cols[i] {
			a.put(x+end, 0, c.role, " ")
		}
		x += cols[i]
	}
	p.margins(a)
}

// topNarrow gives the same answers in short where there are fewer columns.
func (p *painter) topNarrow(a area) {
	text, role := p.phase()
	shaft, shaftRole := p.shaft()
	link, linkRole := p.link()
	link = strings.TrimPrefix(link, "link ")
	x := a.put(0, 0, role, text)
	x = a.put(x+1, 0, shaftRole, shaft)
	a.put(x+1, 0, linkRole, link)
	x = a.put(0, 1, palette.Strong, "space "+p.space())
	d := p.v.Drive
	short := rpm(d.Speed) + "/" + rpm(d.SpeedMax) + " rpm"
	if x+len(short)+1 <= a.w {
		role := palette.Plain
		if !p.fresh() {
			role, short = p.old(short)
		}
		a.right(a.w, 1, role, short)
	}
}

// space says what the stop key does now.
func (p *painter) space() string {
	if p.v.Drive.Space != "" {
		return p.v.Drive.Space
	}
	return "cut"
}

// phase answers whether the drive may put power on the motor.
func (p *painter) phase() (string, palette.Role) {
	d := p.v.Drive
	switch d.Phase {
	case "", disarmed:
		return disarmed, palette.Strong
	case armed:
		return armed + " " + whole(d.ArmLeft), palette.Caution
	case arming:
		return arming, palette.Caution
	case countDown:
		return countDown + " " + whole(d.CountLeft), palette.Moving
	case running, stopping:
		return d.Phase, palette.Moving
	case tripped:
		return tripped, p.flash(!d.Acked)
	}
	return d.Phase, palette.Caution
}

// flash is the look of an alarm: steady once acknowledged, and otherwise two
// changes a second, well below the three flashes that WCAG 2.1 allows (2.3.1).
func (p *painter) flash(on bool) palette.Role {
	if on && (p.v.Now/(500*time.Millisecond))%2 == 1 {
		return palette.AlarmOff
	}
	return palette.Alarm
}

// shaft answers whether it moves.
func (p *painter) shaft() (string, palette.Role) {
	d := p.v.Drive
	switch {
	case d.Unknown || !p.fresh():
		return "UNKNOWN", palette.Caution
	case d.Moving:
		return "TURNS", palette.Moving
	}
	return "STILL", palette.Strong
}

// fresh reports whether values may be shown as they are now.
func (p *painter) fresh() bool {
	s := p.v.Link.State
	return (s == job.Fresh || s == job.LookOnly) && p.v.Link.Age >= 0
}

// link answers whether the link is fresh. The sign behind the age moves with
// samples only, so that a frozen link is not taken for a live one.
func (p *painter) link() (string, palette.Role) {
	l := p.v.Link
	state, role := string(l.State), palette.Strong
	switch l.State {
	case "":
		state = string(job.NoPort)
	case job.Stale:
		role = palette.Caution
	case job.LinkLost:
		role = p.flash(p.lostFlashes())
	case job.LookOnly:
		role = palette.Notice
	}
	text := "link " + state
	if l.State == job.LinkLost || l.State == job.NoPort || l.State == job.LookOnly {
		text = state
	}
	if l.Age >= 0 && l.State != job.NoPort && l.State != "" {
		text += " " + seconds(l.Age)
	}
	if l.State == job.Fresh || l.State == job.LookOnly {
		text += " " + string(`|/-\`[(l.Frames/4)%4])
	}
	return text, role
}

// lostFlashes reports whether a lost link may flash: not once it was acknowledged
// or put aside.
func (p *painter) lostFlashes() bool {
	for i := len(p.v.Alarms) - 1; i >= 0; i-- {
		if a := p.v.Alarms[i]; a.ID == "link" && a.Active {
			return a.Flashes()
		}
	}
	return true
}

// old marks a text that is not fresh: grey and struck, or between waves where
// there is no such look.
func (p *painter) old(text string) (palette.Role, string) {
	if p.s.look.ASCII {
		text = "~~" + text + "~~"
	}
	return palette.Old, text
}

// margins draws the second row.
func (p *painter) margins(a area) {
	v := p.v
	name := v.Rig
	if name == "" {
		name = "no rig yet"
	}
	rig := a.sub(0, 1, 18, 1)
	if v.Simulated {
		x := rig.put(0, 0, palette.Notice, " SIM ")
		rig.put(x+1, 0, palette.Strong, name)
	} else {
		rig.put(1, 0, palette.Strong, name)
	}
	if v.Link.State == job.NoPort || v.Link.State == "" {
		a.put(19, 1, palette.Plain, "no values yet: no port is open")
		return
	}
	d := v.Drive
	p.margin(a.sub(19, 1, 31, 1), rpm(d.Speed), rpm(d.SpeedMax), "rpm", share(float64(d.Speed), float64(d.SpeedMax)))
	p.margin(a.sub(50, 1, 30, 1), volts(d.Volts), volts(d.VoltsMax), "V", share(float64(d.Volts), float64(d.VoltsMax)))
	x := 81
	extra := func(text string) {
		role := palette.Plain
		if !p.fresh() {
			role, text = p.old(text)
		}
		if x+p.width(text) < a.w {
			x = a.put(x, 1, role, text) + 2
		}
	}
	if d.Current != nil {
		extra(number(float64(*d.Current), 2) + " A")
	}
	if d.Bus != nil {
		extra("bus " + number(float64(*d.Bus), 1) + " V")
	}
	if d.HeatShare > 0 {
		extra("heat " + percent(d.HeatShare))
	}
	if v.Link.Rate > 0 {
		extra(fmt.Sprintf("%.0f samples/s, %d lost, %d bad", v.Link.Rate, v.Link.Lost, v.Link.BadLines))
	}
}

func share(got, most float64) float64 {
	if most <= 0 || math.IsNaN(got) {
		return math.NaN()
	}
	return math.Abs(got) / most
}

// margin writes a value, its limit and the room between them in a word.
func (p *painter) margin(a area, value, most, unit string, used float64) {
	text := fmt.Sprintf("%6s of %s %s", value, most, unit)
	if !p.fresh() {
		text = strings.TrimSpace(text)
		role, text := p.old(text)
		x := a.put(1, 0, role, text)
		if p.v.Link.Age >= 0 {
			a.put(x+1, 0, palette.Plain, seconds(p.v.Link.Age)+" old")
		}
		return
	}
	x := a.put(0, 0, palette.Strong, text)
	switch {
	case math.IsNaN(used):
	case used > 0.98:
		a.put(x+1, 0, palette.Caution, "AT LIMIT")
	case used > 0.85:
		a.put(x+1, 0, palette.Caution, "NEAR, "+percent(1-used)+" left")
	default:
		a.put(x+1, 0, palette.Plain, percent(1-used)+" left")
	}
}

var signs = map[job.Status]rune{job.ToDo: '·', job.Doing: '▸', job.Done: '✓', job.Refused: '✗', job.Skipped: '–'}
var asciiSigns = map[job.Status]rune{job.ToDo: '.', job.Doing: '>', job.Done: '+', job.Refused: 'x', job.Skipped: '-'}

func (p *painter) sign(st job.Status) string {
	set := signs
	if p.ascii {
		set = asciiSigns
	}
	if r, ok := set[st]; ok {
		return string(r)
	}
	return " "
}

// path draws the job as a row of signs, one a step, with the step that is
// offered in words; where there is room the steps carry their names.
func (p *painter) path(a area) {
	v := p.v
	if len(v.Steps) == 0 {
		return
	}
	named, at, title := 6, 0, ""
	for i, st := range v.Steps {
		named += len(st.ID) + 2
		if st.ID == v.Current {
			at, title = i+1, st.Title
		}
	}
	x := a.put(1, 0, palette.Plain, "Job") + 2
	for _, st := range v.Steps {
		role := palette.Plain
		switch {
		case st.ID == v.Current:
			role = palette.Chosen
		case st.Status == job.Refused:
			role = palette.Caution
		}
		x = a.put(x, 0, role, p.sign(st.Status))
		if named <= a.w {
			x = a.put(x, 0, role, string(st.ID)) + 1
		}
	}
	if named > a.w && at > 0 {
		done := 0
		for _, st := range v.Steps {
			if st.Status == job.Done {
				done++
			}
		}
		a.put(x+2, 0, palette.Plain, fmt.Sprintf("step %d of %d: %s  (%d done)", at, len(v.Steps), title, done))
	}
}
