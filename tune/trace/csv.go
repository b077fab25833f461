package trace

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
)

// ParseError is a fault in a trace file with its place. Line and Column count
// from 1; Column is the column of the table, 0 where the whole line is meant.
type ParseError struct {
	File         string
	Line, Column int
	Err          error
}

func (e *ParseError) Error() string {
	if e.Column > 0 {
		return fmt.Sprintf("%s:%d:%d: %v", e.File, e.Line, e.Column, e.Err)
	}
	return fmt.Sprintf("%s:%d: %v", e.File, e.Line, e.Err)
}

// Unwrap returns both the cause and ErrInvalid.
func (e *ParseError) Unwrap() []error { return []error{e.Err, ErrInvalid} }

// unitScale gives the factor to SI for the units a column may carry.
var unitScale = map[string]map[string]float64{
	"time":        {"s": 1, "ms": 1e-3, "us": 1e-6},
	"voltage":     {"V": 1, "1": 1},
	"speed":       {"rad/s": 1, "rpm": 2 * math.Pi / 60, "1": 1},
	"current":     {"A": 1, "1": 1},
	"bus":         {"V": 1, "1": 1},
	"temperature": {"degC": 1, "1": 1},
	"setpoint":    {"rad/s": 1, "rpm": 2 * math.Pi / 60, "1": 1},
	"counts":      {"1": 1},
}

// ReadFile reads the trace file at path.
func ReadFile(path string) (*Trace, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return ReadCSV(f, path)
}

// ReadCSV reads one trace. name is what errors call the file. Unit "1" is taken
// as it stands: such a record has a scale of its own. Every fault in the text is
// a *ParseError that wraps ErrInvalid.
func ReadCSV(r io.Reader, name string) (*Trace, error) {
	p := &parser{file: name, tr: &Trace{Name: baseName(name)}}
	sc := bufio.NewScanner(r)
	sc.Buffer(make([]byte, 64*1024), 1<<20)
	for sc.Scan() {
		p.line++
		text := strings.TrimSuffix(sc.Text(), "\r")
		if p.line == 1 {
			text = strings.TrimPrefix(text, "\ufeff")
		}
		var err error
		switch {
		case strings.TrimSpace(text) == "":
			continue
		case strings.HasPrefix(text, "#"):
			err = p.comment(text)
		case p.names == nil:
			err = p.header(text)
		case p.targets == nil:
			err = p.units(text)
		default:
			err = p.row(text)
		}
		if err != nil {
			return nil, err
		}
	}
	if err := sc.Err(); err != nil {
		return nil, p.fail(0, err)
	}
	if p.targets == nil {
		return nil, p.fail(0, fmt.Errorf("want a row of names and a row of units"))
	}
	if p.tr.Len() == 0 {
		return nil, p.fail(0, fmt.Errorf("no samples"))
	}
	return p.tr, nil
}

type target struct {
	values *[]float64
	scale  float64
	other  int // index in Other, or -1
	mask   bool
}

type parser struct {
	file    string
	line    int
	tr      *Trace
	names   []string
	targets []target
}

func (p *parser) fail(column int, err error) error {
	return &ParseError{File: p.file, Line: max(p.line, 1), Column: column, Err: err}
}

func split(text string) []string {
	cells := strings.Split(text, ",")
	for i := range cells {
		cells[i] = strings.TrimSpace(cells[i])
		if c := cells[i]; len(c) >= 2 && c[0] == '"' && c[len(c)-1] == '"' {
			cells[i] = c[1 : len(c)-1]
		}
	}
	return cells
}

// comment reads back the settings that WriteCSV puts into comments; any other
// comment is skipped.
func (p *parser) comment(text string) error {
	key, value, ok := strings.Cut(strings.TrimSpace(strings.TrimLeft(text, "#")), "=")
	if !ok || p.tr.Len() > 0 {
		return nil
	}
	key, value = strings.TrimSpace(key), strings.TrimSpace(value)
	var err error
	switch key {
	case "name":
		p.tr.Name = value
	case "hold":
		p.tr.Hold, err = ParseHold(value)
	case "window_s":
		p.tr.Window, err = positive(value)
	case "rad_per_count":
		p.tr.RadPerCount, err = positive(value)
	}
	if err != nil {
		return p.fail(0, fmt.Errorf("comment %s: %w", key, err))
	}
	return nil
}

func positive(text string) (float64, error) {
	v, err := strconv.ParseFloat(text, 64)
	if err != nil || !(v >= 0) || math.IsInf(v, 0) {
		return 0, fmt.Errorf("%q is not a number of 0 or more", text)
	}
	return v, nil
}

func (p *parser) header(text string) error {
	p.names = split(text)
	seen := map[string]bool{}
	for i, n := range p.names {
		if n == "" {
			return p.fail(i+1, fmt.Errorf("column without a name"))
		}
		if seen[n] {
			return p.fail(i+1, fmt.Errorf("column %q stands twice", n))
		}
		seen[n] = true
	}
	for _, need := range []string{"time", "voltage", "speed"} {
		if !seen[need] {
			return p.fail(0, fmt.Errorf("no column named %q", need))
		}
	}
	return nil
}

func (p *parser) units(text string) error {
	cells := split(text)
	if len(cells) != len(p.names) {
		return p.fail(0, fmt.Errorf("%d units for %d names", len(cells), len(p.names)))
	}
	known := map[string]*[]float64{
		"time": &p.tr.Time, "voltage": &p.tr.Voltage, "speed": &p.tr.Speed, "current": &p.tr.Current,
		"bus": &p.tr.Bus, "temperature": &p.tr.Temperature, "setpoint": &p.tr.Setpoint, "counts": &p.tr.Counts,
	}
	for i, name := range p.names {
		if name == "mask" {
			p.tr.Mask = []Mask{}
			p.targets = append(p.targets, target{other: -1, mask: true})
			continue
		}
		scales, ok := unitScale[name]
		if !ok {
			p.tr.Other = append(p.tr.Other, Column{Name: name, Unit: cells[i]})
			p.targets = append(p.targets, target{other: len(p.tr.Other) - 1})
			continue
		}
		scale, ok := scales[cells[i]]
		if !ok {
			return p.fail(i+1, fmt.Errorf("unit %q of column %s: want %s", cells[i], name, wanted(scales)))
		}
		p.targets = append(p.targets, target{values: known[name], scale: scale, other: -1})
	}
	return nil
}

// wanted lists the units of a column in a fixed order.
func wanted(scales map[string]float64) string {
	var out []string
	for _, u := range []string{"s", "ms", "us", "V", "rad/s", "rpm", "A", "degC", "1"} {
		if _, ok := scales[u]; ok {
			out = append(out, u)
		}
	}
	return strings.Join(out, ", ")
}

func (p *parser) row(text string) error {
	cells := split(text)
	if len(cells) != len(p.targets) {
		return p.fail(0, fmt.Errorf("%d cells, want %d", len(cells), len(p.targets)))
	}
	for i, tg := range p.targets {
		switch {
		case tg.mask:
			m, err := ParseMask(cells[i])
			if err != nil {
				return p.fail(i+1, err)
			}
			p.tr.Mask = append(p.tr.Mask, m)
		case tg.other >= 0:
			c := &p.tr.Other[tg.other]
			c.Text = append(c.Text, cells[i])
		default:
			v, err := strconv.ParseFloat(cells[i], 64)
			if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
				return p.fail(i+1, fmt.Errorf("%s: %q is not a finite number", p.names[i], cells[i]))
			}
			*tg.values = append(*tg.values, v*tg.scale)
		}
	}
	if n := p.tr.Len(); n > 1 && p.tr.Time[n-1] <= p.tr.Time[n-2] {
		column := 0
		for i, name := range p.names {
			if name == "time" {
				column = i + 1
			}
		}
		return p.fail(column, fmt.Errorf("time does not rise: %g s after %g s", p.tr.Time[n-1], p.tr.Time[n-2]))
	}
	return nil
}

// WriteCSV writes the trace so that ReadCSV gives back the same numbers to the
// last bit. Each remark becomes a comment line at the top.
func (tr *Trace) WriteCSV(w io.Writer, remarks ...string) error {
	if err := tr.Validate(); err != nil {
		return err
	}
	b := bufio.NewWriter(w)
	for _, r := range remarks {
		fmt.Fprintf(b, "# %s\n", strings.ReplaceAll(r, "\n", "\n# "))
	}
	if tr.Name != "" {
		fmt.Fprintf(b, "# name = %s\n", tr.Name)
	}
	fmt.Fprintf(b, "# hold = %s\n", tr.Hold)
	if tr.Window > 0 {
		fmt.Fprintf(b, "# window_s = %s\n", number(tr.Window))
	}
	if tr.RadPerCount > 0 {
		fmt.Fprintf(b, "# rad_per_count = %s\n", number(tr.RadPerCount))
	}
	tr.writeTable(b)
	return b.Flush()
}

func (tr *Trace) writeTable(b *bufio.Writer) {
	var names, units []string
	var present []namedColumn
	for _, c := range tr.columns() {
		if c.values != nil {
			names, units = append(names, c.name), append(units, c.unit)
			present = append(present, c)
		}
	}
	if tr.Mask != nil {
		names, units = append(names, "mask"), append(units, "1")
	}
	for _, c := range tr.Other {
		names, units = append(names, c.Name), append(units, c.Unit)
	}
	fmt.Fprintf(b, "%s\n%s\n", strings.Join(names, ","), strings.Join(units, ","))
	for i := range tr.Time {
		for k, c := range present {
			if k > 0 {
				b.WriteByte(',')
			}
			b.WriteString(number(c.values[i]))
		}
		if tr.Mask != nil {
			b.WriteString("," + tr.Mask[i].String())
		}
		for _, c := range tr.Other {
			b.WriteString("," + c.Text[i])
		}
		b.WriteByte('\n')
	}
}

func number(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// baseName returns the last element of a path without its .csv ending.
func baseName(path string) string {
	if i := strings.LastIndexAny(path, `/\`); i >= 0 {
		path = path[i+1:]
	}
	return strings.TrimSuffix(path, ".csv")
}
