package simrig

import (
	"flag"
	"fmt"
	"os"
	"reflect"
	"strings"
	"testing"
)

var update = flag.Bool("update", false, "write the key tables of README.md anew")

// keyTables writes the tables of README.md from the tags of Config.
func keyTables() string {
	var b strings.Builder
	var walk func(t reflect.Type, path, doc string)
	walk = func(t reflect.Type, path, doc string) {
		type sub struct {
			t         reflect.Type
			path, doc string
		}
		var subs []sub
		title := "Top of the file"
		if path != "" {
			title = "`[" + path + "]`: " + doc
		}
		if path == "fault" {
			title = "`[[fault]]`: " + doc
		}
		var rows []string
		for i := range t.NumField() {
			f := t.Field(i)
			key, d := f.Tag.Get("toml"), f.Tag.Get("doc")
			ft := f.Type
			if ft.Kind() == reflect.Pointer || ft.Kind() == reflect.Slice && ft.Elem().Kind() == reflect.Struct {
				ft = ft.Elem()
			}
			if ft.Kind() == reflect.Struct {
				p := key
				if path != "" {
					p = path + "." + key
				}
				subs = append(subs, sub{ft, p, d})
				continue
			}
			rows = append(rows, fmt.Sprintf("| `%s` | %s | %s | %s | %s |", key, f.Tag.Get("unit"), rangeOf(f), defaultOf(f), d))
		}
		if len(rows) > 0 {
			fmt.Fprintf(&b, "### %s\n\n| key | unit | range | default | meaning |\n|---|---|---|---|---|\n%s\n\n", title, strings.Join(rows, "\n"))
		}
		for _, s := range subs {
			walk(s.t, s.path, s.doc)
		}
	}
	walk(reflect.TypeFor[Config](), "", "")
	b.WriteString("### The kinds of fault\n\n| kind | what it does | value |\n|---|---|---|\n")
	for _, k := range FaultKinds() {
		f := faultKinds[k]
		v := f.value
		if f.def != 0 {
			v += fmt.Sprintf("; default %g", f.def)
		}
		fmt.Fprintf(&b, "| `%s` | %s | %s |\n", k, f.does, v)
	}
	return b.String()
}

func rangeOf(f reflect.StructField) string {
	switch {
	case f.Tag.Get("one") != "":
		return "`" + strings.ReplaceAll(f.Tag.Get("one"), " ", "` `") + "`"
	case f.Type.Kind() == reflect.Bool:
		return "`true` `false`"
	case f.Type.Kind() == reflect.String:
		return "text, at most 80 bytes"
	case f.Type.Kind() == reflect.Slice:
		return "at most 16 words"
	}
	return strings.Replace(f.Tag.Get("range"), "..", " to ", 1)
}

func defaultOf(f reflect.StructField) string {
	d, has := f.Tag.Lookup("default")
	switch {
	case !has:
		return "**must be given**"
	case d == "":
		return "none"
	}
	return d
}

const keyMark = "<!-- keys: written from the tags of config.go by go test -run README -update -->\n"

func TestREADMEListsEveryKey(t *testing.T) {
	b, err := os.ReadFile("README.md")
	if err != nil {
		t.Fatal(err)
	}
	head, got, ok := strings.Cut(string(b), keyMark)
	if !ok {
		t.Fatal("README.md has lost the line that opens its tables")
	}
	want := "\n" + keyTables()
	if *update {
		if err := os.WriteFile("README.md", []byte(head+keyMark+want), 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	if got != want {
		t.Error("the tables of README.md are not those of config.go; go test -run README -update")
	}
}
