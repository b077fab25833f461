package sheet

import (
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
)

// failingDisk writes to a folder until its bytes are used up; the write that
// meets the end is cut short, as on a full disk or when the power goes.
type failingDisk struct {
	folder
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
	if d.left <= 0 {
		return nil, syscall.ENOSPC
	}
	f, err := d.folder.create(name)
	d.created = append(d.created, name)
	d.writes = append(d.writes, write{name, nil})
	return &failingFile{d, name, f}, err
}

func (f *failingFile) Write(p []byte) (int, error) {
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
	f.d.synced[f.name] = true
	return f.diskFile.Sync()
}

func newFailingDisk(dir string, left int) *failingDisk {
	return &failingDisk{folder: folder(dir), left: left, synced: map[string]bool{}}
}

// A small job is killed at every byte that it writes: its writes are put on the
// disk again one byte at a time. The sheet must open each time, say that it is
// not whole, and give back every entry whose line was complete.
func TestKillAtEveryByte(t *testing.T) {
	root := t.TempDir()
	whole := newFailingDisk(filepath.Join(root, "whole"), 1<<20)
	if _, err := writeSmall(string(whole.folder), testHeader, withDisk(whole)); err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(root, "killed")
	if err := os.Mkdir(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	files, written, entries := map[string]*os.File{}, 0, 0
	for i, w := range whole.writes {
		f := files[w.name]
		if f == nil {
			var err error
			if f, err = os.Create(filepath.Join(dir, w.name)); err != nil {
				t.Fatal(err)
			}
			defer f.Close()
			files[w.name] = f
			entries = judgeKilled(t, dir, written, entries)
		}
		for k := range w.bytes {
			if _, err := f.Write(w.bytes[k : k+1]); err != nil {
				t.Fatal(err)
			}
			if written++; i == len(whole.writes)-1 && k == len(w.bytes)-1 {
				break // the last byte makes it whole
			}
			entries = judgeKilled(t, dir, written, entries)
		}
	}
	if written < 2000 || entries != 8 {
		t.Errorf("%d bytes and, before the last, %d entries; want over 2000 and 8", written, entries)
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
		for n := range len(content) {
			if err := os.WriteFile(path, content[:n], 0o644); err != nil {
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

// 200 random points of a larger job; what is kept must still be in order.
func TestKillAtRandomPoints(t *testing.T) {
	root := t.TempDir()
	job := func(dir string, d disk) error {
		s, err := Create(dir, testHeader, testClock(), withDisk(d))
		if err != nil {
			return err
		}
		for range 12 {
			_, _ = s.Trace("step", testTrace())
			_, _ = s.Remark("next")
		}
		return s.Close("accepted", "")
	}
	const plenty = 1 << 20
	whole := newFailingDisk(filepath.Join(root, "whole"), plenty)
	if err := job(string(whole.folder), whole); err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(7, 200))
	for range 200 {
		left := rng.IntN(plenty - whole.left)
		dir := filepath.Join(root, "cut")
		if err := job(dir, newFailingDisk(dir, left)); !errors.Is(err, syscall.ENOSPC) {
			t.Fatalf("after %d bytes: %v", left, err)
		}
		problems, sum := Check(dir)
		if sum.Closed || len(problems) == 0 {
			t.Fatalf("after %d bytes the sheet passes for whole", left)
		}
		for _, p := range problems {
			if p.Kind != Unfinished && p.Kind != Added && p.Kind != Cut && sum.Entries > 0 {
				t.Fatalf("after %d bytes: %v", left, p)
			}
		}
		if err := os.RemoveAll(dir); err != nil {
			t.Fatal(err)
		}
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
