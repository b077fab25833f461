package sheet

import (
	"encoding/json"
	"fmt"
	"maps"
	"reflect"
	"slices"
	"strings"

	"gainwright/protocol/si"
	"gainwright/safety"
	"gainwright/tune/sheet/plain"
	"gainwright/tune/trace"
)

// Report returns the whole record of a folder as one HTML page that needs
// nothing from outside and runs nothing. It checks the sheet first and says at
// the top what it found. A damaged entry costs its own part of the page only.
func Report(dir string) string {
	problems, sum := Check(dir)
	r, _ := Open(dir)
	var p reportPage
	p.r = r
	p.begin(fmt.Sprintf("Record %s of rig %s", RecordName(dir), orNone(plain.Visible(sum.Header.Rig, 80))))
	p.summary(problems, sum)
	p.snapshots()
	p.orderSection()
	p.drills()
	p.commissioning()
	p.parts()
	p.checks()
	p.interlocks()
	p.runs()
	p.fits()
	p.experiments()
	p.proposals()
	p.pushes()
	p.verifies()
	p.words()
	p.entries()
	p.end()
	return p.b.String()
}

type reportPage struct {
	page
	r *Reader

	limits, boardLimits []Quantity // those that were shown last
}

// each reads every entry of a kind; one that cannot be read is named.
func each[T any](p *reportPage, kind Kind, f func(Line, T)) {
	for _, l := range p.r.Find(kind, "") {
		var v T
		if err := p.r.JSON(l, &v); err != nil {
			p.loud("cannot be shown: " + err.Error())
			continue
		}
		f(l, v)
	}
}

func (p *reportPage) summary(problems []Problem, sum Summary) {
	h := sum.Header
	if h.Simulated {
		p.loud("SIMULATED RIG: nothing here was measured on a motor.")
	}
	p.table([]string{"", ""}, [][]string{
		{"rig", orNone(h.Rig)}, {"board", orNone(h.BoardID)}, {"operator", orNone(h.Operator)}, {"begun", orNone(h.Start)},
		{"program", orNone(h.Program)}, {"seed", fmt.Sprint(h.Seed)}, {"outcome", orNone(sum.Outcome)}, {"entries", fmt.Sprint(sum.Entries)}, {"chain", orNone(sum.Chain)},
	})
	if len(problems) == 0 {
		p.para("Checked: the folder agrees with its chain. " + sum.Says)
	} else {
		p.loud(fmt.Sprintf("Checked: %d problems. %s", len(problems), sum.Says))
		var rows [][]string
		for _, x := range problems {
			rows = append(rows, []string{string(x.Kind), fmt.Sprint(x.Entry), x.File, x.Text})
		}
		p.table([]string{"problem", "entry", "file", "what"}, rows)
	}
	p.section("Card")
	p.block(Card(CardOf(p.r)))
}

func (p *reportPage) snapshots() {
	p.section("As found and as left")
	type state struct {
		title string
		Snapshot
	}
	var states []state
	for _, kind := range []Kind{KindAsFound, KindAsLeft} {
		each(p, kind, func(l Line, s Snapshot) {
			states = append(states, state{strings.ReplaceAll(string(kind), "-", " "), s})
		})
	}
	for _, s := range states {
		p.sub(s.title)
		p.table([]string{"", ""}, [][]string{
			{"firmware, protocol", s.Firmware + ", " + s.Protocol},
			{"flags", strings.Join(s.Flags, ", ")}, {"bus", with(s.BusV, "V")}, {"ambient", with(s.AmbientDegC, "degC")}, {"load", s.LoadState},
		})
		p.sideBySide([]string{s.title + ": gain", "running", "stored"}, s.Running, s.Stored)
		p.quantities("limit held by the board", readable(s.Limits))
	}
	p.foundStep()
	for i, s := range states {
		for k, file := range s.TraceFiles {
			plot := plot{title: fmt.Sprintf("%s: %s", s.title, file), xLabel: "time, s", yLabel: "speed, rpm"}
			// The traces of the last state are drawn over those of the first.
			if i == len(states)-1 && i > 0 && k < len(states[0].TraceFiles) {
				plot.title = "as found and as left"
				p.addTrace(&plot, states[0].TraceFiles[k], "as found")
			}
			p.addTrace(&plot, file, s.title)
			p.raw("%s", plot.svg())
		}
	}
}

// foundStep shows the step of the loop as it was found, or why none was taken.
func (p *reportPage) foundStep() {
	for _, l := range p.r.Find(KindEvent, NameAsFoundStep) {
		_ = show(p, l, func(_ Line, s AsFoundStepRecord) {
			if s.Step == nil {
				p.para("no step was taken as found: " + s.NotTaken)
				return
			}
			f := StepResult{}
			if s.Forecast != nil {
				f = *s.Forecast
			}
			p.sub("step of the closed loop as found, load " + orNone(s.LoadState))
			p.table([]string{"quantity", "measured", "forecast", "why"}, [][]string{
				{"overshoot", with(s.Step.OvershootPercent, "%"), with(f.OvershootPercent, "%"), "peak over the setpoint less twice the steady RMS, share of the step; forecast: the same gains on the fitted model"},
				{"settling time", with(s.Step.SettlingTimeS, "s"), with(f.SettlingTimeS, "s"), "to the last sample outside the band, " + s.TraceFile},
				{"steady ripple ±", with(rpm(s.Step.RippleRadS), "rpm"), "", "twice the RMS about the mean at the end of the step"},
			})
			if h := s.Hunting; h != nil {
				p.para(fmt.Sprintf("hunts at %s, ± %s: likely %s. Remedy: %s", with(h.FrequencyHz, "Hz"), with(rpm(h.AmplitudeRadS), "rpm"), h.Cause, h.Remedy))
			}
			if s.Curve != nil {
				plot := verifyPlot(*s.Curve)
				plot.title = "as found"
				p.raw("%s", plot.svg())
			}
		})
	}
}

// addTrace draws a trace entry's speed, and its setpoint where it has one and
// the plot has none yet.
func (p *reportPage) addTrace(into *plot, file, name string) {
	tr, err := p.trace(file)
	if err != nil {
		p.loud("cannot be drawn: " + err.Error())
		return
	}
	into.series = append(into.series, series{name: name, x: fromZero(tr.Time), y: allRPM(tr.Speed)})
	if tr.Setpoint != nil && len(into.series) == 1 {
		into.series = append(into.series, series{name: "setpoint", x: fromZero(tr.Time), y: allRPM(tr.Setpoint)})
	}
}

func (p *reportPage) trace(file string) (*trace.Trace, error) {
	l, ok := p.r.ByFile(file)
	if !ok {
		return nil, fmt.Errorf("%w: %s", ErrNoEntry, file)
	}
	return p.r.Trace(l)
}

func fromZero(t []float64) []float64 {
	out := make([]float64, len(t))
	for i := range t {
		out[i] = t[i] - t[0]
	}
	return out
}

func allRPM(w []float64) []float64 {
	out := make([]float64, len(w))
	for i := range w {
		out[i] = si.RadPerSec(w[i]).RPM()
	}
	return out
}

func (p *reportPage) parts() {
	each(p, KindPart, func(l Line, part PartRecord) {
		p.section("Part swapped")
		keys := map[string]bool{}
		for k := range part.Old {
			keys[k] = true
		}
		for k := range part.New {
			keys[k] = true
		}
		var rows [][]string
		for _, k := range slices.Sorted(maps.Keys(keys)) {
			rows = append(rows, []string{k, part.Old[k], part.New[k]})
		}
		p.table([]string{"", "old", "new"}, rows)
		p.quantities("if nothing is changed", part.Predicted)
		rows = nil
		for _, a := range part.Answers {
			rows = append(rows, []string{a.Question, a.Answer, a.Initials, a.Time})
		}
		p.table([]string{"question", "answer", "initials", "time"}, rows)
	})
}

func (p *reportPage) checks() {
	p.section("Checks: seen working this session")
	each(p, KindCheck, func(l Line, c CheckRecord) {
		p.sub(fmt.Sprintf("%s (%s): %s", c.Check, orNone(c.Layer), passed(c.Passed)))
		p.para(c.Finding)
		if c.Witness != "" {
			p.para("witnessed by " + c.Witness)
		}
		p.quantities("measured", c.Measured)
	})
}

func (p *reportPage) runs() {
	p.section("Runs")
	each(p, KindRun, func(l Line, run RunRecord) {
		state := "complete"
		if !run.Complete {
			state = "NOT COMPLETE, not used for a fit"
			if endsEarly[run.Step] {
				state = "this check ends its run before the plan does; not used for a fit"
			}
		}
		p.sub(fmt.Sprintf("%s: %s", l.Time.Format("15:04:05"), run.Name))
		p.table([]string{"", ""}, [][]string{
			{"purpose", run.Purpose}, {"ended", orNone(run.Reason) + "; " + state}, {"operator", orNone(run.Operator)}, {"load", run.LoadState},
			{"ambient", with(run.AmbientDegC, "degC")}, {"seed", fmt.Sprint(run.Seed)}, {"versions", pairs(run.Versions)},
		})
		p.plan(run.Plan, l.File)
		p.quantities("forecast", run.Forecast)
		p.limits = p.changed("limit of this run", p.limits, run.Limits)
		p.boardLimits = p.changed("limit held by the board", p.boardLimits, readable(run.BoardLimits))
		p.quantities("reached", run.Extremes)
		if run.TraceFile != "" {
			p.runPlot(run)
		}
	})
}

// endsEarly are the steps whose runs are meant to be cut short.
var endsEarly = map[string]bool{"stop": true, "silence": true, "limits": true, "interlocks": true, "inch": true}

// changed shows limits that are not those shown last, and says where they are.
func (p *reportPage) changed(title string, last, now []Quantity) []Quantity {
	if len(now) > 0 && reflect.DeepEqual(last, now) {
		p.para(title + ": each as in the run before")
		return now
	}
	p.quantities(title, now)
	return now
}

// planShown bounds the segments of a plan that the page lists; the entry has all.
const planShown = 16

// plan shows the segments of a plan.
func (p *reportPage) plan(raw json.RawMessage, file string) {
	var plan safety.Plan
	if json.Unmarshal(raw, &plan) != nil || len(plan.Segments) == 0 {
		if len(raw) > 0 && string(raw) != "null" {
			p.table([]string{"plan"}, [][]string{{string(raw)}})
		}
		return
	}
	var rows [][]string
	at := 0.0
	for i, s := range plan.Segments {
		unit := "V"
		if s.Mode == safety.ModeSpeed {
			unit = "rad/s"
		}
		if i < planShown {
			rows = append(rows, []string{fmt.Sprintf("%.3f", at), fmt.Sprintf("%.3f", s.Duration.Seconds()), fmt.Sprintf("%.4g to %.4g %s", s.From, s.To, unit), s.Note})
		}
		at += s.Duration.Seconds()
	}
	if more := len(plan.Segments) - planShown; more > 0 {
		rows = append(rows, []string{"", "", fmt.Sprintf("and %d more, until %.3f s", more, at), "all of them stand in " + file})
	}
	p.table([]string{"plan: at, s", "for at most, s", "drive", ""}, rows)
}

func (p *reportPage) runPlot(run RunRecord) {
	tr, err := p.trace(run.TraceFile)
	if err != nil {
		p.loud("cannot be drawn: " + err.Error())
		return
	}
	speed := plot{title: run.TraceFile, xLabel: "time, s", yLabel: "speed, rpm", height: 200}
	speed.series = []series{{name: "measured", x: fromZero(tr.Time), y: allRPM(tr.Speed)}}
	if tr.Setpoint != nil {
		speed.series = append(speed.series, series{name: "setpoint", x: fromZero(tr.Time), y: allRPM(tr.Setpoint)})
	}
	for _, m := range run.Marks {
		speed.vertical = append(speed.vertical, mark{m.TimeS, m.Text})
	}
	p.raw("%s", speed.svg())
	drive := plot{title: "drive", xLabel: "time, s", yLabel: "V", height: 140}
	drive.series = []series{{name: "voltage", x: fromZero(tr.Time), y: tr.Voltage}}
	if tr.Current != nil {
		drive.series = append(drive.series, series{name: "current, A", x: fromZero(tr.Time), y: tr.Current})
	}
	p.raw("%s", drive.svg())
}

func pairs(m map[string]string) string {
	var out []string
	for _, k := range slices.Sorted(maps.Keys(m)) {
		out = append(out, k+" "+m[k])
	}
	return strings.Join(out, ", ")
}

func orNone(s string) string {
	if s == "" {
		return "not given"
	}
	return s
}

// words holds what people and the board said.
func (p *reportPage) words() {
	p.section("Remarks and events")
	var rows [][]string
	for _, l := range p.r.Lines() {
		switch l.Kind {
		case KindRemark:
			b, err := p.r.Read(l)
			if err != nil {
				b = []byte("cannot be read: " + err.Error())
			}
			rows = append(rows, []string{l.Time.Format("15:04:05"), "remark", strings.TrimSpace(string(b))})
		case KindEvent:
			var e EventRecord
			if err := p.r.JSON(l, &e); err != nil {
				e.What = "cannot be read: " + err.Error()
			}
			if len(e.Limits) > 0 {
				e.Detail += ": " + strings.Join(limitWords(e.Limits), ", ")
			}
			rows = append(rows, []string{l.Time.Format("15:04:05"), e.What, e.Detail})
		}
	}
	p.table([]string{"time", "what", ""}, rows)
}

func (p *reportPage) entries() {
	p.section("Entries")
	var rows [][]string
	for _, l := range p.r.Lines() {
		rows = append(rows, []string{fmt.Sprint(l.Number), l.Time.Format(timeLayout), l.File, fmt.Sprint(l.Bytes), l.SHA256, l.Chain})
	}
	p.table([]string{"number", "time", "file", "bytes", "sha256", "chain"}, rows)
}
