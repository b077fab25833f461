package sheet

import (
	"fmt"
	"strings"
)

// NameOutcome is the name of the entry that says how far a job file was carried out.
const NameOutcome = "outcome"

// OrderRecord says how far a job file was carried out. Kind job, NameOutcome; the file
// as it was read stands before it, of the same kind, under its own name.
type OrderRecord struct {
	Name     string      `json:"name"`
	Mode     string      `json:"mode"` // drive or look-only
	Complete bool        `json:"complete"`
	Steps    []OrderStep `json:"steps"` // in the order of the file
	Signs    []string    `json:"signs,omitempty"`
}

// OrderStep is one step of a job file and what came of it.
type OrderStep struct {
	Do     string `json:"do"`
	Status string `json:"status"` // to do, done, refused, skipped
	Words  string `json:"words,omitempty"`
}

// line says in one line how far it was carried out.
func (o OrderRecord) line() string {
	n := map[string]int{}
	for _, s := range o.Steps {
		n[s.Status]++
	}
	words := fmt.Sprintf("%s: %d of %d steps done", o.Name, n["done"], len(o.Steps))
	for _, status := range []string{"refused", "skipped", "to do"} {
		if n[status] > 0 {
			words += fmt.Sprintf(", %d %s", n[status], status)
		}
	}
	return words
}

// orderSection writes how far a job file was carried out.
func (p *reportPage) orderSection() {
	var o OrderRecord
	if p.r.LastJSON(KindJob, NameOutcome, &o) != nil {
		return
	}
	p.section("Job file")
	p.para(o.line())
	rows := [][]string{}
	for _, s := range o.Steps {
		rows = append(rows, []string{s.Do, s.Status, s.Words})
	}
	p.table([]string{"step", "", "what came of it"}, rows)
	if len(o.Signs) > 0 {
		p.para("to be signed by: " + strings.Join(o.Signs, ", "))
	}
}
