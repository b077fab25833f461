// Package adapter reads boards that have a line format of their own, as a file in
// TOML describes it: a pattern or columns, and what each of them means. It only
// ever reads. A board read this way has shown neither limits nor a timeout, so it
// can be looked at and recorded, never driven.
package adapter

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"os"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"
)

// LineMax is the longest line that is read; a longer one is dropped and counted.
const LineMax = 256

// Quantities are the names a column may have and the unit in which its values
// come out.
var Quantities = map[string]string{"time": "s", "speed": "rad/s", "voltage": "V", "current": "A", "bus": "V", "temperature": "degC", "setpoint": "rad/s", "counts": "1"}

// Errors of an adapter file; each is wrapped in a *FileError with its place.
var (
	ErrUnknownKey = errors.New("unknown key")
	ErrSyntax     = errors.New("cannot be read")
	ErrValue      = errors.New("value is not allowed")
)

// FileError is what is wrong with an adapter file, and where.
type FileError struct {
	File         string
	Line, Column int // from 1
	Err          error
	Detail       string
}

func (e *FileError) Error() string {
	return fmt.Sprintf("%s:%d:%d: %v: %s", e.File, e.Line, e.Column, e.Err, e.Detail)
}

// Unwrap returns the kind.
func (e *FileError) Unwrap() error { return e.Err }

// Column says how the text of one column becomes a quantity in SI units:
// (text + Offset) · Scale.
type Column struct {
	Scale  float64 `toml:"scale"`  // SI units per unit of the text; 0: 1
	Offset float64 `toml:"offset"` // in units of the text
	Wrap   float64 `toml:"wrap"`   // the text begins anew after this many units, as a counter does; 0: never
	Hex    bool    `toml:"hex"`    // the text is a hexadecimal whole number
}

// Adapter describes the lines of one kind of board.
type Adapter struct {
	Name      string   `toml:"name"`
	Baud      int      `toml:"baud"`      // bit/s; 0: 115200
	Pattern   string   `toml:"pattern"`   // regular expression (RE2) with named groups; or Columns
	Columns   []string `toml:"columns"`   // names in order; "" or "-" for one that is not used
	Separator string   `toml:"separator"` // between columns; "": blanks
	Comment   string   `toml:"comment"`   // lines that begin with it are passed over
	Period    float64  `toml:"period_s"`  // between two lines, where they carry no time
	// RadPerCount turns counts into speed where the lines carry no speed, in rad of
	// the motor shaft.
	RadPerCount float64           `toml:"rad_per_count"`
	Column      map[string]Column `toml:"column"`

	re    *regexp.Regexp
	names []string // of the columns or groups, "" where not used
}

// Load reads an adapter file.
func Load(path string) (*Adapter, error) {
	b, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	return Parse(path, b)
}

// Parse reads the content of an adapter file; file is the name for errors.
func Parse(file string, content []byte) (*Adapter, error) {
	a := &Adapter{}
	d := toml.NewDecoder(bytes.NewReader(content))
	d.DisallowUnknownFields()
	if err := d.Decode(a); err != nil {
		return nil, placed(file, err)
	}
	bad := func(key, detail string) error {
		line, col := place(content, key)
		return &FileError{File: file, Line: line, Column: col, Err: ErrValue, Detail: key + ": " + detail}
	}
	if a.Baud == 0 {
		a.Baud = 115200
	}
	if a.Baud < 0 {
		return nil, bad("baud", "want bit/s over 0")
	}
	switch {
	case (a.Pattern == "") == (len(a.Columns) == 0):
		return nil, bad("pattern", "want a pattern or columns, one of them")
	case a.Pattern != "":
		re, err := regexp.Compile(a.Pattern)
		if err != nil {
			return nil, bad("pattern", err.Error())
		}
		a.re, a.names = re, re.SubexpNames()
	default:
		a.names = slices.Clone(a.Columns)
	}
	for i, n := range a.names {
		if n == "-" {
			a.names[i] = ""
		} else if _, ok := Quantities[n]; n != "" && !ok {
			return nil, bad("columns", fmt.Sprintf("%q is no quantity; there are time, speed, voltage, current, bus, temperature, setpoint, counts", n))
		}
		if n != "" && n != "-" && slices.Contains(a.names[:i], n) {
			return nil, bad("columns", n+" stands twice")
		}
	}
	if !slices.Contains(a.names, "speed") && !slices.Contains(a.names, "counts") {
		return nil, bad("columns", "want speed or counts among them")
	}
	if !slices.Contains(a.names, "speed") && !(a.RadPerCount > 0) {
		return nil, bad("rad_per_count", "the lines carry counts and no speed: say how far one count is, in rad")
	}
	if !slices.Contains(a.names, "time") && !(a.Period > 0) {
		return nil, bad("period_s", "the lines carry no time: say how far apart they are")
	}
	for n, c := range a.Column {
		if !slices.Contains(a.names, n) {
			return nil, bad("column."+n, "there is no such column")
		}
		if math.IsNaN(c.Scale) || math.IsInf(c.Scale, 0) || math.IsNaN(c.Offset) || math.IsInf(c.Offset, 0) || !(c.Wrap >= 0) || math.IsInf(c.Wrap, 0) {
			return nil, bad("column."+n, "want finite numbers, wrap not under 0")
		}
	}
	return a, nil
}

func placed(file string, err error) error {
	var strict *toml.StrictMissingError
	if errors.As(err, &strict) && len(strict.Errors) > 0 {
		e := &strict.Errors[0]
		line, col := e.Position()
		return &FileError{File: file, Line: line, Column: col, Err: ErrUnknownKey, Detail: strings.Join(e.Key(), ".")}
	}
	var d *toml.DecodeError
	if errors.As(err, &d) {
		line, col := d.Position()
		return &FileError{File: file, Line: line, Column: col, Err: ErrSyntax, Detail: strings.TrimPrefix(d.Error(), "toml: ")}
	}
	return fmt.Errorf("%s: %w", file, err)
}

// place finds the line of a key or of a table, 1:1 where it is not there.
func place(content []byte, key string) (line, column int) {
	for i, l := range strings.Split(string(content), "\n") {
		t := strings.TrimSpace(l)
		if k, _, ok := strings.Cut(t, "="); ok && strings.TrimSpace(k) == key || t == "["+key+"]" {
			return i + 1, strings.Index(l, t) + 1
		}
	}
	return 1, 1
}

// Names are the quantities that a line gives, in the order of the file.
func (a *Adapter) Names() (names []string) {
	for _, n := range a.names {
		if n != "" {
			names = append(names, n)
		}
	}
	return names
}

// value turns the text of a column into its quantity, before it is unwrapped.
func (c Column) value(text string) (float64, bool) {
	if c.Hex {
		v, err := strconv.ParseUint(text, 16, 64)
		return float64(v), err == nil
	}
	v, err := strconv.ParseFloat(text, 64)
	return v, err == nil && !math.IsNaN(v) && !math.IsInf(v, 0)
}
