package rig

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"
)

// Error is one thing wrong with a rig file, with its place. Line and Column
// count from 1; they are 0 where the file as a whole is meant.
type Error struct {
	File         string
	Line, Column int
	Key          string
	Message      string
	Err          error
}

// Error returns file:line:column: key: message.
func (e *Error) Error() string {
	s := e.File
	if e.Line > 0 {
		s += fmt.Sprintf(":%d:%d", e.Line, e.Column)
	}
	if e.Key != "" {
		s += ": " + e.Key
	}
	return s + ": " + e.Message
}

// Unwrap returns one of the sentinels.
func (e *Error) Unwrap() error { return e.Err }

// Sentinels inside an Error.
var (
	ErrSyntax     = errors.New("rig: not TOML")
	ErrUnknownKey = errors.New("rig: unknown key")
	ErrType       = errors.New("rig: wrong type")
	ErrMissing    = errors.New("rig: missing key")
	ErrRange      = errors.New("rig: value out of range")
	ErrLoosened   = errors.New("rig: limit loosened without a reason")
)

// InterlocksMax is how many input bits a board has.
const InterlocksMax = 16

// Parse reads a rig file. file is its name, for errors only. The error joins
// every *Error found, in the order of the file; a Rig is returned only without
// one.
func Parse(file string, data []byte) (Rig, error) {
	var r Rig
	for i := range keys {
		if p, ok := keys[i].at(&r).(*string); ok {
			*p = keys[i].word
		}
	}
	dec := toml.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	if err := dec.Decode(&r); err != nil {
		return Rig{}, tomlErrors(file, err)
	}
	c := checker{file: file, r: &r, at: Places(data)}
	c.run()
	if len(c.errs) > 0 {
		sort.SliceStable(c.errs, func(i, j int) bool { return c.errs[i].Line < c.errs[j].Line })
		joined := make([]error, len(c.errs))
		for i, e := range c.errs {
			joined[i] = e
		}
		return Rig{}, errors.Join(joined...)
	}
	sum := sha256.Sum256(data)
	r.Hash = hex.EncodeToString(sum[:])
	return r, nil
}

// tomlErrors gives the errors of the TOML package their place.
func tomlErrors(file string, err error) error {
	var strict *toml.StrictMissingError
	if errors.As(err, &strict) {
		var all []error
		for i := range strict.Errors {
			d := &strict.Errors[i]
			line, column := d.Position()
			k := strings.Join(d.Key(), ".")
			all = append(all, &Error{File: file, Line: line, Column: column, Key: k, Err: ErrUnknownKey, Message: "no such key" + nearest(k)})
		}
		return errors.Join(all...)
	}
	var d *toml.DecodeError
	if errors.As(err, &d) {
		line, column := d.Position()
		kind := ErrSyntax
		if len(d.Key()) > 0 {
			kind = ErrType
		}
		return &Error{File: file, Line: line, Column: column, Key: strings.Join(d.Key(), "."), Err: kind,
			Message: strings.TrimPrefix(d.Error(), "toml: ")}
	}
	return &Error{File: file, Err: ErrType, Message: strings.TrimPrefix(err.Error(), "toml: ")}
}

// nearest offers the known key that shares the most with a mistyped one.
func nearest(k string) string {
	best, score := "", 0
	last := k[strings.LastIndexByte(k, '.')+1:]
	for i := range keys {
		p := keys[i].path
		n := common(last, p[strings.LastIndexByte(p, '.')+1:])
		if strings.HasPrefix(p, k[:strings.LastIndexByte(k, '.')+1]) {
			n++
		}
		if n > score {
			best, score = p, n
		}
	}
	if score < 4 {
		return ""
	}
	return "; did you mean " + best + "?"
}

func common(a, b string) int {
	n := 0
	for n < len(a) && n < len(b) && a[n] == b[n] {
		n++
	}
	return n
}

// checker holds one file to the table of keys.
type checker struct {
	file string
	r    *Rig
	at   map[string]Place
	errs []*Error
}

func (c *checker) bad(path string, kind error, format string, args ...any) {
	p := c.at[path]
	c.errs = append(c.errs, &Error{File: c.file, Line: p.Line, Column: p.Column, Key: path, Err: kind, Message: fmt.Sprintf(format, args...)})
}

func (c *checker) run() {
	for i := range keys {
		c.key(&keys[i])
	}
	c.interlocks()
	c.lines("checklist", c.r.Checklist)
	c.lines("acceptance", c.r.Acceptance)
	if len(c.errs) > 0 {
		return // what hangs together is looked at once the single values are right
	}
	c.together()
}

func (c *checker) key(k *key) {
	_, given := c.at[k.path]
	if !given && k.must {
		c.bad(k.path, ErrMissing, "missing: %s%s", k.meaning, unitIn(k.unit))
		return
	}
	switch p := k.at(c.r).(type) {
	case *float64:
		c.number(k, p, given)
	case *int64:
		if given && (float64(*p) < k.min || float64(*p) > k.max) {
			c.bad(k.path, ErrRange, "%d is not from %g to %g", *p, k.min, k.max)
		}
	case *string:
		if len(*p) > 256 {
			c.bad(k.path, ErrRange, "%d bytes are more than 256", len(*p))
		}
		if k.must && *p == "" {
			c.bad(k.path, ErrRange, "is empty")
		}
		if len(k.oneOf) > 0 && !contains(k.oneOf, *p) {
			c.bad(k.path, ErrRange, "%q is none of %s", *p, strings.Join(k.oneOf, ", "))
		}
	case *bool:
		if !given {
			*p = k.yes
		}
	}
}

func (c *checker) number(k *key, p *float64, given bool) {
	if !given {
		*p = k.derive(c.r)
		return
	}
	switch {
	case math.IsNaN(*p) || math.IsInf(*p, 0):
		c.bad(k.path, ErrRange, "%v is not a number to work with", *p)
	case *p < k.min || *p > k.max:
		c.bad(k.path, ErrRange, "%s%s is not from %s to %s", num(*p), unitAfter(k.unit), num(k.min), num(k.max))
	case k.loose && k.derive != nil && *p > k.derive(c.r)*(1+1e-12) && strings.TrimSpace(c.r.Limits.Loosened) == "":
		c.bad(k.path, ErrLoosened, "%s%s is looser than %s%s (%s): say why in limits.loosened_reason",
			num(*p), unitAfter(k.unit), num(k.derive(c.r)), unitAfter(k.unit), k.def)
	}
}

func (c *checker) interlocks() {
	if len(c.r.Interlocks) > InterlocksMax {
		c.bad("interlock", ErrRange, "more than %d", InterlocksMax)
	}
	seen := map[int64]bool{}
	kinds := map[string]int{}
	for i := range c.r.Interlocks {
		in := &c.r.Interlocks[i]
		path := "interlock." + strconv.Itoa(i)
		if in.Kind == "" {
			in.Kind = KindInput
		}
		kinds[in.Kind]++
		switch in.Kind {
		case KindInput:
		case KindEnabling, KindThrough:
			if kinds[in.Kind] > 1 {
				c.bad(path+".kind", ErrRange, "%q is there twice: one enabling switch is read", in.Kind)
			}
		default:
			c.bad(path+".kind", ErrRange, "%q is none of %s, %s, %s", in.Kind, KindInput, KindEnabling, KindThrough)
		}
		switch {
		case in.Bit < 0 || in.Bit >= InterlocksMax:
			c.bad(path+".bit", ErrRange, "%d is not from 0 to %d", in.Bit, InterlocksMax-1)
		case seen[in.Bit]:
			c.bad(path+".bit", ErrRange, "%d is there twice", in.Bit)
		}
		if _, ok := c.at[path+".bit"]; !ok {
			c.bad(path+".bit", ErrMissing, "missing: input bit of the board, from 0")
		}
		if in.Name == "" || len(in.Name) > 64 {
			c.bad(path+".name", ErrMissing, "a name of 1 to 64 bytes is missing")
		}
		seen[in.Bit] = true
	}
	if kinds[KindThrough] > 0 && kinds[KindEnabling] == 0 {
		c.bad("interlock", ErrMissing, "there is a contact %q and none of kind %q", KindThrough, KindEnabling)
	}
}

// ChecklistMax bounds the lines of a checklist: more are not read but clicked away.
const ChecklistMax = 30

// lines holds a list of lines to its bounds.
func (c *checker) lines(key string, list []string) {
	if n := len(list); n > ChecklistMax {
		c.bad(key, ErrRange, "%d lines are more than %d", n, ChecklistMax)
	}
	for i, s := range list {
		if strings.TrimSpace(s) == "" || len(s) > 128 {
			c.bad(key, ErrRange, "line %d is empty or longer than 128 bytes", i+1)
		}
	}
}

// together looks at keys that bind each other.
func (c *checker) together() {
	r := c.r
	more := func(path string, got float64, than string, limit float64) {
		if got > limit*(1+1e-12) {
			c.bad(path, ErrRange, "%s is over %s, %s", num(got), than, num(limit))
		}
	}
	if q := r.Drive.Quadrants; q == 3 {
		c.bad("drive.quadrants", ErrRange, "3 is none of 1, 2, 4")
	}
	more("drive.bus_min_V", r.Drive.BusMin, "drive.bus_nominal_V", r.Drive.BusNominal)
	more("drive.bus_nominal_V", r.Drive.BusNominal, "drive.bus_max_V", r.Drive.BusMax)
	more("motor.current_continuous_A", r.Motor.CurrentContinuous, "motor.current_max_A", r.Motor.CurrentMax)
	more("limits.stall_volts_V", r.Limits.StallVolts, "limits.volts_V", max(r.Limits.Volts, 0.4*r.Motor.VoltageRated))
	more("limits.creep_speed_rpm", r.Limits.CreepSpeed, "limits.speed_rpm", max(r.Limits.Speed, 0.3*r.Motor.SpeedMax))
	more("limits.rest_speed_rpm", r.Limits.RestSpeed, "0.1 × limits.speed_rpm", 0.1*r.Limits.Speed)
	if least := 2*r.Timing.Heartbeat + 20; r.Timing.BoardTimeout < least {
		c.bad("timing.board_timeout_ms", ErrRange, "%s is under two heartbeats and 20 ms, %s", num(r.Timing.BoardTimeout), num(least))
	}
	if r.Checks.Interlock && len(r.Interlocks) == 0 {
		c.bad("checks.interlock", ErrMissing, "there is no [[interlock]] to check")
	}
}

func contains(l []string, s string) bool {
	for _, x := range l {
		if x == s {
			return true
		}
	}
	return false
}

func num(v float64) string { return strconv.FormatFloat(v, 'g', 6, 64) }

func unitAfter(u string) string {
	if u == "" || u == "1" {
		return ""
	}
	return " " + u
}

func unitIn(u string) string {
	if u == "" || u == "1" {
		return ""
	}
	return ", in " + u
}
