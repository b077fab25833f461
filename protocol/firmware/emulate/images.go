package emulate

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"hash"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
)

// compilers are what the images of a part depend on besides their sources.
var compilers = map[string][]string{"host": {"gcc"}, "avr": {"gcc", "avr-gcc"}, "arm": {"arm-none-eabi-gcc"}}

// made is what a part of the images came to in this process.
type made struct {
	sync.Once
	dir string
	err error
}

var parts sync.Map // name of a part → *made

// Images returns the folder of a part of the images, "host", "avr" or "arm", that
// boards/build.sh makes. It skips the test where one of the programs is not
// installed. A part is built once for the same sources and compilers, and kept in
// the user's cache for other tests and other runs: nobody may write to the folder.
func Images(t testing.TB, part string, programs ...string) string {
	t.Helper()
	for _, p := range programs {
		if _, err := exec.LookPath(p); err != nil {
			t.Skipf("%s is not installed", p)
		}
	}
	x, _ := parts.LoadOrStore(part, &made{})
	m := x.(*made)
	m.Do(func() { m.dir, m.err = images(part) })
	if m.err != nil {
		t.Fatal(m.err)
	}
	return m.dir
}

func images(part string) (string, error) {
	h := sha256.New()
	src, err := source(h)
	if err != nil {
		return "", err
	}
	for _, p := range compilers[part] {
		version, err := exec.Command(p, "--version").Output()
		if err != nil {
			return "", fmt.Errorf("emulate: %s --version: %w", p, err)
		}
		h.Write(version)
	}
	for _, lib := range []string{"/usr/include/simavr/sim_avr.h", "/usr/include/gelf.h"} { // the runner wants them
		_, err := os.Stat(lib)
		fmt.Fprintln(h, lib, err == nil)
	}
	cache, err := os.UserCacheDir()
	if err != nil {
		cache = os.TempDir()
	}
	cache = filepath.Join(cache, "gainwright-images")
	dir := filepath.Join(cache, fmt.Sprintf("%s-%.8x", part, h.Sum(nil)))
	if _, err := os.Stat(dir); err == nil {
		return dir, nil
	}
	if err := os.MkdirAll(cache, 0o700); err != nil {
		return "", err
	}
	tmp, err := os.MkdirTemp(cache, "new-")
	if err != nil {
		return "", err
	}
	defer os.RemoveAll(tmp) // once it is renamed there is nothing to remove
	cmd := exec.Command("sh", "boards/build.sh", tmp, part)
	cmd.Dir = src
	if msg, err := cmd.CombinedOutput(); err != nil {
		return "", fmt.Errorf("boards/build.sh %s: %w\n%s", part, err, msg)
	}
	if err := os.Rename(tmp, dir); err != nil {
		if _, there := os.Stat(dir); there != nil { // not made by somebody else meanwhile
			return "", err
		}
	}
	return dir, nil
}

// source finds protocol/firmware and reads its files into h; having read them, a
// result that go test keeps ends with a change of one.
func source(h hash.Hash) (string, error) {
	dir, err := os.Getwd()
	if err != nil {
		return "", err
	}
	for ; ; dir = filepath.Dir(dir) {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			break
		}
		if dir == filepath.Dir(dir) {
			return "", errors.New("emulate: no go.mod above the working directory")
		}
	}
	dir = filepath.Join(dir, "protocol", "firmware")
	return dir, filepath.WalkDir(dir, func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() || strings.HasSuffix(path, ".go") {
			return err
		}
		text, err := os.ReadFile(path)
		fmt.Fprintln(h, strings.TrimPrefix(path, dir), len(text))
		h.Write(text)
		return err
	})
}
