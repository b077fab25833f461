package main

import (
	"encoding/json"
	"go/ast"
	"go/parser"
	"go/token"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// rooms is the house: for each package what it may import of ours, and what it
// may not touch. Arrows run down only. DEVELOPERS.md shows the same as a picture.
var rooms = map[string]struct{ ours, forbidden []string }{
	"protocol/si":               {nil, []string{"os", "sync", "time", "io"}},
	"protocol":                  {[]string{"protocol/si"}, []string{"io", "os", "sync", "net"}},
	"protocol/firmware":         {[]string{"protocol"}, nil},
	"protocol/firmware/emulate": {nil, nil},
	"link":                      {nil, nil},
	"link/serialport":           {[]string{"link"}, nil},
	"link/ptyport":              {[]string{"link"}, nil},
	"link/laptop":               {nil, []string{"os"}},
	"link/tape":                 {[]string{"link"}, nil},
	"link/linktest":             {[]string{"link"}, nil},
	"link/simrig":               {[]string{"link", "protocol", "protocol/si"}, nil},
	"link/adapter":              {nil, []string{"net"}},
	"link/simrig/family":        {nil, []string{"os"}},
	"safety":                    {[]string{"protocol", "protocol/si"}, []string{"io", "os", "sync", "gonum.org/v1/gonum"}},
	"safety/rig":                {[]string{"safety", "protocol/si"}, []string{"os"}},
	"safety/safetytest":         {[]string{"safety", "protocol", "protocol/si"}, nil},
	"safety/sim":                {[]string{"safety", "safety/safetytest", "protocol", "protocol/si"}, nil},
	"safety/conformance":        {[]string{"protocol", "link"}, []string{"os"}},
	"safety/supervisor":         {[]string{"safety", "protocol", "protocol/si", "link"}, []string{"os"}},
	"tune/trace":                {[]string{"protocol/si"}, nil},
	"tune/model":                {[]string{"protocol/si"}, []string{"os"}},
	"tune/excite":               {[]string{"safety", "protocol/si"}, []string{"os"}},
	"tune/identify":             {[]string{"tune/trace", "tune/model", "protocol/si"}, []string{"os"}},
	"tune/design":               {[]string{"tune/model", "protocol/si"}, []string{"os"}},
	"tune/jobfile":              {[]string{"tune/job", "safety/rig"}, []string{"os"}},
	"tune/forecast":             {[]string{"tune/model", "safety", "protocol/si"}, []string{"os"}},
	"tune/sheet":                {[]string{"tune/sheet/plain", "tune/trace", "tune/model", "tune/identify", "tune/design", "safety", "safety/rig", "protocol/si"}, nil},
	"tune/sheet/plain":          {nil, []string{"os"}},
	"tune/job": {[]string{"tune/trace", "tune/model", "tune/excite", "tune/identify", "tune/design", "tune/forecast", "tune/sheet", "tune/sheet/plain",
		"safety", "safety/rig", "protocol", "protocol/si"}, []string{"sync", "net"}},
	"tune/bench": {[]string{"tune/job", "tune/trace", "tune/model", "tune/excite", "tune/identify", "tune/design", "tune/forecast", "tune/sheet", "tune/sheet/plain",
		"safety", "safety/rig", "safety/supervisor", "protocol", "protocol/si", "link", "link/tape", "link/ptyport", "link/simrig"}, nil},
	"tui/strip":   {nil, []string{"os"}},
	"tui/palette": {nil, []string{"os"}},
	"tui/tap":     {nil, nil},
	"tui":         {[]string{"tui/strip", "tui/palette", "tune/job", "tune/sheet/plain", "protocol/si"}, []string{"os"}},
}

// alone are imports that only the packages named may spell.
var alone = map[string][]string{
	"go.bug.st/serial":                   {"link/serialport"},
	"github.com/charmbracelet/bubbletea": {"tui"},
	"net":                                {},
	"net/http":                           {},
	"net/rpc":                            {},
	"net/smtp":                           {},
}

type listed struct {
	ImportPath string
	Imports    []string
}

func packages(t *testing.T) []listed {
	t.Helper()
	out, err := exec.Command("go", "list", "-json=ImportPath,Imports", "gainwright/...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	var all []listed
	for d := json.NewDecoder(strings.NewReader(string(out))); d.More(); {
		var p listed
		if err := d.Decode(&p); err != nil {
			t.Fatal(err)
		}
		all = append(all, p)
	}
	return all
}

func TestArrowsRunDown(t *testing.T) {
	for _, p := range packages(t) {
		name := strings.TrimPrefix(p.ImportPath, "gainwright/")
		if strings.HasPrefix(name, "cmd/") {
			continue
		}
		room, known := rooms[name]
		if !known {
			if !strings.Contains(name, "internal") && name != "gainwright" {
				t.Errorf("%s has no row in the table of rooms: say what it may import", name)
			}
			continue
		}
		for _, i := range p.Imports {
			if own, ok := strings.CutPrefix(i, "gainwright/"); ok && !slices.Contains(room.ours, own) {
				t.Errorf("%s imports %s: the arrow is not in the table", name, own)
			}
			for _, f := range room.forbidden {
				if i == f || strings.HasPrefix(i, f+"/") && f != "io" {
					t.Errorf("%s touches %s", name, i)
				}
			}
			for lib, who := range alone {
				if (i == lib || lib != "net" && strings.HasPrefix(i, lib+"/")) && !slices.Contains(who, name) {
					t.Errorf("%s imports %s: only %v may", name, i, who)
				}
			}
		}
	}
}

// The top level holds what the card allows and no Go file.
func TestTopLevel(t *testing.T) {
	allowed := strings.Fields("cmd tui link protocol tune safety testdata go.mod go.sum README.md DEVELOPERS.md SAFETY.md")
	entries, err := os.ReadDir("../..")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		if n := e.Name(); n[0] != '.' && !slices.Contains(allowed, n) {
			t.Errorf("the top level holds %s", n)
		}
	}
}

// banned are calls that belong elsewhere: the packages that decide bring no
// clock of their own.
var banned = []struct {
	dirs       []string
	call, what string
}{
	{[]string{"protocol", "safety", "safety/rig", "tune/model", "tune/design", "tune/identify", "tune/excite", "tune/forecast", "tune/job"}, "time.Now", "time comes in events and arguments"},
	{[]string{"protocol", "safety", "tune/model", "tune/design", "tune/identify", "tune/excite", "tune/forecast", "tune/job", "tui"}, "time.Sleep", "nothing here waits"},
	{[]string{"tui"}, "fmt.Print", "the screens draw, they do not print"},
	{[]string{"tui"}, "fmt.Println", "the screens draw, they do not print"},
}

func TestBannedCalls(t *testing.T) {
	for _, b := range banned {
		for _, dir := range b.dirs {
			files, _ := filepath.Glob(filepath.Join("../..", dir, "*.go"))
			if len(files) == 0 {
				t.Errorf("%s holds no Go file", dir)
			}
			for _, f := range files {
				if strings.HasSuffix(f, "_test.go") {
					continue
				}
				fset := token.NewFileSet()
				tree, err := parser.ParseFile(fset, f, nil, 0)
				if err != nil {
					t.Fatal(err)
				}
				ast.Inspect(tree, func(n ast.Node) bool {
					if s, ok := n.(*ast.SelectorExpr); ok {
						if x, ok := s.X.(*ast.Ident); ok && x.Name+"."+s.Sel.Name == b.call {
							t.Errorf("%s: %s: %s", fset.Position(n.Pos()), b.call, b.what)
						}
					}
					return true
				})
			}
		}
	}
}

// tidyExceptions are files over the length, by name; the list may only shrink.
const fileMax = 420

var tidyExceptions = map[string]bool{}

func TestFilesAreShort(t *testing.T) {
	err := filepath.WalkDir("../..", func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() || !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") {
			return err
		}
		b, err := os.ReadFile(path)
		name := strings.TrimPrefix(filepath.ToSlash(path), "../../")
		if n := strings.Count(string(b), "\n"); n > fileMax && !tidyExceptions[name] {
			t.Errorf("%s has %d lines, more than %d: is it one idea?", name, n, fileMax)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
}
