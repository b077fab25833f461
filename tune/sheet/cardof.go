package sheet

import (
	"encoding/json"
	"path/filepath"
	"strings"
)

// RecordName returns the short name of a sheet, as card and sticker print it:
// the last part of its folder's name.
func RecordName(dir string) string {
	base := filepath.Base(dir)
	return base[strings.LastIndexByte(base, '-')+1:]
}

// CardOf fills a card from a sheet's entries. What the sheet does not hold, or
// holds in a damaged file, stays blank.
func CardOf(r *Reader) CardData {
	h := r.Header()
	d := CardData{
		Record: RecordName(r.dir), Rig: h.Rig, BoardID: h.BoardID, Program: h.Program, Operator: h.Operator,
		Start: h.Start, Simulated: h.Simulated, Hash: r.Chain(),
	}
	if c, err := r.Closing(); err == nil {
		d.Outcome, d.Reason = c.Outcome, c.Reason
	} else {
		d.Outcome = outcomeSoFar(r)
	}
	_ = r.LastJSON(KindRig, NameNameplate, &d.Nameplate)
	for _, l := range r.Find(KindRig, "") {
		if strings.HasSuffix(l.File, ".toml") && !strings.HasSuffix(d.Nameplate.RigFile, ".toml") {
			d.Nameplate.RigFile = l.File // where the file as used stands in the record
		}
	}
	var found, left Snapshot
	if l, ok := r.First(KindAsFound); ok {
		_ = r.JSON(l, &found)
	}
	_ = r.LastJSON(KindAsLeft, "", &left)
	d.Found, d.Left = columnOf(found), columnOf(left)
	d.asFoundStep(r, found)
	d.Firmware, d.LoadState = found.Firmware, left.LoadState
	d.AmbientDegC, d.BusV = found.AmbientDegC, left.BusV
	if d.AmbientDegC == nil {
		d.AmbientDegC = left.AmbientDegC // asked after the as-found was kept
	}
	d.limits(r, found, left)
	if d.LoadState == "" {
		d.LoadState = found.LoadState
	}
	d.results(r)
	d.commissioning(r)
	var order OrderRecord
	if r.LastJSON(KindJob, NameOutcome, &order) == nil {
		d.JobFile, d.Signs = order.line(), order.Signs
	}
	for _, l := range r.Find(KindCheck, "") {
		var c CheckRecord
		if r.JSON(l, &c) == nil {
			d.Checks = append(d.Checks, cardCheck(c))
		}
	}
	for _, l := range r.Find(KindInterlock, "") {
		var in InterlockRecord
		if r.JSON(l, &in) == nil {
			d.Inputs = append(d.Inputs, in.line())
		}
	}
	for _, l := range r.Find(KindRemark, "") {
		if b, err := r.Read(l); err == nil {
			d.Remarks = append(d.Remarks, strings.TrimSpace(string(b)))
		}
	}
	return d
}

// asFoundStep sets what the loop did as it was found beside what it does as left.
func (d *CardData) asFoundStep(r *Reader, found Snapshot) {
	var step AsFoundStepRecord
	if r.LastJSON(KindEvent, NameAsFoundStep, &step) == nil && step.Step != nil && d.Found.Step == nil {
		d.Found.Step = step.Step
	}
	d.NoAsFoundTraces = found.BoardID != "" && len(found.TraceFiles) == 0 && d.Found.Step == nil
	d.WhyNoTraces = step.NotTaken
}

// limits takes those that the session had the board hold, and sets those that it
// holds after power-on beside them where they differ.
func (d *CardData) limits(r *Reader, found, left Snapshot) {
	var held EventRecord
	_ = r.LastJSON(KindEvent, NameLimitsHeld, &held)
	d.Limits = held.Limits
	if len(d.Limits) == 0 {
		if d.Limits = left.Limits; len(d.Limits) == 0 {
			d.Limits = found.Limits
		}
		return
	}
	same := named(d.Limits)
	for _, q := range left.Limits {
		if v, ok := named([]Quantity{q})[q.Name]; ok && v != same[q.Name] {
			d.PowerOnLimits = append(d.PowerOnLimits, q)
		}
	}
}

// outcomeSoFar is what a record that is not closed yet shows for certain.
func outcomeSoFar(r *Reader) string {
	var v VerifyRecord
	var s StoreRecord
	if r.LastJSON(KindVerify, "", &v) == nil && r.LastJSON(KindStore, "", &s) == nil && isTrue(v.Passed) && isTrue(s.PowerCycled) && isTrue(s.Identical) {
		return "accepted"
	}
	_, pushed := r.First(KindPush)
	if _, none := r.Last(KindEvent, NameNoAdjustment); none && !pushed {
		return "no-adjustment"
	}
	return ""
}

func isTrue(b *bool) bool { return b != nil && *b }

// results fills in what was computed: model, margins, verify, store.
func (d *CardData) results(r *Reader) {
	var p ProposalRecord
	var fit FitRecord
	if p = chosen(r); p.Rule != "" {
		d.margins(p.Margins)
		d.worst(p.Worst)
	}
	if fit = fitBehind(r, p); fit.Kind != "" {
		gain, tau, dead := param(fit, "gain"), param(fit, "tau"), param(fit, "dead_time")
		d.Model = CardModel{
			Gain: gain.Value, GainPM: gain.PlusMinus, Tau: tau.Value, TauPM: tau.PlusMinus,
			DeadTime: dead.Value, DeadPM: dead.PlusMinus, Verdict: fit.Verdict,
		}
		var methods ExperimentRecord
		if r.LastJSON(KindExperiment, NameMethods, &methods) == nil && methods.Verdict != "believed" && d.Model.Verdict == "believed" {
			d.Model.Verdict = "care" // other methods contradict it
		}
		second := param(fit, "tau2")
		d.Model.Tau2, d.Model.Tau2PM = second.Value, second.PlusMinus
	}
	var m MotorRecord
	if r.LastJSON(KindFit, NameMotor, &m) == nil {
		d.Motor = m
		d.Model.BreakawayForward, d.Model.BreakawayReverse = m.BreakawayForwardV, m.BreakawayReverseV
	}
	var v VerifyRecord
	if r.LastJSON(KindVerify, "", &v) == nil {
		if d.Left.Step == nil {
			d.Left.Step = v.Step
		}
		d.OvershootTarget, d.SettlingTarget = "none", "none"
		for _, t := range v.Targets {
			switch t.Name {
			case "overshoot":
				d.OvershootTarget = t.Limit
			case "settling time":
				d.SettlingTarget = t.Limit
			}
		}
	}
	var s StoreRecord
	if r.LastJSON(KindStore, "", &s) == nil && s.PowerCycled != nil && *s.PowerCycled {
		d.ReRead = s.Identical
	}
}

func (d *CardData) margins(raw json.RawMessage) {
	var m struct {
		GainMarginDB   *float64 `json:"gain_margin_db"`
		PhaseMarginDeg *float64 `json:"phase_margin_deg"`
		Ms             *float64 `json:"ms"`
	}
	if json.Unmarshal(raw, &m) == nil {
		d.GainMarginDB, d.PhaseMarginDeg, d.SensitivityPeak = m.GainMarginDB, m.PhaseMarginDeg, m.Ms
	}
}

func (d *CardData) worst(raw json.RawMessage) {
	var w struct {
		PhaseMarginDeg *float64 `json:"phase_margin_deg"`
		Ms             *float64 `json:"ms"`
	}
	if json.Unmarshal(raw, &w) == nil {
		d.WorstPhaseDeg, d.WorstPeak = w.PhaseMarginDeg, w.Ms
	}
}

func columnOf(s Snapshot) CardColumn {
	c := gainColumn(s.Running)
	c.Step = s.StepResponse
	return c
}

// gainColumn reads gains in their fixed JSON form. Kp and Ki of an ideal or a
// series PI are kp (or kc) and that over ti; a derivative of another form than
// parallel is not turned round for the card and stays blank.
func gainColumn(raw json.RawMessage) CardColumn {
	var g struct {
		Form       string   `json:"form"`
		Kp         *float64 `json:"kp"`
		Kc         *float64 `json:"kc"`
		Ki         *float64 `json:"ki"`
		Ti         *float64 `json:"ti"`
		Kd         *float64 `json:"kd"`
		SampleTime *float64 `json:"sample_time"`
	}
	if len(raw) == 0 || json.Unmarshal(raw, &g) != nil {
		return CardColumn{}
	}
	c := CardColumn{Kp: g.Kp, Ki: g.Ki, Form: g.Form, PeriodS: g.SampleTime}
	if g.Form == "parallel" {
		if g.Kd != nil && *g.Kd != 0 {
			c.Kd = g.Kd
		}
		return c
	}
	if c.Kp == nil {
		c.Kp = g.Kc
	}
	if c.Kp != nil && g.Ti != nil && *g.Ti > 0 {
		c.Ki = Known(*c.Kp / *g.Ti)
	}
	return c
}

func chosen(r *Reader) ProposalRecord {
	var out ProposalRecord
	for _, l := range r.Find(KindProposal, "") {
		var p ProposalRecord
		if r.JSON(l, &p) == nil && p.Chosen {
			out = p // the newest counts
		}
	}
	return out
}

// fitBehind returns the fit that a proposal came from, or the newest that was
// not refused where the proposal names none.
func fitBehind(r *Reader, p ProposalRecord) FitRecord {
	var f FitRecord
	for _, file := range p.InputFiles {
		if l, ok := r.ByFile(file); ok && l.Kind == KindFit && r.JSON(l, &f) == nil && f.Kind != "" {
			return f
		}
	}
	var newest FitRecord
	for _, l := range r.Find(KindFit, "") {
		f = FitRecord{}
		if r.JSON(l, &f) == nil && f.Kind != "" && f.Verdict != "refused" {
			newest = f
		}
	}
	return newest
}

func param(f FitRecord, name string) Quantity {
	for _, q := range f.Params {
		if q.Name == name {
			return q
		}
	}
	return Quantity{}
}

func cardCheck(c CheckRecord) CardCheck {
	out := CardCheck{Name: c.Check, Seen: c.Passed}
	var notes []string
	for i, q := range c.Measured {
		if q.Value == nil {
			continue
		}
		if i+1 < len(c.Measured) && c.Measured[i+1].Unit == q.Unit {
			q.Unit = "" // the last one of the same unit names it
		}
		notes = append(notes, shown(q))
	}
	out.Note = strings.Join(notes, " / ")
	return out
}
