package sheet

import (
	"errors"
	"fmt"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"testing/synctest"
	"time"
)

// A tape is written many times a second and entered seldom; it must be on the
// disk within a second all the same.
func TestStreamIsOnTheDiskWithinASecond(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "job")
	synctest.Test(t, func(t *testing.T) {
		h := testHeader
		h.Simulated = false
		d := newFailingDisk(dir, 1<<20)
		s, err := Create(dir, h, withDisk(d))
		if err != nil {
			t.Fatal(err)
		}
		tape, err := s.Stream(KindTape, "session", "txt")
		if err != nil {
			t.Fatal(err)
		}
		synced := func() bool {
			d.mu.Lock()
			defer d.mu.Unlock()
			return d.synced["tape-session.txt"]
		}
		for range 3 {
			if _, err := tape.Write([]byte("0.000 > id 1\n")); err != nil {
				t.Fatal(err)
			}
			if synced() {
				t.Error("synced at once: then a slow disk holds up the tape")
			}
			time.Sleep(time.Second)
			synctest.Wait()
			if !synced() {
				t.Error("not on the disk after a second")
			}
		}
		if err := s.Close("accepted", ""); err != nil {
			t.Fatal(err)
		}
	})
}

func TestStreamAndEntriesTogether(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "job")
	h := testHeader
	h.Simulated = false
	s, err := Create(dir, h)
	if err != nil {
		t.Fatal(err)
	}
	tape, err := s.Stream(KindTape, "session", "txt")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Stream(KindTape, "session", "txt"); err == nil || s.Err() != nil {
		t.Errorf("a second stream of the name: %v; the sheet: %v", err, s.Err())
	}
	var wait sync.WaitGroup
	for w := range 3 {
		wait.Go(func() {
			for i := range 10 {
				switch w {
				case 0:
					fmt.Fprintf(tape, "%d\n", i)
				case 1:
					_ = tape.Mark()
				case 2:
					_, _ = s.Entry(KindEvent, "tick", EventRecord{What: fmt.Sprint(i)})
				}
			}
		})
	}
	wait.Wait()
	if err := s.Close("accepted", ""); err != nil {
		t.Fatal(err)
	}
	if _, err := tape.Write([]byte("late")); !errors.Is(err, ErrClosed) {
		t.Errorf("a write after Close: %v", err)
	}
	problems, sum := Check(dir)
	if len(problems) > 0 || sum.Entries != 1+10+10+2 {
		t.Errorf("%d entries, problems %v", sum.Entries, problems)
	}
	r, _ := Open(dir)
	line, _ := r.Last(KindTape, "session")
	if b, err := r.Read(line); err != nil || strings.Count(string(b), "\n") != 10 {
		t.Errorf("the tape reads back as %q, %v", b, err)
	}
}
