package sheet

import (
	"fmt"
	"strings"
)

// experiments shows what the optional experiments found, newest of each last.
func (p *reportPage) experiments() {
	if len(p.r.Find(KindExperiment, "")) == 0 {
		return
	}
	p.section("Experiments")
	each(p, KindExperiment, func(_ Line, x ExperimentRecord) {
		p.sub(fmt.Sprintf("%s: %s", orNone(x.Experiment), orNone(x.Verdict)))
		p.para(x.Finding)
		p.para(strings.Join(x.Reasons, "; "))
		p.quantities("result", x.Params)
		p.para("computed from " + files(x.InputFiles))
		p.series(x.Columns)
	})
}

// series shows columns as a table, as many rows as the shortest has.
func (p *reportPage) series(columns []Series) {
	if len(columns) == 0 {
		return
	}
	var head []string
	rows := len(columns[0].Values)
	for _, c := range columns {
		name := c.Name
		if c.Unit != "" && c.Unit != "1" {
			name += ", " + c.Unit
		}
		head = append(head, name)
		rows = min(rows, len(c.Values))
	}
	var table [][]string
	for i := range rows {
		var row []string
		for _, c := range columns {
			row = append(row, four(c.Values[i]))
		}
		table = append(table, row)
	}
	p.table(head, table)
}
