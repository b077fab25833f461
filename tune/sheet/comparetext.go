package sheet

import (
	"fmt"
	"strings"

	"gainwright/tune/sheet/plain"
)

// CompareText returns the table for a terminal or a printer of 80 columns, with
// the notes and the origins of the tolerances below it.
func CompareText(rows []Row) string {
	var b strings.Builder
	line := func(cells ...string) {
		widths := []int{18, 12, 10, 10, 9, 13, 0}
		text := ""
		for i, c := range cells {
			text += pad(plain.Visible(c, max(widths[i]-1, 8)), widths[i])
		}
		b.WriteString(strings.TrimRight(text, " ") + "\n")
	}
	line("quantity", "unit", "old", "new", "change", "allowed", "verdict")
	b.WriteString(strings.Repeat("-", cardColumns) + "\n")
	var notes, origins grouped
	for _, r := range rows {
		change := "-"
		if r.Change != nil {
			change = fmt.Sprintf("%+.1f%%", *r.Change*100)
		}
		line(r.Quantity, r.Unit, four(r.Old), four(r.New), change, r.Allowed, strings.ToUpper(string(r.Verdict)))
		if r.Note != "" {
			notes.add(r.Note, r.Quantity)
		}
		origins.add(r.Origin, r.Quantity)
	}
	notes.write(&b, "notes")
	origins.write(&b, "where the tolerances come from")
	return b.String()
}

// FleetText returns the table of many sheets for a terminal of 80 columns.
func FleetText(rows []FleetRow) string {
	var b strings.Builder
	line := func(cells ...string) {
		widths := []int{19, 13, 8, 12, 12, 0}
		text := ""
		for i, c := range cells {
			text += pad(plain.Visible(c, max(widths[i]-1, 16)), widths[i])
		}
		b.WriteString(strings.TrimRight(text, " ") + "\n")
	}
	line("quantity", "unit", "sheets", "median", "spread", "drift a year")
	b.WriteString(strings.Repeat("-", cardColumns) + "\n")
	for _, r := range rows {
		line(r.Quantity, r.Unit, fmt.Sprint(r.Count), four(r.Median), four(r.Spread), four(r.Drift))
		for _, o := range r.Outliers {
			b.WriteString(Wrap(fmt.Sprintf("stands apart: %s with %s", o.Record, significant(o.Value, 4)), "  "))
		}
	}
	return b.String()
}

// Wrap breaks text at blanks into lines of at most 80 columns, each after indent,
// and makes it fit to show.
func Wrap(text, indent string) string { return wrap(text, cardColumns, indent) }

// grouped collects the quantities that share a remark, in the order of the
// remarks' first use.
type grouped struct {
	order []string
	of    map[string][]string
}

func (g *grouped) add(remark, quantity string) {
	if g.of == nil {
		g.of = map[string][]string{}
	}
	if _, known := g.of[remark]; !known {
		g.order = append(g.order, remark)
	}
	g.of[remark] = append(g.of[remark], quantity)
}

func (g *grouped) write(b *strings.Builder, title string) {
	if len(g.order) == 0 {
		return
	}
	b.WriteString("\n" + title + "\n")
	for _, r := range g.order {
		b.WriteString(wrap(r+": "+strings.Join(g.of[r], ", "), cardColumns, "  "))
	}
}

func four(x *float64) string {
	if x == nil {
		return "not known"
	}
	return significant(*x, 4)
}

// wrap breaks s at blanks into lines of at most n columns, each after indent.
func wrap(s string, n int, indent string) string {
	var b strings.Builder
	line := indent
	for _, word := range strings.Fields(plain.Visible(s, 0)) {
		if line != indent && plain.Width(line)+1+plain.Width(word) > n {
			b.WriteString(line + "\n")
			line = indent + "  "
		} else if line != indent {
			line += " "
		}
		line += plain.Visible(word, n-len(indent)-2)
	}
	b.WriteString(line + "\n")
	return b.String()
}
