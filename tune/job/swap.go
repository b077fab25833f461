package job

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"gainwright/tune/design"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
)

// parts are what may have been swapped, by number.
var parts = []string{"motor", "encoder", "gear", "driver", "board", "another part"}

// partKeys are the lines of a part, in order.
var partKeys = []string{"part", "type", "serial", "counts per turn", "gear ratio", "back-EMF constant, V s/rad", "resistance, ohm"}

// lockout is what has to be so before hands go in, and testRun the order in which
// power comes back (common practice, no source; local rules and the machine's maker
// come first).
var lockout = []string{
	"Locked out: plug pulled or breaker off, your own lock on it",
	"Bus at zero, proved by a meter that was tried before and after",
	"Shaft at rest, and nothing that can turn it",
	"New part fitted, its screws tight, its plugs in the same places",
}
var testRun = []string{
	"Tools and loose parts are out",
	"People are out, and were called out aloud",
	"Locks taken off by those who put them on",
	"Power on; E-stop in reach and pressed once: the drive dropped",
}

// doSwap notes which part was swapped, says what the difference will do before
// anything moves, and has lockout and test run answered one by one.
func (j *Job) doSwap() (result, error) {
	rec := sheet.PartRecord{Old: map[string]string{}, New: map[string]string{}}
	a, err := j.h.Ask(Question{Kind: AskChoice, Text: "Which part was swapped?", Options: parts, Default: "1"})
	if err != nil {
		return "", err
	}
	part := chosen(a.Text, parts)
	rec.Old["part"], rec.New["part"] = part, part
	for _, key := range []string{"type", "serial"} {
		for _, side := range []struct {
			word string
			to   map[string]string
		}{{"old", rec.Old}, {"new", rec.New}} {
			def := ""
			if key == "serial" && side.word == "old" && part == "motor" {
				def = j.Rig.Motor.Serial
			}
			a, err := j.h.Ask(Question{Kind: AskText, Text: fmt.Sprintf("%s of the %s %s, as on its label", key, side.word, part), Default: def, Detail: []string{"enter alone: not known"}})
			if err != nil {
				return "", err
			}
			side.to[key] = strings.TrimSpace(a.Text)
		}
	}
	p, err := j.askScales(&rec)
	if err != nil {
		return "", err
	}
	rec.Predicted = j.predicted(p)
	j.part = &rec
	j.showEarlier()
	if err := j.askAll(&rec, "lockout", lockout); err != nil {
		return "", errors.Join(err, j.h.Keep("part", part, rec))
	}
	if err := j.askAll(&rec, "test run", testRun); err != nil {
		return "", errors.Join(err, j.h.Keep("part", part, rec))
	}
	if err := j.h.Keep("part", part, rec); err != nil {
		return "", err
	}
	return result(part + " swapped: " + p.words()), nil
}

// chosen is the option that an answer means, the first where it means none.
func chosen(text string, options []string) string {
	for i, o := range options {
		if text == o || text == fmt.Sprint(i+1) {
			return o
		}
	}
	return options[0]
}

// scales are new over old of what a part changes; 1 where it does not.
type scales struct{ counts, gear, ke, ohms float64 }

// words say what the scales do if nothing is changed on the board.
func (s scales) words() string {
	if s.counts == 1 && s.ke == 1 && s.gear == 1 {
		return "no scale changes"
	}
	var w []string
	if s.counts != 1 {
		w = append(w, fmt.Sprintf("a board that is not told reads speed x%.3g and runs at %.3g %% of the setpoint", s.counts, 100/s.counts))
	}
	if s.gear != 1 {
		w = append(w, fmt.Sprintf("the output turns at %.3g %% of what it did", 100/s.gear))
	}
	if s.ke != 1 {
		w = append(w, fmt.Sprintf("the motor turns x%.3g as fast per volt", 1/s.ke))
	}
	return strings.Join(w, "; ")
}

// askScales asks for the numbers of old and new part; enter alone takes the old one's.
func (j *Job) askScales(rec *sheet.PartRecord) (s scales, err error) {
	s = scales{1, 1, 1, 1}
	old := j.Rig
	for _, q := range []struct {
		key      string
		to       *float64
		was      float64
		unit     string
		min, max float64
	}{
		{"counts per turn", &s.counts, j.Rig.CountsPerMotorTurn(), "1", 1, 1e9},
		{"gear ratio", &s.gear, math.Max(old.Encoder.GearRatio, 1e-3), "1", 1e-3, 1e5},
		{"back-EMF constant, V s/rad", &s.ke, old.Motor.Ke, "V s/rad", 1e-6, 100},
		{"resistance, ohm", &s.ohms, old.Motor.Resistance, "ohm", 1e-4, 1e4},
	} {
		if q.was <= 0 {
			continue // what the old one was is not known: nothing to set it against
		}
		was, err := j.askNumber("Old part: "+q.key, q.unit, q.was, q.min, q.max)
		if err != nil {
			return s, err
		}
		now, err := j.askNumber("New part: "+q.key, q.unit, was, q.min, q.max)
		if err != nil {
			return s, err
		}
		rec.Old[q.key], rec.New[q.key] = fmt.Sprintf("%.6g", was), fmt.Sprintf("%.6g", now)
		*q.to = now / was
	}
	return s, nil
}

// predicted is what the difference does to the loop if nothing is changed on the
// board: more counts read as more speed, so that the loop gain grows with them; a
// smaller Ke turns the motor faster per volt.
func (j *Job) predicted(s scales) []sheet.Quantity {
	q := func(name, unit string, v float64, why string) sheet.Quantity {
		return sheet.Quantity{Name: name, Value: sheet.Known(v), Unit: unit, Why: why}
	}
	loop := s.counts / s.ke
	out := []sheet.Quantity{q("speed reads", "x", s.counts, "counts per turn, new over old, on a board that is not told"),
		q("motor runs at", "% of the setpoint", 100/s.counts, "the loop holds what it reads at the setpoint"),
		q("loop gain", "x", loop, "counts per turn over back-EMF constant, new over old")}
	if s.gear != 1 {
		out = append(out, q("output speed", "x", 1/s.gear, "gear ratio, old over new"))
	}
	if j.earlier == nil {
		return out
	}
	last, err := LastDesign(j.earlier)
	if err != nil || last.Model == nil || last.Gains == nil {
		return out
	}
	was := *last.Model
	now := was
	now.Num = append([]float64(nil), was.Num...)
	for i := range now.Num {
		now.Num[i] *= loop
	}
	for _, m := range []struct {
		name string
		of   model.Linear
	}{{"phase margin before", was}, {"phase margin after", now}} {
		if d, err := design.Judge(LoopModel(m.of, last.Window), linear(*last.Gains)); err == nil && d.Stable {
			out = append(out, q(m.name, "deg", float64(d.PhaseMargin), "model and gains of "+j.earlierName()+"; the time constant is taken to stay"))
		} else if err == nil {
			out = append(out, sheet.Quantity{Name: m.name, Unit: "deg", Why: "not stable"})
		}
	}
	return out
}

// askAll has every line answered with yes, in order, with initials and the time.
func (j *Job) askAll(rec *sheet.PartRecord, what string, list []string) error {
	if j.opt.Operator == "" {
		a, err := j.h.Ask(Question{Kind: AskText, Text: "Your initials", Detail: []string{"They stand beside each answer in the record."}})
		if err != nil {
			return err
		}
		j.opt.Operator = strings.TrimSpace(a.Text)
	}
	for i, line := range list {
		a, err := j.h.Ask(Question{Kind: AskYesNo, Text: line, Detail: []string{fmt.Sprintf("%s, %d of %d. Done and seen?", what, i+1, len(list)),
			"The bus reading on a screen is an indication. Local rules and the machine's maker come first."}})
		if err != nil {
			return err
		}
		word := map[bool]string{true: "yes", false: "no"}[a.Yes]
		rec.Answers = append(rec.Answers, sheet.Answer{Question: line, Answer: word, Initials: j.opt.Operator, Time: j.stamp()})
		if !a.Yes {
			return refuse(787, "part swap", what+": not so: "+line, "see to it, then do the step again")
		}
	}
	return nil
}
