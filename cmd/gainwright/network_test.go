package main

import (
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// No package of ours can reach a network: none imports what opens a socket.
func TestNothingImportsTheNetwork(t *testing.T) {
	seen := 0
	err := filepath.WalkDir("../..", func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") {
			return nil
		}
		tree, err := parser.ParseFile(token.NewFileSet(), path, nil, parser.ImportsOnly)
		if err != nil {
			return err
		}
		seen++
		for _, i := range tree.Imports {
			if name := strings.Trim(i.Path.Value, `"`); name == "net" || strings.HasPrefix(name, "net/") && name != "net/url" || strings.HasPrefix(name, "golang.org/x/net") {
				t.Errorf("%s imports %s: the program has no use for a network", path, name)
			}
		}
		return nil
	})
	if err != nil || seen < 100 {
		t.Fatalf("read %d files: %v", seen, err)
	}
}

// A whole job opens no socket of a network family, as the kernel sees it.
func TestAJobOpensNoSocket(t *testing.T) {
	strace, err := exec.LookPath("strace")
	if err != nil {
		t.Skip("no strace here: what the program asks of the kernel was not watched")
	}
	if testing.Short() {
		t.Skip("builds a program")
	}
	dir := t.TempDir()
	bin, log := filepath.Join(dir, "gainwright"), filepath.Join(dir, "calls")
	if b, err := exec.Command("go", "build", "-o", bin, ".").CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, b)
	}
	job := []string{bin, "dryrun", "--sim", "../../testdata/rigs/benchtop.toml", "--out", filepath.Join(dir, "sheet"), "--json"}
	out, err := exec.Command(strace, append([]string{"-f", "-e", "trace=socket,connect,execve", "-o", log}, job...)...).CombinedOutput()
	calls, _ := os.ReadFile(log)
	if !strings.Contains(string(calls), "execve(") {
		t.Skipf("strace may not watch programs here: %v %.200s", err, out)
	}
	if err != nil {
		t.Fatalf("%v\n%.400s", err, out)
	}
	if bad := regexp.MustCompile(`AF_INET6?\b|AF_NETLINK|AF_PACKET`).FindString(string(calls)); bad != "" {
		t.Errorf("the program opened a socket of %s:\n%.600s", bad, calls)
	}
}
