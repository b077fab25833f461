package sheet

import (
	"fmt"
	"strings"
)

// CompareReport returns the comparison of two jobs as one HTML page: the table,
// what follows from it, and the later verify drawn over the earlier one.
func CompareReport(old, new *Reader, rows []Row, words []string) string {
	var p page
	p.begin(fmt.Sprintf("Record %s against %s", RecordName(new.dir), RecordName(old.dir)))
	for _, r := range []*Reader{old, new} {
		if r.header.Simulated {
			p.loud(RecordName(r.dir) + ": SIMULATED RIG, nothing in it was measured on a motor.")
		}
	}
	head := func(title string, r *Reader) []string {
		return []string{title, RecordName(r.dir), orNone(r.header.Rig), orNone(r.header.BoardID), orNone(r.header.Start), orNone(r.Chain())}
	}
	p.table([]string{"", "record", "rig", "board", "begun", "chain"}, [][]string{head("old", old), head("new", new)})
	p.section("Motor")
	var table [][]string
	for _, r := range rows {
		change := "not known"
		if r.Change != nil {
			change = fmt.Sprintf("%+.1f %%", *r.Change*100)
		}
		note := r.Origin
		if r.Note != "" {
			note = r.Note + "; " + note
		}
		table = append(table, []string{r.Quantity, r.Unit, four(r.Old), four(r.New), change, r.Allowed, strings.ToUpper(string(r.Verdict)), note})
	}
	p.table([]string{"quantity", "unit", "old", "new", "change", "allowed", "verdict", "tolerance from"}, table)
	for _, w := range words {
		p.para(w)
	}
	p.section("Verify over the earlier one")
	p.overlay(old, new)
	p.end()
	return p.b.String()
}

// overlay draws the newest verify of each record, time from its first sample.
func (p *page) overlay(old, new *Reader) {
	var v [2]VerifyRecord
	for i, r := range []*Reader{old, new} {
		if r.LastJSON(KindVerify, "", &v[i]) != nil || v[i].Curve == nil || len(v[i].Curve.TimeS) == 0 {
			p.para(fmt.Sprintf("%s holds no verify to draw.", RecordName(r.dir)))
			return
		}
	}
	a, b := v[0].Curve, v[1].Curve
	p.raw("%s", plot{title: "verify: old and new", xLabel: "time, s", yLabel: "speed, rpm", series: []series{
		{name: "old " + RecordName(old.dir), x: fromZero(a.TimeS), y: allRPM(a.MeasuredRadS)},
		{name: "new " + RecordName(new.dir), x: fromZero(b.TimeS), y: allRPM(b.MeasuredRadS)},
		{name: "setpoint, new", x: fromZero(b.TimeS), y: allRPM(b.SetpointRadS)},
	}}.svg())
	if v[0].LoadState != v[1].LoadState {
		p.loud(fmt.Sprintf("Other load: %s, now %s.", orNone(v[0].LoadState), orNone(v[1].LoadState)))
	}
}
