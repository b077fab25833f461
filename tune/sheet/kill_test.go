package sheet

import (
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"testing"
)

// failingDisk writes to a folder until its bytes are used up; the write that
// meets the end is cut short, as on a full disk or when the power goes.
type failingDisk struct {
	folder
	mu      sync.Mutex
	left    int
	created []string
	synced  map[string]bool
	late    []string // index lines written before their file was on the disk
	writes  []write
}

type write struct {
	name  string
	bytes []byte
}

type failingFile struct {
	d    *failingDisk
	name string
	diskFile
}

func (d *failingDisk) create(name string) (diskFile, error) {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.left <= 0 {
		return nil, syscall.ENOSPC
	}
	f, err := d.folder.create(name)
	d.created = append(d.created, name)
	d.writes = append(d.writes, write{name, nil})
	return &failingFile{d, name, f}, err
}

func (f *failingFile) Write(p []byte) (int, error) {
	f.d.mu.Lock()
	defer f.d.mu.Unlock()
	if f.name == indexName && len(f.d.created) > 1 {
		if words := strings.Fields(string(p)); len(words) == 7 && !f.d.synced[words[3]] {
			f.d.late = append(f.d.late, words[3])
		}
	}
	f.d.synced[f.name] = false
	n := min(len(p), f.d.left)
	f.d.left -= n
	f.d.writes = append(f.d.writes, write{f.name, slices.Clone(p[:n])})
	n, err := f.diskFile.Write(p[:n])
	if err == nil && n < len(p) {
		err = syscall.ENOSPC
	}
	return n, err
}

func (f *failingFile) Sync() error {
	f.d.mu.Lock()
	defer f.d.mu.Unlock()
	f.d.synced[f.name] = true
	return f.diskFile.Sync()
}

func newFailingDisk(dir string, left int) *failingDisk {
	return &failingDisk{folder: folder(dir), left: left, synced: map[string]bool{}}
}

// replay puts the writes of a job on the disk again and calls judge each time a
// file was made and each time another byte was written, with the number of bytes
// so far and whether at says that this is a point to look at.
func replay(t *testing.T, writes []write, dir string, at func(written int) bool, judge func(written int)) {
	t.Helper()
	if err := os.Mkdir(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	files, written := map[string]*os.File{}, 0
	put := func(f *os.File, b []byte) {
		if _, err := f.Write(b); err != nil {
			t.Fatal(err)
		}
	}
	for _, w := range writes {
		f := files[w.name]
		if f == nil {
			var err error
			if f, err = os.Create(filepath.Join(dir, w.name)); err != nil {
				t.Fatal(err)
			}
			defer f.Close()
			files[w.name] = f
			if at(written) {
				judge(written)
			}
		}
		from := 0
		for k := range w.bytes {
			if written++; at(written) {
				put(f, w.bytes[from:k+1])
				from = k + 1
				judge(written)
			}
		}
		put(f, w.bytes[from:])
	}
}

// A small job is killed at every byte that it writes. The sheet must open each
// time, say that it is not whole, and give back every entry whose line was
// complete.
func TestKillAtEveryByte(t *testing.T) {
	const plenty = 1 << 20
	root := t.TempDir()
	whole := newFailingDisk(filepath.Join(root, "whole"), plenty)
	if _, err := writeSmall(string(whole.folder), testHeader, withDisk(whole)); err != nil {
		t.Fatal(err)
	}
	dir, total, entries := filepath.Join(root, "killed"), plenty-whole.left, 0
	replay(t, whole.writes, dir, func(written int) bool { return written < total }, func(written int) {
		entries = judgeKilled(t, dir, written, entries)
	})
	if total < 2000 || entries != 8 {
		t.Errorf("%d bytes and, before the last, %d entries; want over 2000 and 8", total, entries)
	}
	if problems, sum := Check(dir); len(problems) > 0 || sum.Entries != 9 {
		t.Errorf("with its last byte the sheet has %d entries and problems %v", sum.Entries, problems)
	}
}

// judgeKilled returns the number of entries that can be read.
func judgeKilled(t *testing.T, dir string, written, entriesBefore int) int {
	t.Helper()
	r, problems := Open(dir)
	if len(problems) == 0 || r.Closed() {
		t.Fatalf("after %d bytes the sheet passes for whole", written)
	}
	for _, p := range problems {
		if p.Kind == Changed || p.Kind == Reordered || p.Kind == Unreadable {
			t.Fatalf("after %d bytes a kill is reported as %v", written, p)
		}
	}
	lines := r.Lines()
	if len(lines) == entriesBefore {
		return entriesBefore
	}
	if len(lines) < entriesBefore {
		t.Fatalf("after %d bytes %d entries are left, before it was %d", written, len(lines), entriesBefore)
	}
	for _, l := range lines {
		if _, err := r.Read(l); err != nil {
			t.Fatalf("after %d bytes: %v", written, err)
		}
	}
	return len(lines)
}

// A line must never stand for a file that a power cut can still take.
func TestFileIsSyncedBeforeItsLine(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "job")
	d := newFailingDisk(dir, 1<<20)
	h := testHeader
	h.Simulated = false
	if _, err := writeSmall(dir, h, withDisk(d)); err != nil {
		t.Fatal(err)
	}
	if len(d.late) > 0 {
		t.Errorf("entered before they were on the disk: %v", d.late)
	}
	if len(d.created) != 9 {
		t.Errorf("%d files made, want 9: %v", len(d.created), d.created)
	}
	for name, ok := range d.synced {
		if !ok {
			t.Errorf("%s was never synced after its last write", name)
		}
	}
}

// Any one file cut at any length: the sheet opens and the file is named.
func TestTruncateAtEveryByte(t *testing.T) {
	dir := mustWrite(t)
	found, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range found {
		path := filepath.Join(dir, f.Name())
		content, _ := os.ReadFile(path)
		for n := len(content) - 1; n >= 0; n-- {
			if err := os.Truncate(path, int64(n)); err != nil {
				t.Fatal(err)
			}
			_, problems := Open(dir)
			if !slices.ContainsFunc(problems, func(p Problem) bool { return p.File == f.Name() }) {
				t.Fatalf("%s cut to %d of %d bytes is not named: %v", f.Name(), n, len(content), problems)
			}
		}
		if err := os.WriteFile(path, content, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	if problems, _ := Check(dir); len(problems) > 0 {
		t.Fatalf("put back, but %v", problems)
	}
}

// A larger job is killed at 200 random points; what is there must be in order
// to its last bit, and the rest named.
func TestKillAtRandomPoints(t *testing.T) {
	const plenty = 1 << 20
	root := t.TempDir()
	whole := newFailingDisk(filepath.Join(root, "whole"), plenty)
	s, err := Create(string(whole.folder), testHeader, testClock(), withDisk(whole))
	if err != nil {
		t.Fatal(err)
	}
	for range 20 {
		_, _ = s.Trace("step", testTrace())
		_, _ = s.Remark("next")
	}
	if err := s.Close("accepted", ""); err != nil {
		t.Fatal(err)
	}
	rng, points := rand.New(rand.NewPCG(7, 200)), map[int]bool{}
	for len(points) < 200 {
		points[rng.IntN(plenty-whole.left)] = true
	}
	dir, entries, most := filepath.Join(root, "killed"), 0, 0
	replay(t, whole.writes, dir, func(written int) bool { return points[written] }, func(written int) {
		entries = judgeKilled(t, dir, written, entries)
		most = max(most, entries)
		problems, _ := Check(dir)
		for _, p := range problems {
			if entries > 0 && p.Kind != Unfinished && p.Kind != Added && p.Kind != Cut {
				t.Fatalf("after %d bytes: %v", written, p)
			}
		}
	})
	if most < 35 {
		t.Errorf("at most %d of 42 entries seen: the points lie badly", most)
	}
}

// The same with a disk that is full at 20 random points: the job learns of it,
// and what the folder holds opens.
func TestFullDiskAtRandomPoints(t *testing.T) {
	const plenty = 1 << 20
	root, rng := t.TempDir(), rand.New(rand.NewPCG(7, 20))
	whole := newFailingDisk(filepath.Join(root, "whole"), plenty)
	if _, err := writeSmall(string(whole.folder), testHeader, withDisk(whole)); err != nil {
		t.Fatal(err)
	}
	for i := range 20 {
		dir, left := filepath.Join(root, strconv.Itoa(i)), rng.IntN(plenty-whole.left)
		_, err := writeSmall(dir, testHeader, withDisk(newFailingDisk(dir, left)))
		var full *DiskError
		if !errors.As(err, &full) || !errors.Is(err, syscall.ENOSPC) || full.File == "" {
			t.Errorf("full after %d bytes: %v", left, err)
		}
		judgeKilled(t, dir, left, 0)
	}
}

func TestDiskErrorIsLatched(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "job")
	d := newFailingDisk(dir, 2500)
	s, err := Create(dir, testHeader, testClock(), withDisk(d))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Text(KindRemark, "long", strings.Repeat("x", 4000)); !errors.Is(err, syscall.ENOSPC) {
		t.Fatalf("full disk: %v", err)
	}
	d.left = 1 << 20 // room again, but there is a gap now
	if _, err := s.Remark("short"); !errors.Is(err, syscall.ENOSPC) {
		t.Errorf("an entry after the gap: %v", err)
	}
	if _, err := s.Stream(KindTape, "session", "txt"); err == nil {
		t.Error("a stream after the gap")
	}
	if s.Err() == nil || s.Close("accepted", "") == nil {
		t.Error("the error was forgotten")
	}
	if r, _ := Open(dir); r.Closed() {
		t.Error("the sheet passes for whole")
	}
}
