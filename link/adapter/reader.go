package adapter

import (
	"bytes"
	"math"
	"strings"
)

// Sample is one line: the values of Names, in SI units.
type Sample struct {
	Time   float64 // s since the first line
	Values []float64
}

// Stats counts lines.
type Stats struct {
	Samples  uint64
	Other    uint64 // lines that do not have the form, comments left out
	TooLong  uint64
	Backward uint64 // lines whose time does not go on; dropped
}

// Reader turns bytes into samples, in whatever chunks they come. It holds one
// line at most.
type Reader struct {
	Stats Stats

	a     *Adapter
	line  []byte
	over  bool
	begun bool
	first float64
	last  float64
	n     float64 // lines so far, where they carry no time
	wraps map[string]*wrapped
}

type wrapped struct {
	last, add float64
	begun     bool
}

// NewReader returns a Reader for the lines that a describes.
func NewReader(a *Adapter) *Reader {
	return &Reader{a: a, line: make([]byte, 0, LineMax), wraps: map[string]*wrapped{}}
}

// Pending is how many bytes of a line that has not ended are held.
func (r *Reader) Pending() int { return len(r.line) }

// Feed takes the next bytes and calls got for every sample that they complete.
func (r *Reader) Feed(b []byte, got func(Sample)) {
	for len(b) > 0 {
		i := bytes.IndexByte(b, '\n')
		part := b
		if i >= 0 {
			part = b[:i]
		}
		if room := LineMax - len(r.line); len(part) > room {
			r.over = true
		} else {
			r.line = append(r.line, part...)
		}
		if i < 0 {
			return
		}
		b = b[i+1:]
		r.end(got)
	}
}

func (r *Reader) end(got func(Sample)) {
	text, over := strings.TrimRight(string(r.line), "\r"), r.over
	r.line, r.over = r.line[:0], false
	switch {
	case over:
		r.Stats.TooLong++
		return
	case strings.TrimSpace(text) == "", r.a.Comment != "" && strings.HasPrefix(text, r.a.Comment):
		return
	}
	fields, ok := r.fields(text)
	if !ok {
		r.Stats.Other++
		return
	}
	s := Sample{}
	time := math.NaN()
	for i, n := range r.a.names {
		if n == "" {
			continue
		}
		c := r.a.Column[n]
		v, ok := c.value(strings.TrimSpace(fields[i]))
		if !ok {
			r.Stats.Other++
			return
		}
		v = r.unwrap(n, v, c.Wrap) + c.Offset
		if c.Scale != 0 {
			v *= c.Scale
		}
		s.Values = append(s.Values, v)
		if n == "time" {
			time = v
		}
	}
	if math.IsNaN(time) {
		time = r.n * r.a.Period
		r.n++
	}
	if !r.begun {
		r.begun, r.first, r.last = true, time, math.Inf(-1)
	}
	if time <= r.last {
		r.Stats.Backward++
		return
	}
	r.last = time
	s.Time = time - r.first
	r.Stats.Samples++
	got(s)
}

// fields are the texts of the columns, parallel to the names.
func (r *Reader) fields(text string) ([]string, bool) {
	if r.a.re != nil {
		m := r.a.re.FindStringSubmatch(text)
		return m, m != nil
	}
	var f []string
	if r.a.Separator == "" {
		f = strings.Fields(text)
	} else {
		f = strings.Split(text, r.a.Separator)
	}
	return f, len(f) == len(r.a.names)
}

// unwrap lets a counter that begins anew go on.
func (r *Reader) unwrap(name string, v, wrap float64) float64 {
	if wrap == 0 {
		return v
	}
	w := r.wraps[name]
	if w == nil {
		w = &wrapped{}
		r.wraps[name] = w
	}
	if w.begun {
		switch d := v - w.last; {
		case d < -wrap/2:
			w.add += wrap
		case d > wrap/2:
			w.add -= wrap
		}
	}
	w.begun, w.last = true, v
	return v + w.add
}
