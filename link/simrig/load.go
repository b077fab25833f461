package simrig

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"os"
	"reflect"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"
)

// Errors of a board file; each is wrapped in a *FileError with its place.
var (
	ErrUnknownKey = errors.New("unknown key")
	ErrMissingKey = errors.New("key is missing")
	ErrRange      = errors.New("value out of range")
	ErrSyntax     = errors.New("cannot be read")
)

// FileError is what is wrong with a board file, and where.
type FileError struct {
	File         string
	Line, Column int // from 1; the line of the table where a key is missing from it
	Key          string
	Err          error
	Detail       string
}

func (e *FileError) Error() string {
	s := fmt.Sprintf("%s:%d:%d: ", e.File, e.Line, e.Column)
	if e.Key != "" {
		s += e.Key + ": "
	}
	s += e.Err.Error()
	if e.Detail != "" {
		s += ": " + e.Detail
	}
	return s
}

func (e *FileError) Unwrap() error { return e.Err }

// Load reads a BOARD.toml.
func Load(path string) (Config, error) {
	b, err := os.ReadFile(path)
	if err != nil {
		return Config{}, err
	}
	return Parse(path, b)
}

// Parse reads the content of a BOARD.toml; file is the name for errors. Unknown
// and missing keys, values out of range, not-a-numbers and infinities are
// *FileError.
func Parse(file string, content []byte) (Config, error) {
	var c Config
	places, err := locate(file, content)
	if err != nil {
		return Config{}, err
	}
	d := toml.NewDecoder(bytes.NewReader(content)).DisallowUnknownFields()
	if err := d.Decode(&c); err != nil {
		return Config{}, decodeError(file, err)
	}
	r := reader{file: file, places: places}
	r.table(reflect.ValueOf(&c).Elem(), "")
	if r.err == nil {
		r.together(&c)
	}
	if r.err != nil {
		return Config{}, r.err
	}
	return c, nil
}

func decodeError(file string, err error) error {
	var strict *toml.StrictMissingError
	if errors.As(err, &strict) && len(strict.Errors) > 0 {
		e := &strict.Errors[0]
		line, col := e.Position()
		return &FileError{File: file, Line: line, Column: col, Key: strings.Join(e.Key(), "."), Err: ErrUnknownKey}
	}
	var bad *toml.DecodeError
	if errors.As(err, &bad) {
		line, col := bad.Position()
		return &FileError{File: file, Line: line, Column: col, Key: strings.Join(bad.Key(), "."), Err: ErrSyntax,
			Detail: strings.TrimPrefix(bad.Error(), "toml: ")}
	}
	return fmt.Errorf("%s: %w", file, err)
}

type place struct{ line, column int }

// locate finds the place of every key and table, by their dotted path; tables of
// an array have their index in brackets.
func locate(file string, content []byte) (map[string]place, error) {
	places := map[string]place{"": {1, 1}}
	count := map[string]int{}
	prefix := ""
	var p unstable.Parser
	p.Reset(content)
	for p.NextExpression() {
		n := p.Expression()
		path, at := keyOf(&p, n)
		switch n.Kind {
		case unstable.Table:
			prefix = path
		case unstable.ArrayTable:
			prefix = fmt.Sprintf("%s[%d]", path, count[path])
			count[path]++
		case unstable.KeyValue:
			if prefix != "" {
				path = prefix + "." + path
			}
			locateInline(&p, n.Value(), path, places)
			places[path] = at
			continue
		default:
			continue
		}
		places[prefix] = at
	}
	if err := p.Error(); err != nil {
		var bad *unstable.ParserError
		if errors.As(err, &bad) {
			s := p.Shape(p.Range(bad.Highlight)).Start
			return nil, &FileError{File: file, Line: s.Line, Column: s.Column, Err: ErrSyntax, Detail: bad.Message}
		}
		return nil, fmt.Errorf("%s: %w", file, err)
	}
	return places, nil
}

func locateInline(p *unstable.Parser, n *unstable.Node, prefix string, places map[string]place) {
	if n.Kind != unstable.InlineTable {
		return
	}
	for it := n.Children(); it.Next(); {
		path, at := keyOf(p, it.Node())
		path = prefix + "." + path
		locateInline(p, it.Node().Value(), path, places)
		places[path] = at
	}
}

func keyOf(p *unstable.Parser, n *unstable.Node) (string, place) {
	var parts []string
	var at place
	for it := n.Key(); it.Next(); {
		k := it.Node()
		if len(parts) == 0 {
			s := p.Shape(k.Raw).Start
			at = place{s.Line, s.Column}
		}
		parts = append(parts, string(k.Data))
	}
	return strings.Join(parts, "."), at
}

// reader walks a decoded Config along its tags: it fills in defaults and keeps
// the first error.
type reader struct {
	file   string
	places map[string]place
	err    error
}

func (r *reader) fail(path string, err error, detail string) {
	if r.err != nil {
		return
	}
	at := path
	p, ok := r.places[at]
	for !ok {
		if i := strings.LastIndexByte(at, '.'); i >= 0 {
			at = at[:i]
		} else {
			at = ""
		}
		p, ok = r.places[at]
	}
	r.err = &FileError{File: r.file, Line: p.line, Column: p.column, Key: path, Err: err, Detail: detail}
}

func (r *reader) table(v reflect.Value, path string) {
	for i := range v.NumField() {
		f, x := v.Type().Field(i), v.Field(i)
		key := f.Tag.Get("toml")
		if path != "" {
			key = path + "." + key
		}
		switch {
		case x.Kind() == reflect.Struct:
			r.table(x, key)
		case x.Kind() == reflect.Pointer:
			if !x.IsNil() {
				r.table(x.Elem(), key)
			}
		case x.Kind() == reflect.Slice && x.Type().Elem().Kind() == reflect.Struct:
			for j := range x.Len() {
				r.table(x.Index(j), fmt.Sprintf("%s[%d]", key, j))
			}
		default:
			r.value(f.Tag, x, key)
		}
	}
}

func (r *reader) value(tag reflect.StructTag, x reflect.Value, key string) {
	if _, given := r.places[key]; !given {
		def, has := tag.Lookup("default")
		if !has {
			r.fail(key, ErrMissingKey, tag.Get("doc"))
			return
		}
		setDefault(x, def)
	}
	switch x.Kind() {
	case reflect.Float64:
		r.inRange(tag, x.Float(), key)
	case reflect.Int:
		r.inRange(tag, float64(x.Int()), key)
	case reflect.Uint64:
		r.inRange(tag, float64(x.Uint()), key)
	case reflect.String:
		r.text(tag, x.String(), key)
	case reflect.Slice:
		for i := range x.Len() {
			r.word(x.Index(i).String(), key)
		}
	}
}

func setDefault(x reflect.Value, def string) {
	switch x.Kind() {
	case reflect.Float64:
		f, _ := strconv.ParseFloat(def, 64)
		x.SetFloat(f)
	case reflect.Int:
		n, _ := strconv.ParseInt(def, 10, 64)
		x.SetInt(n)
	case reflect.Uint64:
		n, _ := strconv.ParseUint(def, 10, 64)
		x.SetUint(n)
	case reflect.Bool:
		x.SetBool(def == "true")
	case reflect.String:
		x.SetString(def)
	}
}

func (r *reader) inRange(tag reflect.StructTag, f float64, key string) {
	lo, hi, _ := strings.Cut(tag.Get("range"), "..")
	a, _ := strconv.ParseFloat(lo, 64)
	b, _ := strconv.ParseFloat(hi, 64)
	if math.IsNaN(f) || f < a || f > b {
		unit := tag.Get("unit")
		if unit != "" {
			unit = " " + unit
		}
		r.fail(key, ErrRange, fmt.Sprintf("%g%s is outside %s to %s", f, unit, lo, hi))
	}
}

func (r *reader) text(tag reflect.StructTag, s, key string) {
	if one := tag.Get("one"); one != "" {
		for _, w := range strings.Fields(one) {
			if s == w {
				return
			}
		}
		r.fail(key, ErrRange, fmt.Sprintf("%q is none of %s", s, strings.ReplaceAll(one, " ", ", ")))
		return
	}
	if len(s) > 80 {
		r.fail(key, ErrRange, "longer than 80 bytes")
	}
	for _, c := range []byte(s) {
		if c < 0x20 || c > 0x7E {
			r.fail(key, ErrRange, "holds bytes outside printable ASCII")
		}
	}
}

func (r *reader) word(s, key string) {
	if s == "" || len(s) > 16 || strings.ContainsFunc(s, func(c rune) bool { return c <= 0x20 || c > 0x7E }) {
		r.fail(key, ErrRange, fmt.Sprintf("%q is not one word of at most 16 printable characters", s))
	}
}
