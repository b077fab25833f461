package rig

import (
	"strconv"

	"github.com/pelletier/go-toml/v2/unstable"
)

// Place is where a value stands in a file, from 1.
type Place struct{ Line, Column int }

// Places maps the dotted path of every key to the place of its value. Tables
// of an array get their index in the path. The data is known to be valid TOML.
func Places(data []byte) map[string]Place {
	w := walker{at: map[string]Place{}, seen: map[string]int{}}
	w.p.Reset(data)
	for w.p.NextExpression() {
		e := w.p.Expression()
		switch e.Kind {
		case unstable.Table:
			w.table = w.path("", e.Key())
			w.note(w.table, e.Key())
		case unstable.ArrayTable:
			t := w.path("", e.Key())
			w.table = t + "." + strconv.Itoa(w.seen[t])
			w.seen[t]++
			w.note(w.table, e.Key())
		case unstable.KeyValue:
			w.value(w.table, e)
		}
	}
	return w.at
}

type walker struct {
	p     unstable.Parser
	at    map[string]Place
	seen  map[string]int
	table string
}

func (w *walker) path(base string, k unstable.Iterator) string {
	for k.Next() {
		if base != "" {
			base += "."
		}
		base += string(k.Node().Data)
	}
	return base
}

func (w *walker) note(path string, k unstable.Iterator) {
	if k.Next() {
		w.put(path, k.Node().Raw)
	}
}

func (w *walker) put(path string, r unstable.Range) {
	s := w.p.Shape(r).Start
	w.at[path] = Place{s.Line, s.Column}
}

func (w *walker) value(base string, kv *unstable.Node) {
	path := w.path(base, kv.Key())
	w.note(path, kv.Key())
	v := kv.Value()
	if v.Kind == unstable.InlineTable {
		for c := v.Children(); c.Next(); {
			w.value(path, c.Node())
		}
		return
	}
	if v.Kind == unstable.Array {
		i := 0
		for c := v.Children(); c.Next(); i++ {
			if n := c.Node(); n.Kind == unstable.InlineTable {
				for cc := n.Children(); cc.Next(); {
					w.value(path+"."+strconv.Itoa(i), cc.Node())
				}
			}
		}
	}
	if v.Raw.Length > 0 {
		w.put(path, v.Raw)
	}
}
