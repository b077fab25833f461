package bench

import (
	"bytes"
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// killed makes the folder that a job leaves when it is killed at a byte: entries are
// written one after another, each before its line of the index, and the tape grows
// beside them (TestKillAtEveryByte shows that this is the order on the disk).
type killed struct {
	from  string
	lines [][]byte // of the index, the head of it first
	files []string // of each line; "" for the head
	tape  []int64  // bytes noted by each line, -1 where it is no line of a tape
	total []int64  // bytes of the entry's file that its line is behind
}

func killable(t *testing.T, dir string) (k killed) {
	t.Helper()
	index, err := os.ReadFile(filepath.Join(dir, "index.txt"))
	if err != nil {
		t.Fatal(err)
	}
	k = killed{from: dir}
	for _, l := range bytes.SplitAfter(index, []byte("\n")) {
		if len(l) == 0 {
			continue
		}
		w := strings.Fields(string(l))
		file, noted, size := "", int64(-1), int64(0)
		if l[0] != '#' {
			file = w[3]
			st, err := os.Stat(filepath.Join(dir, file))
			if err != nil {
				t.Fatal(err)
			}
			if size = st.Size(); w[2] == string(sheet.KindTape) {
				noted, size = int64(atoi(w[4])), 0
			}
		}
		k.lines, k.files, k.tape, k.total = append(k.lines, l), append(k.files, file), append(k.tape, noted), append(k.total, size)
	}
	return k
}

// at makes the folder as it is after so many bytes of files and index, the tape
// apart. It returns how many entries have their line.
func (k killed) at(t *testing.T, dir string, bytesLeft int64, rng *rand.Rand) (entries int) {
	t.Helper()
	if err := os.Mkdir(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	put := func(name string, b []byte) {
		if err := os.WriteFile(filepath.Join(dir, name), b, 0o600); err != nil {
			t.Fatal(err)
		}
	}
	var index []byte
	tapeFrom, tapeTo, tape := int64(0), int64(0), ""
	over := false
	for i, l := range k.lines {
		if k.tape[i] >= 0 {
			tape = k.files[i]
			if over {
				tapeTo = k.tape[i]
				break
			}
			tapeFrom, tapeTo = k.tape[i], k.tape[i]
		}
		if over {
			continue
		}
		if k.total[i] > 0 {
			if bytesLeft < k.total[i] { // in the middle of the entry's file
				b, err := os.ReadFile(filepath.Join(k.from, k.files[i]))
				if err != nil {
					t.Fatal(err)
				}
				put(k.files[i], b[:bytesLeft])
				over = true
				continue
			}
			bytesLeft -= k.total[i]
			if err := os.Link(filepath.Join(k.from, k.files[i]), filepath.Join(dir, k.files[i])); err != nil {
				t.Fatal(err)
			}
		}
		if bytesLeft < int64(len(l)) { // in the middle of its line
			index = append(index, l[:bytesLeft]...)
			over = true
			continue
		}
		bytesLeft -= int64(len(l))
		index = append(index, l...)
		if k.files[i] != "" {
			entries++
		}
	}
	put("index.txt", index)
	if tape != "" {
		b, err := os.ReadFile(filepath.Join(k.from, tape))
		if err != nil {
			t.Fatal(err)
		}
		put(tape, b[:tapeFrom+rng.Int64N(max(1, tapeTo-tapeFrom))])
	}
	return entries
}

// A whole job is killed at 200 points. Every record opens, says that it is not whole,
// and gives back what was entered; where there is something to compute, the same
// comes out of it, bit for bit. One in eight is computed again in a usual run, all
// with GAINWRIGHT_LONG.
func TestAJobThatIsKilledLeavesARecord(t *testing.T) {
	root := t.TempDir()
	dir := filepath.Join(root, "whole")
	d := DryRun{Config: benchtop(t), Seed: 3, Dir: dir, Program: "test", Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC)}
	if rep, err := d.Do(); err != nil || rep.Outcome != Accepted {
		t.Fatalf("%v, %s", err, rep.Outcome)
	}
	k := killable(t, dir)
	total := int64(0)
	for i := range k.lines {
		total += int64(len(k.lines[i])) + k.total[i]
	}
	rng := rand.New(rand.NewPCG(20261201, 200))
	entriesSeen, again, nothing := map[int]bool{}, 0, 0
	for n := range 200 {
		at := rng.Int64N(total)
		to := filepath.Join(root, "killed")
		entries := k.at(t, to, at, rng)
		r, problems := sheet.Open(to)
		if len(problems) == 0 || r == nil || r.Closed() {
			t.Fatalf("after %d of %d bytes the record passes for whole: %v", at, total, problems)
		}
		for _, p := range problems {
			if !slices.Contains([]sheet.ProblemKind{sheet.Cut, sheet.Unfinished, sheet.Added, sheet.Removed}, p.Kind) {
				t.Errorf("after %d bytes: %v", at, p)
			}
		}
		if got := len(r.Lines()); got != entries {
			t.Errorf("after %d bytes %d entries are given back of %d", at, got, entries)
		}
		entriesSeen[entries] = true
		_, fitted := r.Last(sheet.KindFit, "first-order")
		if os.Getenv("GAINWRIGHT_LONG") != "" || n%8 == 0 || !fitted {
			switch res, err := job.Recompute(r); {
			case errors.Is(err, job.ErrNothingToRecompute):
				nothing++
				if fitted {
					t.Errorf("after %d bytes there is a fit and nothing to compute", at)
				}
			case err != nil || !res.Identical:
				t.Errorf("after %d bytes: %v, %v", at, err, res.Differences)
			default:
				again++
			}
		}
		if err := os.RemoveAll(to); err != nil {
			t.Fatal(err)
		}
	}
	t.Logf("%d lengths of record, %d computed again, %d with nothing to compute", len(entriesSeen), again, nothing)
	if len(entriesSeen) < 30 || again < 3 || nothing < 30 {
		t.Error("too little was looked at")
	}
}
