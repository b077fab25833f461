package jobfile

import (
	"errors"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"gainwright/safety/rig"
	"gainwright/tune/job"
)

func TestExampleFilesAreRead(t *testing.T) {
	for name, want := range map[string]struct {
		steps int
		look  bool
	}{"retune.toml": {20, false}, "look.toml": {3, true}} {
		path := filepath.Join("../../testdata/jobs", name)
		text, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		f, err := Parse(path, text)
		if err != nil {
			t.Fatal(err)
		}
		if o := f.Order(); len(o.Steps) != want.steps || o.LookOnly != want.look || o.Name == "" {
			t.Errorf("%s: %+v", name, o)
		}
	}
}

// Every mistake has its place and a sentinel, and none is read over.
func TestMistakesHaveTheirPlace(t *testing.T) {
	head := "name = \"n\"\n"
	for text, want := range map[string]struct {
		line, column int
		err          error
		words        string
	}{
		"name = \"n\"\n":                                                    {0, 0, rig.ErrMissing, "at least one"},
		"[[step]]\ndo = \"identity\"\n":                                     {0, 0, rig.ErrMissing, "name"},
		head + "speed = 3\n[[step]]\ndo=\"identity\"\n":                     {2, 1, rig.ErrUnknownKey, "no such key"},
		head + "mode = \"auto\"\n[[step]]\ndo = \"identity\"\n":             {2, 8, rig.ErrRange, "look-only"},
		head + "[[step]]\ndo = \"identify\"\n":                              {3, 6, rig.ErrRange, "there are port"},
		head + "[[step]]\ndo = \"count\"\n":                                 {3, 6, rig.ErrRange, "needs identity"},
		head + "[[step]]\ndo = \"identity\"\n[[step]]\ndo = \"identity\"\n": {5, 6, rig.ErrRange, "twice"},
		head + "[[step]]\ndo = \"identity\"\nsize_percent = 80\n":           {4, 16, rig.ErrRange, "no size"},
		head + "[[step]]\ndo = \"identity\"\nrefused = \"never\"\n":         {4, 11, rig.ErrRange, "go-on"},
		head + "mode = \"look-only\"\n[[step]]\ndo = \"identity\"\n[[step]]\ndo = \"count\"\n": {
			6, 6, rig.ErrRange, "not a step of a look-only job"},
		head + "[targets]\nms_max = 1.1\n[[step]]\ndo = \"identity\"\n":    {3, 10, rig.ErrRange, "1.2 to 2"},
		head + "[targets]\nms_max = nan\n[[step]]\ndo = \"identity\"\n":    {3, 10, rig.ErrRange, "NaN"},
		head + "checklist = [\"a\", \" \"]\n[[step]]\ndo = \"identity\"\n": {2, 1, rig.ErrRange, "line 2"},
		head + "signs = \"me\"\n[[step]]\ndo = \"identity\"\n":             {2, 9, rig.ErrSyntax, "signs"},
		head + "[[step]\ndo = \"identity\"\n":                              {2, 7, rig.ErrSyntax, ""},
	} {
		_, err := Parse("x.toml", []byte(text))
		var e *rig.Error
		if !errors.As(err, &e) || !errors.Is(err, want.err) || !strings.Contains(err.Error(), want.words) {
			t.Errorf("%q: %v", text, err)
			continue
		}
		if want.line > 0 && (e.Line != want.line || e.Column != want.column) {
			t.Errorf("%q: at %d:%d, want %d:%d: %v", text, e.Line, e.Column, want.line, want.column, err)
		}
	}
}

func FuzzParse(f *testing.F) {
	f.Add([]byte("name = \"n\"\n[[step]]\ndo = \"identity\"\nsize_percent = 80\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		file, err := Parse("f", text)
		if err != nil {
			return
		}
		for i, s := range file.Order().Steps {
			if _, known := job.Lookup(s.Step); !known || s.Size < 0.3 || s.Size > 1.5 {
				t.Fatalf("step %d: %+v", i, s)
			}
		}
	})
}

// The README's table has every key of a job file and no other.
func TestREADMEHasEveryKey(t *testing.T) {
	b, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	_, rest, _ := strings.Cut(string(b), "## A job written down\n")
	text, _, _ := strings.Cut(rest, "\n## ")
	want := map[string]bool{}
	var walk func(prefix string, f reflect.Type)
	walk = func(prefix string, f reflect.Type) {
		for i := range f.NumField() {
			key := f.Field(i).Tag.Get("toml")
			switch in := f.Field(i).Type; {
			case key == "-":
			case in.Kind() == reflect.Struct:
				walk(prefix+key+".", in)
			case in.Kind() == reflect.Slice && in.Elem().Kind() == reflect.Struct:
				walk(prefix+key+".", in.Elem())
			default:
				want["| `"+prefix+key+"` |"] = true
			}
		}
	}
	walk("", reflect.TypeFor[File]())
	for key := range want {
		if strings.Count(text, key) != 1 {
			t.Errorf("%s stands there %d times", key, strings.Count(text, key))
		}
	}
	if n := strings.Count(text, "\n| `"); n != len(want) {
		t.Errorf("%d rows, %d keys", n, len(want))
	}
}
