package sheet

import (
	"bytes"
	"crypto/rand"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"sync"
	"time"

	"gainwright/tune/sheet/plain"
)

// Listing is one sheet of a folder.
type Listing struct {
	Dir     string
	Header  Header
	Start   time.Time
	Outcome string // "" for a job that was broken off
}

// Filter chooses sheets. Empty fields choose all.
type Filter struct {
	Rig     string
	BoardID string
}

// List returns the sheets that stand in dir, newest first. A folder in dir that
// is no sheet is passed over; a dir that is not there holds none. Only the first
// entry and the end of each index are read, so that thousands take well under a
// second.
func List(dir string, f Filter) ([]Listing, error) {
	found, err := os.ReadDir(dir)
	if errors.Is(err, os.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, fmt.Errorf("the folder of sheets cannot be read: %w", err)
	}
	all := make([]*Listing, len(found))
	var wait sync.WaitGroup
	next := make(chan int)
	for range min(8, 2*runtime.NumCPU()) { // some disks answer several at once
		wait.Go(func() {
			for i := range next {
				all[i] = peek(filepath.Join(dir, found[i].Name()), f)
			}
		})
	}
	for i, e := range found {
		if e.IsDir() {
			next <- i
		}
	}
	close(next)
	wait.Wait()
	var out []Listing
	for _, l := range all {
		if l != nil {
			out = append(out, *l)
		}
	}
	slices.SortStableFunc(out, func(a, b Listing) int {
		if c := b.Start.Compare(a.Start); c != 0 {
			return c
		}
		return strings.Compare(a.Dir, b.Dir)
	})
	return out, nil
}

func peek(dir string, f Filter) *Listing {
	b, err := os.ReadFile(filepath.Join(dir, headerName))
	if err != nil {
		return nil
	}
	l := Listing{Dir: dir}
	if json.Unmarshal(b, &l.Header) != nil {
		return nil
	}
	if f.Rig != "" && f.Rig != l.Header.Rig || f.BoardID != "" && f.BoardID != l.Header.BoardID {
		return nil
	}
	if l.Start, err = time.Parse(time.RFC3339Nano, l.Header.Start); err != nil {
		return nil
	}
	l.Outcome = outcomeOf(filepath.Join(dir, indexName))
	return &l
}

// outcomeOf reads the last line of an index from its end.
func outcomeOf(index string) string {
	f, err := os.Open(index)
	if err != nil {
		return ""
	}
	defer f.Close()
	const tail = 512 // longer than any line
	if size, err := f.Seek(0, io.SeekEnd); err == nil {
		_, _ = f.Seek(max(0, size-tail), io.SeekStart)
	}
	b, err := io.ReadAll(io.LimitReader(f, tail))
	b, ended := bytes.CutSuffix(b, []byte("\n"))
	if err != nil || !ended {
		return ""
	}
	l, _, err := parseLine(string(b[bytes.LastIndexByte(b, '\n')+1:]))
	if err != nil || l.Kind != KindClose {
		return ""
	}
	return l.Name()
}

// NewDirName returns the name of a new sheet's folder: the time in UTC, rig,
// board and a suffix that tells apart two jobs begun in the same second on two
// laptops whose folders are copied together one day.
func NewDirName(rig, boardID string, t time.Time, suffix string) string {
	return fmt.Sprintf("%s-%s-%s-%s", t.UTC().Format("20060102-150405"),
		plain.FileName(rig, 24), plain.FileName(boardID, 24), plain.FileName(suffix, 12))
}

// NewSuffix returns eight letters and digits, 40 bits, from a source of random
// bytes; nil stands for the system's.
func NewSuffix(source io.Reader) (string, error) {
	if source == nil {
		source = rand.Reader
	}
	const letters = "0123456789abcdefghjkmnpqrstvwxyz" // none that look alike
	b := make([]byte, 8)
	if _, err := io.ReadFull(source, b); err != nil {
		return "", fmt.Errorf("no random bytes for the folder's name: %w", err)
	}
	for i := range b {
		b[i] = letters[b[i]%32]
	}
	return string(b), nil
}

// DataDir returns where sheets are kept if the user names no other folder, as
// the conventions of the system have it: $XDG_DATA_HOME or ~/.local/share, on
// Windows %LOCALAPPDATA%, on macOS ~/Library/Application Support. It makes
// nothing. env looks up a variable (os.Getenv).
func DataDir(goos string, env func(string) string) (string, error) {
	base := ""
	home := env("HOME")
	switch goos {
	case "windows":
		base = env("LOCALAPPDATA")
	case "darwin":
		if home != "" {
			base = filepath.Join(home, "Library", "Application Support")
		}
	default:
		// The XDG specification has a path that is not absolute ignored.
		if base = env("XDG_DATA_HOME"); !filepath.IsAbs(base) {
			base = ""
		}
		if base == "" && home != "" {
			base = filepath.Join(home, ".local", "share")
		}
	}
	if base == "" {
		return "", errors.New("no folder for sheets is known here: name one with --out, or set HOME (on Windows LOCALAPPDATA)")
	}
	return filepath.Join(base, "gainwright", "sheets"), nil
}
