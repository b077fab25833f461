package main

import (
	"bytes"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

var updateNotices = flag.Bool("update-notices", false, "write notices.txt anew")

// The notices are those of exactly the modules that the program is linked with,
// on every system it is built for, word by word.
func TestNoticesAreThoseOfTheModules(t *testing.T) {
	want := collectNotices(t)
	if *updateNotices {
		if err := os.WriteFile("notices.txt", []byte(want), 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	if notices != want {
		t.Error("notices.txt is not what the modules carry; write it anew with: go test ./cmd/gainwright -run TestNotices -update-notices")
	}
	var out bytes.Buffer
	if code := run([]string{"version", "--licenses"}, &out, &out); code != 0 || !strings.Contains(out.String(), "go.bug.st/serial") {
		t.Errorf("version --licenses: exit %d, %d bytes", code, out.Len())
	}
}

// collectNotices asks the go command which modules are linked, and reads their licences.
func collectNotices(t *testing.T) string {
	t.Helper()
	dirs := map[string]string{}
	for _, system := range []string{"linux/amd64", "linux/arm64", "linux/arm", "windows/amd64", "darwin/arm64"} {
		goos, goarch, _ := strings.Cut(system, "/")
		c := exec.Command("go", "list", "-deps", "-f", "{{with .Module}}{{if not .Main}}{{.Path}} {{.Version}}\t{{.Dir}}{{end}}{{end}}", ".")
		c.Env = append(os.Environ(), "GOOS="+goos, "GOARCH="+goarch, "CGO_ENABLED=0")
		b, err := c.Output()
		if err != nil {
			t.Skipf("the go command cannot list modules here: %v", err)
		}
		for _, line := range strings.Split(string(b), "\n") {
			if name, dir, ok := strings.Cut(line, "\t"); ok {
				dirs[name] = dir
			}
		}
	}
	names := make([]string, 0, len(dirs))
	for n := range dirs {
		names = append(names, n)
	}
	slices.Sort(names)
	var w strings.Builder
	w.WriteString("Gainwright is built with the modules below. Each is under its own licence.\n")
	section := func(name, dir string) {
		files, _ := filepath.Glob(filepath.Join(dir, "*"))
		found := false
		for _, f := range files {
			up := strings.ToUpper(filepath.Base(f))
			if !strings.HasPrefix(up, "LICENSE") && !strings.HasPrefix(up, "LICENCE") && !strings.HasPrefix(up, "COPYING") && !strings.HasPrefix(up, "NOTICE") {
				continue
			}
			b, err := os.ReadFile(f)
			if err != nil {
				t.Fatal(err)
			}
			found = true
			fmt.Fprintf(&w, "\n== %s: %s\n\n%s\n", name, filepath.Base(f), strings.TrimSpace(strings.ReplaceAll(string(b), "\r\n", "\n")))
		}
		if !found { // some modules say it in their readme only
			b, _ := os.ReadFile(filepath.Join(dir, "README.md"))
			_, says, ok := strings.Cut(string(b), "\n## License\n")
			if !ok {
				t.Errorf("%s carries no licence in %s", name, dir)
			}
			fmt.Fprintf(&w, "\n== %s: README.md, section License\n\n%s\n", name, strings.TrimSpace(says))
		}
	}
	root, err := exec.Command("go", "env", "GOROOT").Output()
	if err != nil {
		t.Skipf("the go command does not say where it is: %v", err)
	}
	section("The Go runtime and standard library", strings.TrimSpace(string(root)))
	for _, n := range names {
		section(n, dirs[n])
	}
	return w.String()
}
