// Package jobfile reads a job that was written down beforehand: which steps in which
// order, at which size, held to which targets, what is ticked before anything moves,
// and who signs. A job file permits nothing. Every arm still needs its keys, and the
// envelope of the rig file stays as it is.
package jobfile

import (
	"bytes"
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"

	"gainwright/safety/rig"
	"gainwright/tune/job"
)

// Modes of a job file.
const (
	Drive    = "drive"
	LookOnly = "look-only"
)

// Bounds of a job file.
const (
	sizeLeast, sizeMost = 30, 150 // % of what is proposed
	nameMost            = 60      // characters
	noteMost            = 200
	signsMost           = 4
	checklistMost       = 30
	msLeast, msMost     = 1.2, 2.0
)

// File is a job file. A key that is left out keeps what the rig file or the program
// says.
type File struct {
	Name      string   `toml:"name"`
	Rig       string   `toml:"rig"`  // name in the rig file that it is for; "": any
	Mode      string   `toml:"mode"` // drive or look-only
	Checklist []string `toml:"checklist"`
	Signs     []string `toml:"signs"`
	Targets   Targets  `toml:"targets"`
	Steps     []Step   `toml:"step"`

	Text []byte `toml:"-"` // as read
}

// Targets are what the job is held to.
type Targets struct {
	Overshoot *float64 `toml:"overshoot_percent"` // %
	Settling  *float64 `toml:"settling_time_s"`   // s
	Ms        *float64 `toml:"ms_max"`            // robustness bound of the design
}

// Step is one step in its turn.
type Step struct {
	Do      string   `toml:"do"`           // id of a step of the job path
	Size    *float64 `toml:"size_percent"` // of what is proposed, where the step has a size
	Note    string   `toml:"note"`         // shown with the step
	Refused string   `toml:"refused"`      // stop (default) or go-on
}

// Parse reads a job file. name is for errors only. The error joins *rig.Error values,
// each with its place, in the order of the file.
func Parse(name string, data []byte) (File, error) {
	f := File{Mode: Drive, Text: data}
	dec := toml.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	if err := dec.Decode(&f); err != nil {
		return File{}, decodeErrors(name, err)
	}
	c := checker{name: name, f: &f, at: rig.Places(data)}
	c.head()
	c.targets()
	c.steps()
	if len(c.errs) > 0 {
		slices.SortStableFunc(c.errs, func(a, b *rig.Error) int { return cmp.Or(cmp.Compare(a.Line, b.Line), cmp.Compare(a.Key, b.Key)) })
		all := make([]error, len(c.errs))
		for i, e := range c.errs {
			all[i] = e
		}
		return File{}, errors.Join(all...)
	}
	return f, nil
}

func decodeErrors(name string, err error) error {
	var strict *toml.StrictMissingError
	if errors.As(err, &strict) {
		var all []error
		for i := range strict.Errors {
			d := &strict.Errors[i]
			line, column := d.Position()
			all = append(all, &rig.Error{File: name, Line: line, Column: column, Key: strings.Join(d.Key(), "."), Err: rig.ErrUnknownKey,
				Message: "no such key in a job file; there are name, rig, mode, checklist, signs, targets and step"})
		}
		return errors.Join(all...)
	}
	e := &rig.Error{File: name, Err: rig.ErrSyntax, Message: strings.TrimPrefix(err.Error(), "toml: ")}
	var d *toml.DecodeError
	if errors.As(err, &d) {
		e.Line, e.Column = d.Position()
		e.Key, e.Message = strings.Join(d.Key(), "."), strings.TrimPrefix(d.Error(), "toml: ")
	}
	return e
}

type checker struct {
	name string
	f    *File
	at   map[string]rig.Place
	errs []*rig.Error
}

func (c *checker) bad(key string, kind error, format string, args ...any) {
	p := c.at[key]
	for k := key; p.Line == 0 && strings.Contains(k, "."); p = c.at[k] {
		k = k[:strings.LastIndexByte(k, '.')]
	}
	c.errs = append(c.errs, &rig.Error{File: c.name, Line: p.Line, Column: p.Column, Key: key, Err: kind, Message: fmt.Sprintf(format, args...)})
}

func (c *checker) head() {
	f := c.f
	if f.Name == "" || len([]rune(f.Name)) > nameMost {
		c.bad("name", rig.ErrMissing, "give the job a name of at most %d characters", nameMost)
	}
	if f.Mode != Drive && f.Mode != LookOnly {
		c.bad("mode", rig.ErrRange, "%q is neither %s nor %s", f.Mode, Drive, LookOnly)
	}
	for key, l := range map[string]struct {
		lines []string
		most  int
	}{"checklist": {f.Checklist, checklistMost}, "signs": {f.Signs, signsMost}} {
		if len(l.lines) > l.most {
			c.bad(key, rig.ErrRange, "%d lines are more than %d", len(l.lines), l.most)
		}
		for i, s := range l.lines {
			if strings.TrimSpace(s) == "" || len([]rune(s)) > noteMost {
				c.bad(key, rig.ErrRange, "line %d is empty or longer than %d characters", i+1, noteMost)
			}
		}
	}
}

func (c *checker) targets() {
	for key, t := range map[string]struct {
		v        *float64
		min, max float64
	}{"overshoot_percent": {c.f.Targets.Overshoot, 0, 100}, "settling_time_s": {c.f.Targets.Settling, 0, 1000}, "ms_max": {c.f.Targets.Ms, msLeast, msMost}} {
		if t.v != nil && !(*t.v >= t.min && *t.v <= t.max) {
			c.bad("targets."+key, rig.ErrRange, "%g is not from %g to %g", *t.v, t.min, t.max)
		}
	}
}

// lookSteps are what a look-only job may have: nothing is written to the board and
// nothing moves.
var lookSteps = []job.StepID{job.StepPort, job.StepIdentity, job.StepAsLeft, job.StepCard}

func (c *checker) steps() {
	if len(c.f.Steps) == 0 {
		c.bad("step", rig.ErrMissing, "a job needs at least one [[step]] with a do")
	}
	done := map[job.StepID]bool{job.StepPort: true}
	for i, s := range c.f.Steps {
		key := "step." + strconv.Itoa(i)
		id := job.StepID(s.Do)
		info, known := job.Lookup(id)
		if !known {
			c.bad(key+".do", rig.ErrRange, "no step is called %q; there are %s", s.Do, strings.Join(ids(), ", "))
			continue
		}
		if done[id] && id != job.StepPort {
			c.bad(key+".do", rig.ErrRange, "%s stands there twice; a step is repeated by a person, from the path", s.Do)
		}
		if c.f.Mode == LookOnly && !slices.Contains(lookSteps, id) {
			c.bad(key+".do", rig.ErrRange, "%s is not a step of a look-only job: it writes to the board, moves something or asks for it", s.Do)
		}
		for _, need := range info.NeededSteps() {
			if !done[need] {
				c.bad(key+".do", rig.ErrRange, "%s needs %s: put that before it", s.Do, need)
			}
		}
		if s.Size != nil && (math.IsNaN(*s.Size) || *s.Size < sizeLeast || *s.Size > sizeMost) {
			c.bad(key+".size_percent", rig.ErrRange, "%g is not from %d to %d", *s.Size, sizeLeast, sizeMost)
		}
		if s.Size != nil && !info.Sized {
			c.bad(key+".size_percent", rig.ErrRange, "%s has no size", s.Do)
		}
		if len([]rune(s.Note)) > noteMost {
			c.bad(key+".note", rig.ErrRange, "longer than %d characters", noteMost)
		}
		if s.Refused != "" && s.Refused != "stop" && s.Refused != "go-on" {
			c.bad(key+".refused", rig.ErrRange, "%q is neither stop nor go-on", s.Refused)
		}
		done[id] = true
	}
}

func ids() (l []string) {
	for _, p := range job.Path {
		l = append(l, string(p.ID))
	}
	return l
}

// Order is the file as a job takes it.
func (f File) Order() *job.Order {
	o := &job.Order{Name: f.Name, Text: f.Text, Rig: f.Rig, LookOnly: f.Mode == LookOnly, Checklist: f.Checklist, Signs: f.Signs,
		Overshoot: f.Targets.Overshoot, Settling: f.Targets.Settling}
	if f.Targets.Ms != nil {
		o.MsMax = *f.Targets.Ms
	}
	for _, s := range f.Steps {
		t := job.Ordered{Step: job.StepID(s.Do), Note: s.Note, Size: 1, GoOn: s.Refused == "go-on"}
		if s.Size != nil {
			t.Size = *s.Size / 100
		}
		o.Steps = append(o.Steps, t)
	}
	return o
}
