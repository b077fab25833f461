package sheet

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"gainwright/tune/sheet/plain"
)

// The card's size: what a page holds in the type of a line printer.
const (
	cardColumns = 80
	cardLines   = 60
)

// CardData is what the card shows. nil and "" print as blanks for a pen.
type CardData struct {
	Record    string // short name of the sheet
	Rig       string
	BoardID   string
	Firmware  string
	Program   string
	Operator  string
	Start     string // RFC 3339
	Outcome   string
	Reason    string
	Simulated bool

	Nameplate   NameplateRecord
	LoadState   string
	AmbientDegC *float64
	BusV        *float64

	Found, Left     CardColumn
	OvershootTarget string
	SettlingTarget  string
	NoAsFoundTraces bool   // declined, or not taken
	WhyNoTraces     string // in words, "" where declined
	Model           CardModel
	Limits          []Quantity // held by the board
	Checks          []CardCheck
	Inputs          []CardCheck // opened at creep
	Remarks         []string
	ReRead          *bool // after a power-cycle, equal
	Hash            string
	PhaseMarginDeg  *float64
	GainMarginDB    *float64
	SensitivityPeak *float64
	WorstPhaseDeg   *float64 // kept by 95 % of the motors drawn
	WorstPeak       *float64
	Motor           MotorRecord
	PowerOnLimits   []Quantity // as left, where they are not those of the session
	Acceptance      string     // how much of the acceptance list passed, "" without one
	RunUp           string     // the levels of the run-up, "" without one
	JobFile         string     // how far a job file was carried out, "" without one
	Signs           []string   // who signs; none: done by and customer
}

// CardColumn is the state of the loop, found or left.
type CardColumn struct {
	Kp, Ki, Kd *float64 // V/(rad/s), V/rad, V·s²/rad
	Form       string
	PeriodS    *float64
	Step       *StepResult
}

// CardModel is the model's one line; the halves of the 95 % intervals are in
// the value's unit.
type CardModel struct {
	Gain, GainPM     *float64 // rad/s per V
	Tau, TauPM       *float64 // s
	Tau2, Tau2PM     *float64 // s; nil for one time constant
	DeadTime, DeadPM *float64 // s
	BreakawayForward *float64 // V
	BreakawayReverse *float64 // V
	Verdict          string
}

// CardCheck is one thing seen working this session, or not.
type CardCheck struct {
	Name string
	Seen *bool
	Note string
}

// Card returns the one page that stays at the machine: at most 80 columns and
// 60 lines, black on white, with room to sign.
func Card(d CardData) string {
	var c card
	c.head(d)
	c.rule()
	c.columns(d)
	c.rule()
	c.findings(d)
	c.rule()
	c.foot(d)
	return strings.Join(c.lines, "\n") + "\n"
}

// reasonLines bounds the words on why a job did not come to its end; the record
// has all of them.
const reasonLines = 4

type card struct{ lines []string }

// add puts a line on the card; none is longer than the page is wide.
func (c *card) add(format string, args ...any) {
	line := strings.TrimRight(fmt.Sprintf(format, args...), " ")
	if plain.Width(line) > cardColumns {
		line = plain.Visible(line, cardColumns)
	}
	c.lines = append(c.lines, line)
}

func (c *card) rule() { c.add("%s", strings.Repeat("-", cardColumns)) }

func (c *card) head(d CardData) {
	c.add("SPEED LOOP CARD   %s", text(outcomeWords(d.Outcome), 60))
	if d.Reason != "" && d.Outcome != "accepted" && d.Outcome != "no-adjustment" {
		for i, l := range strings.Split(strings.TrimSuffix(wrap(d.Reason, cardColumns, "       "), "\n"), "\n") {
			if i == 0 {
				l = "reason " + strings.TrimSpace(l)
			}
			if i < reasonLines {
				c.add("%s", l)
			}
		}
	}
	if d.Simulated {
		c.add("SIMULATED RIG: nothing on this card was measured on a motor")
	}
	c.add("rig    %s board %s record %s", pad(text(d.Rig, 24), 24), pad(text(d.BoardID, 20), 20), text(d.Record, 16))
	c.add("file   %s firmware %s", pad(text(d.Nameplate.RigFile, 24), 24), text(d.Firmware, 34))
	c.add("date   %s by %s witnessed %s", pad(text(strings.Replace(shorten(d.Start, 16), "T", " ", 1), 24), 24), pad(text(d.Operator, 20), 23), strings.Repeat("_", 11))
	n := d.Nameplate
	c.add("motor  %s serial %s rated %s", pad(text(n.MotorType, 24), 24), pad(text(n.MotorSerial, 19), 19), with(n.NominalV, "V"))
	c.add("       encoder %s lines = %s counts a turn   gear %s", whole(n.EncoderLines), whole(n.CountsPerTurn), text(n.Gear, 12))
	if d.JobFile != "" {
		c.add("job    %s", text(d.JobFile, 72))
	}
	c.add("load   %s bus %s  ambient %s", pad(text(d.LoadState, 40), 40), with(d.BusV, "V"), with(d.AmbientDegC, "C"))
}

func (c *card) columns(d CardData) {
	row := func(name, found, left, unit string) {
		c.add("%s%s%s%s", pad(name, 24), pad(found, 20), pad(left, 20), unit)
	}
	row("", "AS FOUND", "AS LEFT", "unit")
	f, l := d.Found, d.Left
	row("Kp", digits(f.Kp), digits(l.Kp), "V per rad/s")
	row("Ki", digits(f.Ki), digits(l.Ki), "V per rad")
	if f.Kd != nil || l.Kd != nil {
		row("Kd", digits(f.Kd), digits(l.Kd), "V s per rad/s")
	}
	row("form / period", formPeriod(f), formPeriod(l), "")
	fs, ls := stepOf(f), stepOf(l)
	row("step", with(rpm(fs.StepRadS), "rpm"), with(rpm(ls.StepRadS), "rpm"), "")
	row("  overshoot", with(fs.OvershootPercent, "%"), with(ls.OvershootPercent, "%"), "target "+text(d.OvershootTarget, 8))
	row("  settling", with(fs.SettlingTimeS, "s"), with(ls.SettlingTimeS, "s"), "target "+text(d.SettlingTarget, 8))
	row("  settled within +-", with(rpm(fs.SettlingBandRadS), "rpm"), with(rpm(ls.SettlingBandRadS), "rpm"), "")
	row("  steady ripple +-", with(rpm(fs.RippleRadS), "rpm"), with(rpm(ls.RippleRadS), "rpm"), "")
	if d.NoAsFoundTraces {
		c.add("no trace was taken as found%s", prefixed(": ", plain.Visible(d.WhyNoTraces, 44)))
	}
}

func stepOf(c CardColumn) StepResult {
	if c.Step == nil {
		return StepResult{}
	}
	return *c.Step
}

func formPeriod(c CardColumn) string {
	return text(c.Form, 9) + " / " + with(scaled(c.PeriodS, 1e3), "ms")
}

func (c *card) findings(d CardData) {
	m := d.Model
	second := ""
	if m.Tau2 != nil {
		second = ", " + plusMinus(scaled(m.Tau2, 1e3), scaled(m.Tau2PM, 1e3), "ms")
	}
	c.add("model    K %s  tau %s%s", plusMinus(m.Gain, m.GainPM, "rad/s per V"), plusMinus(scaled(m.Tau, 1e3), scaled(m.TauPM, 1e3), "ms"), second)
	c.add("         delay %s (%s)  breakaway %s, reverse %s", plusMinus(scaled(m.DeadTime, 1e3), scaled(m.DeadPM, 1e3), "ms"), text(m.Verdict, 9),
		with(m.BreakawayForward, "V"), with(m.BreakawayReverse, "V"))
	c.add("motor    R %s at %s  Ke %s  J %s", with(d.Motor.ROhm, "ohm"), with(d.Motor.RDegC, "C"), with(d.Motor.KeVsPerRad, "V s/rad"), with(d.Motor.JKgM2, "kg m²"))
	c.add("margins  phase %s  gain %s  Ms %s   worst case %s  Ms %s", with(d.PhaseMarginDeg, "deg"), with(d.GainMarginDB, "dB"), digits(d.SensitivityPeak),
		with(d.WorstPhaseDeg, "deg"), digits(d.WorstPeak))
	c.list("limits held by the board this session", limitWords(d.Limits), 5)
	if len(d.PowerOnLimits) > 0 {
		c.list("after power-on it holds its own", limitWords(d.PowerOnLimits), 3)
	}
	var seen []string
	for _, k := range d.Checks {
		words := box(k.Seen) + " " + plain.Visible(k.Name, 20)
		if k.Seen != nil && !*k.Seen {
			words += " FAILED"
		}
		if k.Note != "" {
			words += " (" + plain.Visible(k.Note, 30) + ")"
		}
		seen = append(seen, words)
	}
	c.list("seen working this session", seen, 4)
	if len(d.Inputs) > 0 {
		var inputs []string
		for _, k := range d.Inputs {
			inputs = append(inputs, box(k.Seen)+" "+plain.Visible(k.Name, 20)+" ("+plain.Visible(k.Note, 60)+")")
		}
		c.list("inputs at creep, seconds and turns to rest", inputs, 4)
	}
	for _, l := range []string{d.RunUp, d.Acceptance} {
		if l != "" {
			c.add("%s", text(l, cardColumns))
		}
	}
	if len(d.Nameplate.Absent) > 0 {
		c.list("not on this rig", d.Nameplate.Absent, 1)
	}
}

// list writes words under a title over at most so many lines. What does not fit
// is counted, not dropped in silence.
func (c *card) list(title string, words []string, lines int) {
	if len(words) == 0 {
		c.add("%s: %s", title, strings.Repeat("_", 40))
		return
	}
	line, used := title+":", 0
	for i, w := range words {
		w = plain.Visible(w, 70)
		more := fmt.Sprintf("  and %d more", len(words)-i)
		room := cardColumns
		if used == lines-1 && i < len(words)-1 {
			room -= len(more)
		}
		if plain.Width(line)+2+plain.Width(w) <= room {
			line += "  " + w
			continue
		}
		if used == lines-1 {
			c.add("%s%s", line, more)
			return
		}
		c.add("%s", line)
		line, used = "        "+w, used+1
	}
	c.add("%s", line)
}

func (c *card) foot(d CardData) {
	if len(d.Remarks) == 0 {
		c.add("remarks %s", strings.Repeat("_", cardColumns-8))
		c.add("        %s", strings.Repeat("_", cardColumns-8))
	}
	for i, r := range d.Remarks {
		if i == 6 {
			c.add("        and %d more in the record", len(d.Remarks)-i)
			break
		}
		c.add("%s %s", pad([]string{"remarks", ""}[min(i, 1)], 7), plain.Visible(strings.TrimSpace(r), cardColumns-8))
	}
	c.add("stored and re-read equal after a power-cycle %s   next check %s", box(d.ReRead), text(d.Nameplate.NextCheck, 12))
	c.add("hash   %s   a check of the record must show these digits", text(shorten(d.Hash, 16), 16))
	c.add("the bus reading is an indication: prove it with a meter before hands go in")
	signs := d.Signs
	if len(signs) == 0 {
		signs = []string{"done by", "customer"}
	}
	for _, who := range signs {
		c.add("")
		who = pad(text(who, 24), 9)
		c.add("%s %s date %s", who, strings.Repeat("_", max(10, 49-plain.Width(who))), strings.Repeat("_", 14))
	}
}

func shorten(s string, n int) string {
	if len(s) > n {
		return s[:n]
	}
	return s
}

func whole(x *float64) string {
	if x == nil {
		return blank
	}
	return fmt.Sprintf("%.0f", *x)
}

func plusMinus(x, pm *float64, unit string) string {
	if x == nil {
		return with(nil, unit)
	}
	if pm == nil || !(*pm > 0) {
		return with(x, unit)
	}
	return asKnown(*x, *pm) + "+-" + significant(*pm, 2) + " " + unit
}

// asKnown is x with as many decimals as two digits of its ± have, and at most six
// significant ones.
func asKnown(x, pm float64) string {
	decimals := 1 - int(math.Floor(math.Log10(pm)))
	if x != 0 {
		decimals = min(decimals, 5-int(math.Floor(math.Log10(math.Abs(x)))))
	}
	return strconv.FormatFloat(x, 'f', max(0, decimals), 64)
}

// limitNames are the names of P7.1 of the protocol as people read them.
var limitNames = map[string]string{"vmax": "volts", "wmax": "speed", "imax": "current", "bmax": "bus high", "bmin": "bus low", "amax": "acceleration",
	"turns": "turns", "stall": "stalled for", "wrong": "wrong way for", "nocnt": "no counts for", "vbreak": "must turn at", "heat": "heat",
	"run": "run time", "beat": "timeout", "slew": "slew"}

// notJudged are the limits for which 0 means that the board does not judge them.
var notJudged = map[string]bool{"imax": true, "bmax": true, "bmin": true, "amax": true, "turns": true, "heat": true, "slew": true, "vbreak": true}

// limitWords are limits for people; those that are not judged come last, by name.
func limitWords(list []Quantity) []string {
	var words, off []string
	for _, q := range list {
		name := limitNames[q.Name]
		if name == "" {
			name = plain.Visible(q.Name, 20)
		}
		if notJudged[q.Name] && q.Value != nil && *q.Value == 0 {
			off = append(off, name)
			continue
		}
		if q.Unit == q.Name { // turns
			q.Unit = ""
		}
		words = append(words, name+" "+shown(q))
	}
	if len(off) > 0 {
		words = append(words, "not judged: "+off[0])
		words = append(words, off[1:]...)
	}
	return words
}

// shown is a quantity for people: speeds in rpm, the rest as it is.
func shown(q Quantity) string {
	if q.Unit == "rad/s" {
		return with(rpm(q.Value), "rpm")
	}
	return plusMinus(q.Value, q.PlusMinus, plain.Visible(q.Unit, 16))
}

func outcomeWords(outcome string) string {
	words := map[string]string{
		"accepted": "GAINS LEFT AND VERIFIED", "no-adjustment": "NO ADJUSTMENT MADE", "refused": "REFUSED",
		"tripped": "TRIPPED, NOT FINISHED", "failed": "FAILED", "": "",
	}
	w, ok := words[outcome]
	if !ok {
		w = outcome
	}
	return w
}

// Sticker returns the line for the motor, at most 40 columns.
func Sticker(d CardData) string {
	verb := map[string]string{"accepted": "tuned", "no-adjustment": "checked"}[d.Outcome]
	if verb == "" {
		verb = "not tuned"
	}
	if d.Simulated {
		verb = "simulated"
	}
	date := plain.Visible(shorten(d.Start, 10), 10)
	if date == "" {
		date = "____-__-__"
	}
	record := plain.Visible(shorten(d.Record, 8), 8)
	rest := fmt.Sprintf(" %s %s rec %s", verb, date, record)
	if short := fmt.Sprintf(" %s %s %s", verb, date, record); plain.Width(d.Rig+rest) > 40 && plain.Width(d.Rig+short) <= 40 {
		rest = short // the rig's name matters more than the word
	}
	return text(d.Rig, 40-plain.Width(rest)) + rest
}

// prefixed puts before in front of s, if there is an s.
func prefixed(before, s string) string {
	if s == "" {
		return ""
	}
	return before + s
}
