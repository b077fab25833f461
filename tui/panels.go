package tui

import (
	"fmt"

	"gainwright/tui/palette"
	"gainwright/tune/job"
)

// line is one row of a panel.
type line struct {
	role palette.Role
	text string
}

// panels draws what stands below the page because it cannot wait: a lost link,
// a trip, a refusal, a field, a question. It returns the room that is left.
func (p *painter) panels(a area) area {
	v := p.v
	if v.Link.State == job.LinkLost {
		a = p.panel(a, "LINK LOST", p.flash(p.lostFlashes()), p.lost())
	}
	if v.Drive.Phase == tripped {
		a = p.panel(a, "TRIPPED", p.flash(!v.Drive.Acked), p.trip())
	}
	if v.Link.State == job.LookOnly && p.page == PagePath {
		a = p.panel(a, "LOOK-ONLY", palette.Notice, []line{{palette.Plain, v.Link.Why + " Nothing is driven and no gains are pushed."}})
	}
	if r := v.Refusal; r != nil {
		rows := []line{{palette.Strong, r.What}, {palette.Plain, "Cause: " + r.Cause}, {palette.Plain, "Remedy: " + r.Remedy}}
		if p.low() {
			rows = rows[1:] // the path above says of which step
		}
		a = p.panel(a, fmt.Sprintf("REFUSED, number %d", r.Number), palette.Caution, rows)
	}
	switch {
	case !standing(v) && p.s.local != localQuit:
	case p.s.local == localQuit:
		a = p.panel(a, "LEAVE?", palette.Bar, []line{
			{palette.Plain, "The motor is stopped first, and the record is closed. Leave the console?"}, {palette.Key, p.keyed("{y} leave    {n} stay")},
		})
	case p.s.local == localRemark:
		a = p.panel(a, "REMARK", palette.Bar, []line{{palette.Key, p.cursor("> " + p.s.typed)}})
	case p.s.local == localSkip && len(v.Steps) > 0:
		st := v.Steps[p.s.selected(PagePath, v)]
		a = p.panel(a, "SKIP A STEP", palette.Bar, []line{
			{palette.Plain, "Reason for leaving out: " + st.Title}, {palette.Key, p.cursor("> " + p.s.typed)},
		})
	case p.s.local == localShelve || p.s.local == localService:
		heading := map[local]string{localShelve: "SHELVE AN ALARM", localService: "OUT OF SERVICE"}[p.s.local]
		text := "It has returned by itself."
		if i := shelvable(v); i >= 0 {
			text = "Reason, kept in the log: " + v.Alarms[i].Text
		}
		a = p.panel(a, heading, palette.Bar, []line{{palette.Plain, text}, {palette.Key, p.cursor("> " + p.s.typed)}})
	case v.Ask != nil:
		a = p.panel(a, "QUESTION", palette.Bar, p.question(v.Ask))
	}
	if p.s.why {
		a = p.panel(a, "WHY", palette.Bar, p.reason())
	}
	return a
}

// panel draws lines with a heading at the foot of a.
func (p *painter) panel(a area, heading string, role palette.Role, text []line) area {
	w := a.w - 2
	var rows []line
	for _, l := range text {
		if l.text == "" {
			continue
		}
		for _, s := range lines(p.tame(l.text), w) {
			rows = append(rows, line{l.role, s})
		}
	}
	h := min(len(rows)+1, a.h)
	if h <= 0 {
		return a
	}
	box := a.sub(0, a.h-h, a.w, h)
	box.fill(0, 0, role)
	box.put(1, 0, role, heading)
	if n := h - 1; len(rows) > n && n > 0 {
		rows = append(rows[:n-1], rows[len(rows)-1]) // the last row asks for the answer
	}
	for i, l := range rows {
		box.put(1, i+1, l.role, l.text)
	}
	return a.sub(0, 0, a.w, a.h-h)
}

// low reports whether the screen has too few rows for more than what cannot wait.
func (p *painter) low() bool { return p.h < 16 }

// urgent reports whether a panel needs the rows of path and title on such a screen.
func (p *painter) urgent() bool {
	v := p.v
	return v.Refusal != nil || v.Ask != nil || v.Drive.Phase == tripped || v.Link.State == job.LinkLost
}

func (p *painter) cursor(s string) string {
	if p.ascii {
		return s + "_"
	}
	return s + "█"
}

// keyed puts the keys of the layout into a text that names them in braces.
func (p *painter) keyed(text string) string { return p.s.look.Hand.words(text) }

func (p *painter) lost() []line {
	rows := []line{{palette.Strong, "No sample for " + seconds(max(0, p.v.Link.Age)) + ". The board stops by its own timeout; whether the shaft turns is not known here."}}
	if p.v.Link.Why != "" {
		rows = append(rows, line{palette.Plain, p.v.Link.Why})
	}
	return append(rows, line{palette.Strong, "Watch the shaft; E-stop if it turns."})
}

func (p *painter) trip() []line {
	d := p.v.Drive
	rows := []line{{palette.Strong, "First cause: " + d.Trip}}
	if q := p.v.Ask; q != nil { // the job says that it expected this trip
		rows = append(rows, line{palette.Plain, q.Text})
		for _, t := range q.Detail {
			if p.low() {
				break
			}
			rows = append(rows, line{palette.Plain, t})
		}
	}
	if q := p.v.Ask; q != nil && q.Kind == job.AskInput {
		rows = append(rows, line{palette.Key, p.inputHow()})
	}
	if d.Remedy != "" {
		rows = append(rows, line{palette.Plain, "Do: " + d.Remedy})
	}
	if d.Acked {
		return append(rows, line{palette.Key, p.keyed("{z} reset. Nothing starts by it; the next run needs a new arm.")})
	}
	return append(rows, line{palette.Key, p.keyed("{e} acknowledge: seen. It changes nothing in the drive.")})
}

// question words the question and the way to answer it.
func (p *painter) question(q *job.Question) []line {
	rows := []line{{palette.Strong, q.Text}}
	for _, d := range q.Detail {
		if p.low() {
			break // the question itself and its answer need the room
		}
		rows = append(rows, line{palette.Plain, d})
	}
	text := p.cursor("> " + p.s.field(p.v))
	if asksText(q) && p.s.left == q.ID && q.ID != 0 {
		return append(rows, line{palette.Key, p.keyed("enter goes back to the field    {b} puts the question aside")})
	}
	switch q.Kind {
	case job.AskYesNo:
		rows = append(rows, line{palette.Key, p.keyed("{y} yes    {n} no")})
	case job.AskEnter:
		rows = append(rows, line{palette.Key, "enter: seen, go on"})
	case job.AskWord:
		rows = append(rows, line{palette.Plain, "Type this word to go on: " + q.Want}, line{palette.Key, text})
	case job.AskText:
		rows = append(rows, line{palette.Key, text + p.byDefault(q)})
	case job.AskNumber:
		rows = append(rows, line{palette.Key, text + " " + q.Unit + p.byDefault(q)})
	case job.AskHandTurn:
		if p.v.Drive.Counts != nil {
			rows = append(rows, line{palette.Strong, fmt.Sprintf("count now: %d", *p.v.Drive.Counts)})
		}
		how := "turn, then enter"
		if p.v.Hand {
			how = "t turns the simulated shaft once, then enter"
		}
		rows = append(rows, line{palette.Key, how})
	case job.AskChoice:
		for i, o := range q.Options {
			rows = append(rows, line{palette.Key, fmt.Sprintf("%d %s", i+1, o)})
		}
	case job.AskInput:
		rows = append(rows, line{palette.Key, p.inputHow()})
	case job.AskStopKey:
		rows = append(rows, line{palette.Key, "press space"})
	case job.AskPower:
		how := "off, wait, on, then enter"
		if p.v.Simulated {
			how = p.keyed("{o} switches the simulated board off and on, then enter")
		}
		rows = append(rows, line{palette.Key, how})
	}
	return rows
}

// inputHow says how an input is worked that a question asks for.
func (p *painter) inputHow() string {
	if p.v.Simulated {
		return p.keyed("{o} works the simulated input; {b} puts the question aside")
	}
	return p.keyed("it goes on by itself once the board reports it; {b} puts it aside")
}

func (p *painter) byDefault(q *job.Question) string {
	if q.Default == "" {
		return ""
	}
	return "    (enter takes " + q.Default + ")"
}

// reason says where the chosen number comes from.
func (p *painter) reason() []line {
	all := facts(p.page, p.v)
	if len(all) == 0 {
		return []line{{palette.Plain, "There is no number on this page."}}
	}
	f := all[max(0, min(p.s.whyRow, len(all)-1))]
	why := f.Why
	if why == "" {
		why = "No more is known about it than what stands here."
	}
	head := f.Name + "  " + f.Value
	if f.Limit != "" {
		head += "   limit: " + f.Limit
	}
	if f.Verdict != "" {
		head += "   " + f.Verdict
	}
	return []line{{palette.Strong, head}, {palette.Plain, why}, {palette.Key, p.keyed("{j} next number    {k} number before    {w} close")}}
}
