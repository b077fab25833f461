package main

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"gainwright/tui"
)

// The page names every command, every flag and every key, twice the same.
func TestManPageIsWholeAndReproducible(t *testing.T) {
	var a, b bytes.Buffer
	if err := writeMan(&a, newRoot()); err != nil {
		t.Fatal(err)
	}
	if err := writeMan(&b, newRoot()); err != nil {
		t.Fatal(err)
	}
	if a.String() != b.String() {
		t.Error("two pages from one source differ")
	}
	for _, c := range newRoot().Commands() {
		if !c.Hidden && c.Name() != "help" && !strings.Contains(a.String(), ".SS "+roff(c.UseLine())+"\n") {
			t.Errorf("the page says nothing of %q", c.Name())
		}
	}
	for _, k := range tui.KeyTable() {
		if !strings.Contains(a.String(), roff(k.Does)) {
			t.Errorf("the page says nothing of the key %q", k.Keys)
		}
	}
	man, err := exec.LookPath("man")
	if err != nil {
		t.Log("no man here: the page was not formatted")
		return
	}
	page := filepath.Join(t.TempDir(), "gainwright.1")
	if err := os.WriteFile(page, a.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command(man, "--warnings", "-l", page).CombinedOutput()
	if err != nil || !bytes.Contains(out, []byte("dryrun")) || bytes.Contains(out, []byte("warning:")) {
		t.Errorf("man does not read it: %v\n%.400s", err, out)
	}
}

// The shells are offered files of the right kind, and scripts for all four exist.
func TestCompletion(t *testing.T) {
	dir := t.TempDir()
	for _, n := range []string{"a.toml", "b.csv", "[odd].toml"} {
		if err := os.WriteFile(filepath.Join(dir, n), nil, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	for _, c := range []struct {
		args       []string
		want, wont string
	}{
		{[]string{"__complete", "console", "--rig", dir + "/"}, dir + "/a.toml", "b.csv"},
		{[]string{"__complete", "console", "--rig", dir + "/["}, dir + "/[odd].toml", "a.toml"},
		{[]string{"__complete", "fit", dir + "/"}, dir + "/b.csv", "a.toml"},
		{[]string{"__complete", "--rig", dir + "/a"}, dir + "/a.toml", "b.csv"},
		{[]string{"__complete", "dryrun", "--sim", dir + "/"}, dir + "/a.toml", "b.csv"},
		{[]string{"__complete", "re"}, "rehearse\t", "fit"},
		{[]string{"completion", "bash"}, "gainwright", ""},
		{[]string{"completion", "zsh"}, "gainwright", ""},
		{[]string{"completion", "fish"}, "gainwright", ""},
		{[]string{"completion", "powershell"}, "gainwright", ""},
	} {
		var out, msg bytes.Buffer
		if code := run(c.args, &out, &msg); code != 0 {
			t.Errorf("%v: exit %d: %s", c.args, code, msg.String())
		}
		if !strings.Contains(out.String(), c.want) || c.wont != "" && strings.Contains(out.String(), c.wont) {
			t.Errorf("%v gives\n%.300s", c.args, out.String())
		}
	}
}
