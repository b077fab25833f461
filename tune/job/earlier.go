package job

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/tune/design"
	"gainwright/tune/sheet"
)

// EarlierView is what the newest earlier record of the rig says beside this job, as
// lines of at most 80 columns.
type EarlierView struct {
	Record  string
	Differs int // from how it was left
	Lines   []string
	Scales  bool // the gains left then can be taken
}

// lookBack finds the newest earlier record of the rig and sets how the board was left
// then against how it is found now.
func (j *Job) lookBack(found *sheet.Snapshot) error {
	if j.opt.Earlier == nil {
		return nil
	}
	r := j.opt.Earlier(j.Rig.Name, j.ID.Board)
	if r == nil {
		j.h.Say("no earlier record of rig %s", j.Rig.Name)
		return nil
	}
	var left sheet.Snapshot
	if err := r.LastJSON(sheet.KindAsLeft, "", &left); err != nil {
		if errors.Is(err, sheet.ErrNoEntry) {
			j.h.Say("the earlier record %s has no as-left", sheet.RecordName(r.Dir()))
			return nil
		}
		return err
	}
	j.earlier = r
	j.differences = sheet.Differences(left, *found)
	words := "nothing differs"
	if n := len(j.differences); n > 0 {
		var list []string
		for _, d := range j.differences {
			list = append(list, fmt.Sprintf("%s: %s, now %s", d.What, readable(d.Old), readable(d.New)))
		}
		words = fmt.Sprintf("%d differences: %s", n, strings.Join(list, "; "))
	}
	j.h.Say("as found against %s: %s", j.earlierName(), words)
	j.showEarlier()
	return j.h.Keep("event", sheet.NameSinceLast, sheet.EventRecord{What: "as found against the as-left of " + j.earlierName(), Detail: words})
}

// earlierName is the earlier record by name and date.
func (j *Job) earlierName() string {
	h := j.earlier.Header()
	return fmt.Sprintf("record %s of %s", sheet.RecordName(j.earlier.Dir()), strings.TrimSpace(strings.Split(h.Start, "T")[0]))
}

// compared is the table of the earlier job's motor against this one's, nil before
// there is a fit or where the earlier job has none.
func (j *Job) compared() []sheet.Row {
	if j.earlier == nil || j.MotorValues == nil {
		return nil
	}
	old, err := j.earlier.Motor()
	if err != nil {
		return nil
	}
	return sheet.Compare(old, *j.MotorValues)
}

// oldGains judges the gains that the earlier job left on the model of this one.
func (j *Job) oldGains() (was float64, now design.Margins, ok bool) {
	last, err := LastDesign(j.earlier)
	if err != nil || last.Gains == nil || j.Fit == nil || j.Fit.Best() == nil {
		return 0, now, false
	}
	if last.Model != nil {
		if m, err := design.Judge(LoopModel(*last.Model, last.Window), linear(*last.Gains)); err == nil {
			was = float64(m.PhaseMargin)
		}
	}
	now, err = design.Judge(j.loopModel(j.Fit.Best()), linear(*last.Gains))
	return was, now, err == nil
}

// RetuneReasons are those for a retune: from the table of two motors, and from the
// old gains on the new motor. was is their phase margin on the old one in degrees,
// NaN where it is not known.
func RetuneReasons(rows []sheet.Row, was float64, now *design.Margins) []string {
	var judged sheet.MotorRecord
	// Gains may have been left with less than 45 degrees on purpose: only what was
	// lost since counts.
	if now != nil && now.Stable && !(float64(now.PhaseMargin) > was-marginLost) {
		judged.PhaseMarginDeg = sheet.Known(float64(now.PhaseMargin))
	}
	why := sheet.Retune(rows, judged)
	if now != nil && !now.Stable {
		why = append(why, "the old gains are not stable on the new motor")
	}
	return why
}

// marginLost is the loss of phase margin in degrees from which it is one of the
// reasons for a retune (our choice).
const marginLost = 3

// Offers say what can be done after a comparison of two motors: exact scaling where
// only a scale changed, else a retune where one is due.
func Offers(rows []sheet.Row, retune []string) []string {
	scale, other := map[string]float64{}, false
	for _, r := range rows {
		switch {
		case r.Verdict == sheet.Mismatch && (r.Quantity == "counts per turn" || r.Quantity == "gear ratio") && r.Change != nil:
			scale[r.Quantity] = 1 + *r.Change
		case r.Verdict == sheet.Mismatch, r.Verdict == sheet.Outside && (r.Quantity == "gain K" || r.Quantity == "time constant"):
			other = true
		}
	}
	var out []string
	if k := scale["counts per turn"]; k > 0 {
		out = append(out, fmt.Sprintf("counts per turn are x%.4g. A board that is told so keeps its gains; one that is not reads speed x%.4g, and needs its gains x%.4g", k, k, 1/k))
	}
	if k := scale["gear ratio"]; k > 0 {
		out = append(out, fmt.Sprintf("the gear is x%.4g. All speeds are at the motor shaft: gains stay, setpoints at the output do not", k))
	}
	switch {
	case other || len(retune) > 0:
		out = append(out, "retune: the motor itself answers otherwise")
	case len(scale) > 0:
		out = append(out, "only a scale changed: exact scaling is enough, no retune is due")
	default:
		out = append(out, "nothing in the table asks for a retune")
	}
	return out
}

// showEarlier puts what the earlier record says on the screens.
func (j *Job) showEarlier() {
	if j.earlier == nil && j.part == nil {
		return
	}
	v := &EarlierView{Differs: len(j.differences)}
	add := func(format string, args ...any) { v.Lines = append(v.Lines, fmt.Sprintf(format, args...)) }
	if j.earlier != nil {
		v.Record = j.earlierName()
		h := j.earlier.Header()
		by := h.Operator
		if by == "" {
			by = "nobody named"
		}
		add("%s, by %s%s", v.Record, by, map[bool]string{true: ", SIMULATED RIG", false: ""}[h.Simulated])
		if len(j.differences) == 0 {
			add("As found now, nothing differs from how it was left then.")
		} else {
			add("As found now against as left then:")
		}
		for _, d := range j.differences {
			add("  %s: %s, now %s", d.What, readable(d.Old), readable(d.New))
		}
	} else {
		add("There is no earlier record of this rig.")
	}
	if p := j.part; p != nil {
		add("")
		add("Part swapped: %s", p.New["part"])
		for _, k := range partKeys {
			if k != "part" && (p.Old[k] != "" || p.New[k] != "") {
				add("  %-28s %s, now %s", k, orUnknown(p.Old[k]), orUnknown(p.New[k]))
			}
		}
		add("If nothing is changed on the board:")
		for _, q := range p.Predicted {
			if q.Value != nil {
				add("  %-28s %.4g %s", q.Name, *q.Value, q.Unit)
			}
		}
	}
	if rows := j.compared(); rows != nil {
		add("")
		v.Lines = append(v.Lines, strings.Split(strings.TrimRight(sheet.CompareText(rows), "\n"), "\n")...)
		was, now, ok := j.oldGains()
		var margins *design.Margins
		if ok {
			margins = &now
			if now.Stable {
				add("The gains left then, on this motor: phase margin %.0f deg (then %.0f), Ms %.2f", float64(now.PhaseMargin), was, float64(now.Ms))
			} else {
				add("The gains left then, on this motor: NOT STABLE")
			}
		}
		why := RetuneReasons(rows, was, margins)
		for _, w := range why {
			add("retune is due: %s", w)
		}
		for i, o := range Offers(rows, why) {
			add("offer %d: %s", i+1, o)
		}
		v.Lines = append(v.Lines, j.bothMargins(margins)...)
		v.Scales = margins != nil && j.Gains != nil
	}
	if j.earlier != nil {
		if last, err := LastDesign(j.earlier); err == nil && last.Gains != nil {
			v.Lines = append(v.Lines, PeriodSets(*last.Gains, j.ID.Loop.Seconds())...)
		}
	}
	j.h.Show(func(view *View) { view.Earlier = v })
}

// readable is what a board said with its binary32 digits, and long decimals, as
// numbers for people; the record has both to the last bit.
func readable(s string) string {
	words := strings.Fields(s)
	for i, w := range words {
		if bits, ok := protocol.ParseHex32([]byte(w)); ok {
			words[i] = fmt.Sprintf("%.6g", math.Float32frombits(bits))
		} else if v, err := strconv.ParseFloat(w, 64); err == nil {
			words[i] = fmt.Sprintf("%.6g", v)
		}
	}
	return strings.Join(words, " ")
}

func orUnknown(s string) string {
	if s == "" {
		return "not known"
	}
	return s
}

// stamp is the time of day for an answer.
func (j *Job) stamp() string { return j.h.Wall().Format(time.RFC3339) }
