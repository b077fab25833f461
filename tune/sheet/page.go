package sheet

import (
	"fmt"
	"strings"
)

// page builds the report's HTML. Every string from a record passes shownText;
// the only raw text is this file's and plot.svg's.
type page struct{ b strings.Builder }

// style is for the screen and for paper: black on white, no picture or font
// from outside, tables and plots not torn across pages.
const style = `body{font:15px/1.45 sans-serif;color:#000;background:#fff;max-width:60em;margin:1em auto;padding:0 1em}
h1{font-size:1.5em}h2{font-size:1.2em;border-bottom:1px solid #000;margin-top:2em}h3{font-size:1em}
table{border-collapse:collapse;width:100%;margin:.5em 0}th,td{border:1px solid #999;padding:.2em .5em;text-align:left;vertical-align:top;overflow-wrap:anywhere}
th{background:#eee}td.num{text-align:right;white-space:nowrap}pre{font:12px/1.3 monospace;border:1px solid #000;padding:.8em;overflow-x:auto}
.why{font-size:.85em;color:#333}.plot{width:100%;height:auto;margin:.4em 0}.bad{border:3px double #000;padding:.5em}
.plot text{font:12px sans-serif;fill:#000}.plot .t{font-weight:bold}.plot .s{font-size:11px}.plot .n{text-anchor:middle;font-size:11px}.plot .e{text-anchor:end;font-size:11px}
.plot .g{stroke:#ddd;fill:none}.plot .a{stroke:#000;fill:none}.plot .l{fill:none;stroke-width:1.4}.plot .m{stroke:#000;stroke-dasharray:1 3;fill:none}.plot .b{fill:#000;fill-opacity:.12;stroke:none}
@media print{body{max-width:none;margin:0;font-size:10pt}h2{break-after:avoid}h3{break-after:avoid}table,svg,pre{break-inside:avoid}}
`

func (p *page) raw(format string, args ...any) { fmt.Fprintf(&p.b, format, args...) }

func (p *page) begin(title string) {
	p.raw("<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"/>\n")
	p.raw("<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'\"/>\n")
	p.raw("<title>%s</title>\n<style>\n%s</style></head><body>\n<h1>%[1]s</h1>\n", shownText(title), style)
}

func (p *page) end() { p.raw("</body></html>\n") }

func (p *page) section(title string) { p.raw("<h2>%s</h2>\n", shownText(title)) }

func (p *page) sub(title string) { p.raw("<h3>%s</h3>\n", shownText(title)) }

func (p *page) para(text string) {
	if text != "" {
		p.raw("<p>%s</p>\n", shownText(text))
	}
}

func (p *page) loud(text string) { p.raw("<p class=\"bad\">%s</p>\n", shownText(text)) }

// block shows text of several lines as it stands.
func (p *page) block(text string) {
	lines := strings.Split(strings.TrimRight(text, "\n"), "\n")
	for i, l := range lines {
		lines[i] = shownText(l)
	}
	p.raw("<pre>%s</pre>\n", strings.Join(lines, "\n"))
}

// table shows rows under their heads; nothing at all if there are no rows.
func (p *page) table(head []string, rows [][]string) {
	if len(rows) == 0 {
		return
	}
	p.raw("<table><tr>")
	for _, h := range head {
		p.raw("<th>%s</th>", shownText(h))
	}
	p.raw("</tr>\n")
	for _, row := range rows {
		p.raw("<tr>")
		for _, c := range row {
			p.raw("<td>%s</td>", shownText(c))
		}
		p.raw("</tr>\n")
	}
	p.raw("</table>\n")
}

// quantities shows numbers with their unit and their why. One without a why
// says so: a number that cannot be traced is known by that.
func (p *page) quantities(title string, list []Quantity) {
	if len(list) == 0 {
		return
	}
	var rows [][]string
	for _, q := range list {
		why := q.Why
		if why == "" {
			why = "as recorded"
		}
		rows = append(rows, []string{q.Name, reported(q), why})
	}
	p.table([]string{title, "value", "why"}, rows)
}

// reported is a quantity in the page: in the recorded unit, and a speed in rpm
// beside it.
func reported(q Quantity) string {
	if q.Value == nil {
		return "not known"
	}
	out := significant(*q.Value, 4)
	if q.PlusMinus != nil {
		out += " ± " + significant(*q.PlusMinus, 2)
	}
	if q.Unit != "1" {
		out += " " + q.Unit
	}
	if q.Unit == "rad/s" {
		out += " (" + significant(*rpm(q.Value), 4) + " rpm)"
	}
	return out
}

func yesNo(b *bool) string {
	switch {
	case b == nil:
		return "not known"
	case *b:
		return "yes"
	default:
		return "NO"
	}
}

func passed(b *bool) string {
	switch {
	case b == nil:
		return "not made"
	case *b:
		return "passed"
	default:
		return "FAILED"
	}
}
