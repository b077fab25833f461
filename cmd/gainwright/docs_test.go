package main

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"gainwright/tui"
)

func read(t *testing.T, path string) string {
	t.Helper()
	b, err := os.ReadFile(filepath.Join("../..", path))
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// The key table of the README is the one that the console works by.
func TestReadmeHasTheKeys(t *testing.T) {
	text := read(t, "README.md")
	_, rest, ok := strings.Cut(text, "<!-- keys -->\n")
	table, _, ok2 := strings.Cut(rest, "<!-- end of keys -->")
	if !ok || !ok2 || table != tui.KeyTableMarkdown() {
		t.Errorf("the README's key table differs from the console's; it should read:\n%s", tui.KeyTableMarkdown())
	}
}

// Every command that there is stands in the README, and none that there is not.
func TestReadmeHasTheCommands(t *testing.T) {
	text := read(t, "README.md")
	_, table, _ := strings.Cut(text, "## Commands")
	table, _, _ = strings.Cut(table, "\n\nEvery command")
	var names []string
	for _, c := range newRoot().Commands() {
		names = append(names, c.Name())
		if n := c.Name(); n != "help" && !regexp.MustCompile("`"+n+"[` ]").MatchString(table) {
			t.Errorf("the README says nothing of %q", n)
		}
	}
	for _, m := range regexp.MustCompile(`(?m)^\| (.*?) \|`).FindAllStringSubmatch(table, -1) {
		for _, c := range regexp.MustCompile("`([a-z]+)").FindAllStringSubmatch(m[1], -1) {
			if !strings.Contains(" "+strings.Join(names, " ")+" completion ", " "+c[1]+" ") {
				t.Errorf("the README names a command %q that does not exist", c[1])
			}
		}
	}
}

// Links of the texts lead to files, and files named in backquotes exist.
func TestTextsNameWhatExists(t *testing.T) {
	link := regexp.MustCompile(`\]\(([^)#:]+)\)`)
	file := regexp.MustCompile("`((?:cmd|tui|link|protocol|tune|safety|testdata|\\.ci)/[A-Za-z0-9_./-]*[A-Za-z0-9_/-])`")
	for _, doc := range []string{"README.md", "DEVELOPERS.md", "SAFETY.md", "protocol/SPEC.md", "safety/rig/README.md", "link/simrig/README.md", "protocol/firmware/README.md"} {
		text := read(t, doc)
		for _, m := range link.FindAllStringSubmatch(text, -1) {
			if _, err := os.Stat(filepath.Join("../..", filepath.Dir(doc), m[1])); err != nil {
				t.Errorf("%s links to %s, which is not there", doc, m[1])
			}
		}
		for _, m := range file.FindAllStringSubmatch(text, -1) {
			if strings.Contains(m[1], "NAME") {
				continue // stands for any
			}
			if _, err := os.Stat(filepath.Join("../..", m[1])); err != nil {
				t.Errorf("%s names %s, which is not there", doc, m[1])
			}
		}
	}
}

// The first paragraph of the README states the job, and the two commands follow.
func TestReadmeOpensWithTheJob(t *testing.T) {
	parts := strings.SplitN(read(t, "README.md"), "\n\n", 4)
	if len(parts) < 4 || !strings.Contains(parts[1], "keeps what it found") || !strings.Contains(parts[2], "go run ./cmd/gainwright demo\ngo test ./...") {
		t.Errorf("it opens with %q", parts[:3])
	}
}

// Every promise of SAFETY.md names tests, and every test that it names exists.
func TestSafetyNamesTestsThatExist(t *testing.T) {
	code := allTests(t)
	name := regexp.MustCompile("`(Test[A-Za-z0-9]+)`")
	promises := regexp.MustCompile(`(?m)^\*\*S(\d+) `).FindAllStringSubmatchIndex(read(t, "SAFETY.md"), -1)
	text := read(t, "SAFETY.md")
	if len(promises) < 10 {
		t.Fatalf("only %d promises found", len(promises))
	}
	for i, at := range promises {
		end := strings.Index(text[at[0]:], "\n\n")
		part := text[at[0] : at[0]+end]
		tests := name.FindAllStringSubmatch(part, -1)
		if len(tests) == 0 {
			t.Errorf("promise S%d names no test", i+1)
		}
		for _, m := range tests {
			if !strings.Contains(code, "func "+m[1]+"(") {
				t.Errorf("S%d names %s, which does not exist", i+1, m[1])
			}
		}
	}
}

// allTests is the text of every test file.
func allTests(t *testing.T) string {
	t.Helper()
	var code strings.Builder
	err := filepath.WalkDir("../..", func(path string, d os.DirEntry, err error) error {
		if err == nil && strings.HasSuffix(path, "_test.go") {
			b, e := os.ReadFile(path)
			code.Write(b)
			err = e
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return code.String()
}

// Every test or benchmark that DEVELOPERS.md names exists.
func TestDevelopersNamesTestsThatExist(t *testing.T) {
	code := allTests(t)
	for _, m := range regexp.MustCompile("`((?:Test|Benchmark)[A-Za-z0-9]+)`").FindAllStringSubmatch(read(t, "DEVELOPERS.md"), -1) {
		if !strings.Contains(code, "func "+m[1]+"(") {
			t.Errorf("DEVELOPERS.md names %s, which does not exist", m[1])
		}
	}
}
