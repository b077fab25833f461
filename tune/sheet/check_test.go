package sheet

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// tamper gives the changes in a row short names.
type tamper struct {
	t   *testing.T
	dir string
}

func (x tamper) edit(name string, f func(string) string) {
	x.t.Helper()
	path := filepath.Join(x.dir, name)
	old, err := os.ReadFile(path)
	if err != nil {
		x.t.Fatal(err)
	}
	changed := f(string(old))
	if changed == string(old) {
		x.t.Fatalf("%s was not changed: this row tests nothing", name)
	}
	if err := os.WriteFile(path, []byte(changed), 0o644); err != nil {
		x.t.Fatal(err)
	}
}

func (x tamper) replace(name, old, with string) {
	x.t.Helper()
	x.edit(name, func(s string) string { return strings.Replace(s, old, with, 1) })
}

// lines edits the entries of the index; entry 1 is lines[0].
func (x tamper) lines(f func([]string) []string) {
	x.t.Helper()
	x.edit(indexName, func(s string) string {
		lines := strings.Split(strings.TrimSuffix(strings.TrimPrefix(s, preamble), "\n"), "\n")
		return preamble + strings.Join(f(lines), "\n") + "\n"
	})
}

func (x tamper) rename(from, to string) {
	if err := os.Rename(filepath.Join(x.dir, from), filepath.Join(x.dir, to)); err != nil {
		x.t.Fatal(err)
	}
}

func (x tamper) read(name string) string {
	b, err := os.ReadFile(filepath.Join(x.dir, name))
	if err != nil {
		x.t.Fatal(err)
	}
	return string(b)
}

// rechain makes the line after before hold what the files say, as somebody
// would who knows the format.
func rechain(before string, line string, newSum string) string {
	w := strings.Fields(line)
	if newSum != "" {
		w[5] = newSum
	}
	body := strings.Join(w[:6], " ")
	return body + " " + link(before, body)
}

const (
	fitFile   = "0006-fit-first-order.json"
	checkFile = "0004-check-count.json"
	traceFile = "0005-trace-step-forward.csv"
)

func TestTampering(t *testing.T) {
	tests := []struct {
		name  string
		do    func(tamper)
		kind  ProblemKind
		entry int
		file  string
		says  string
	}{
		{"a digit in a fit", func(x tamper) { x.replace(fitFile, "21.4", "22.4") }, Changed, 6, fitFile, "not what was entered"},
		{"a sample of a trace", func(x tamper) { x.replace(traceFile, "0.003,6", "0.003,7") }, Changed, 5, traceFile, ""},
		{"the rig file", func(x tamper) { x.replace("0003-rig-pump-3.toml", "24", "48") }, Changed, 3, "0003-rig-pump-3.toml", ""},
		{"a file cut short", func(x tamper) { x.edit(traceFile, func(s string) string { return s[:len(s)/2] }) }, Cut, 5, traceFile, "of"},
		{"rows added to a trace", func(x tamper) { x.edit(traceFile, func(s string) string { return s + "0.02,6,120\n" }) }, Added, 0, traceFile, "the first"},
		{"a file taken away", func(x tamper) { os.Remove(filepath.Join(x.dir, checkFile)) }, Removed, 4, checkFile, "not in the folder"},
		{"a file renamed", func(x tamper) { x.rename(checkFile, "0004-check-sign.json") }, Removed, 4, checkFile, ""},
		{"a file put in", func(x tamper) { os.WriteFile(filepath.Join(x.dir, "0010-fit-better.json"), []byte("{}"), 0o644) }, Added, 0, "0010-fit-better.json", "without an entry"},
		{"two files swapped", func(x tamper) {
			a, b := x.read(checkFile), x.read(fitFile)
			x.edit(checkFile, func(string) string { return b + strings.Repeat("\n", max(0, len(a)-len(b))) })
			x.edit(fitFile, func(string) string { return a + strings.Repeat("\n", max(0, len(b)-len(a))) })
		}, Changed, 4, checkFile, ""},
		{"a file made a link", func(x tamper) {
			x.rename(fitFile, "../elsewhere.json")
			os.Symlink("../elsewhere.json", filepath.Join(x.dir, fitFile))
		}, Changed, 6, fitFile, "no plain file"},
		{"one trace under another's name", func(x tamper) {
			content := x.read(checkFile)
			x.edit("0007-remark-operator.txt", func(string) string { return content })
		}, Changed, 7, "0007-remark-operator.txt", ""},
		{"a line taken out", func(x tamper) { x.lines(func(l []string) []string { return append(l[:4:4], l[5:]...) }) }, Removed, 6, indexName, "entry 5 before it is gone"},
		{"three lines taken out", func(x tamper) { x.lines(func(l []string) []string { return append(l[:2:2], l[5:]...) }) }, Removed, 6, indexName, "entries 3 to 5"},
		{"the first line taken out", func(x tamper) { x.lines(func(l []string) []string { return l[1:] }) }, Removed, 2, indexName, "entry 1 before it is gone"},
		{"two lines swapped", func(x tamper) {
			x.lines(func(l []string) []string { l[3], l[4] = l[4], l[3]; return l })
		}, Reordered, 4, indexName, "after entry 3"},
		{"a line moved to the end", func(x tamper) {
			x.lines(func(l []string) []string { return append(append(l[:3:3], l[4:]...), l[3]) })
		}, Reordered, 4, indexName, "after entry 3"},
		{"a line doubled", func(x tamper) {
			x.lines(func(l []string) []string { return append(l[:5:5], l[4:]...) })
		}, Added, 5, indexName, "second time"},
		{"a line put between", func(x tamper) {
			x.lines(func(l []string) []string {
				forged := strings.Replace(rechain(lastWord(l[3]), l[3], ""), "0004-check-count", "0004-check-sign", 1)
				return append(append(l[:4:4], forged), l[4:]...)
			})
		}, Added, 5, indexName, "put there later"},
		{"the end cut off", func(x tamper) { x.lines(func(l []string) []string { return l[:6] }) }, Unfinished, 6, indexName, "cut off"},
		{"the end cut off, its file left", func(x tamper) { x.lines(func(l []string) []string { return l[:6] }) }, Added, 0, "0007-remark-operator.txt", ""},
		{"the index cut inside a line", func(x tamper) { x.edit(indexName, func(s string) string { return s[:len(s)-40] }) }, Cut, 0, indexName, "no end"},
		{"the index gone", func(x tamper) { os.Remove(filepath.Join(x.dir, indexName)) }, Removed, 0, indexName, ""},
		{"a time", func(x tamper) { x.replace(indexName, "T10:12:01.000", "T10:12:01.001") }, Changed, 4, indexName, "does not follow"},
		{"a kind", func(x tamper) { x.replace(indexName, " check 0004-check", " event 0004-event") }, Changed, 4, indexName, ""},
		{"a word too many in a line", func(x tamper) { x.replace(indexName, " check 0004", " check  0004") }, Changed, 0, indexName, "8 words"},
		{"a file and its hash in the line", func(x tamper) {
			x.replace(fitFile, "21.4", "22.4")
			sum := hash([]byte(x.read(fitFile)))
			x.lines(func(l []string) []string {
				w := strings.Fields(l[5])
				w[5] = sum
				l[5] = strings.Join(w, " ")
				return l
			})
		}, Changed, 6, indexName, "does not follow entry 5"},
		{"a file, its hash and its chain", func(x tamper) {
			x.replace(fitFile, "21.4", "22.4")
			sum := hash([]byte(x.read(fitFile)))
			x.lines(func(l []string) []string { l[5] = rechain(lastWord(l[4]), l[5], sum); return l })
		}, Changed, 7, indexName, "does not follow entry 6"},
		{"the words at the head", func(x tamper) { x.replace(indexName, "It does not prove", "It does prove") }, Changed, 0, indexName, "begin with #"},
		{"the beginning of the tape", func(x tamper) { x.replace("tape-session.txt", "id 1", "id 2") }, Changed, 2, "tape-session.txt", ""},
		{"the end of the tape", func(x tamper) { x.replace("tape-session.txt", "ok 1", "no 1") }, Changed, 8, "tape-session.txt", ""},
		{"a way out of the folder", func(x tamper) { x.replace(indexName, " 0004-check-count.json", " ../0004-check-count.json") }, Changed, 0, indexName, "no file name"},
		{"a folder below", func(x tamper) { x.replace(indexName, " 0004-check-count.json", " other/0004-check-count.json") }, Changed, 0, indexName, "no file name"},
		{"line ends of another system", func(x tamper) {
			x.edit(indexName, func(s string) string { return strings.ReplaceAll(s, "\n", "\r\n") })
		}, Changed, 0, indexName, ""},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			dir := mustWrite(t)
			tt.do(tamper{t, dir})
			problems, _ := Check(dir)
			for _, p := range problems {
				if p.Kind == tt.kind && p.Entry == tt.entry && p.File == tt.file && strings.Contains(p.Text, tt.says) {
					return
				}
			}
			t.Errorf("want %s at entry %d in %s saying %q, got:\n%s", tt.kind, tt.entry, tt.file, tt.says, list(problems))
		})
	}
}

func lastWord(s string) string { return s[strings.LastIndexByte(s, ' ')+1:] }

func list(problems []Problem) string {
	var b strings.Builder
	for _, p := range problems {
		fmt.Fprintln(&b, "  ", p)
	}
	return b.String()
}

// What a chain cannot show: all of it made anew. The card can.
func TestChainMadeAnew(t *testing.T) {
	dir := mustWrite(t)
	_, before := Check(dir)
	card := before.Chain[:16]
	x := tamper{t, dir}
	x.replace(fitFile, "21.4", "22.4")
	sum := hash([]byte(x.read(fitFile)))
	x.lines(func(l []string) []string {
		for i := 5; i < len(l); i++ {
			newSum := ""
			if i == 5 {
				newSum = sum
			}
			l[i] = rechain(lastWord(l[i-1]), l[i], newSum)
		}
		return l
	})
	problems, after := Check(dir)
	if len(problems) > 0 {
		t.Errorf("the forged chain does not agree with itself: %v", problems)
	}
	if !before.Has(card) || after.Has(card) {
		t.Errorf("the card's hash: before %v, after %v; want true, false", before.Has(card), after.Has(card))
	}
	if !strings.Contains(after.Says, "not who did it") {
		t.Errorf("the limits are not stated: %q", after.Says)
	}
}

func TestHasNeedsEightDigits(t *testing.T) {
	_, sum := Check(mustWrite(t))
	if sum.Has(sum.Chain[:7]) || sum.Has("") || !sum.Has(strings.ToUpper(sum.Chain[:8])) {
		t.Error("Has takes too short a hash, or not an upper-case one")
	}
}

// No single bit of a sheet can change unseen: in every file, every byte in turn
// has one bit turned over, and the check must name that file.
func TestNoBitChangesUnseen(t *testing.T) {
	dir := mustWrite(t)
	found, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	bytes := 0
	for _, e := range found {
		f, err := os.OpenFile(filepath.Join(dir, e.Name()), os.O_RDWR, 0)
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		content, _ := os.ReadFile(f.Name())
		for i, b := range content {
			if _, err := f.WriteAt([]byte{b ^ 1<<(i%8)}, int64(i)); err != nil {
				t.Fatal(err)
			}
			problems, _ := Check(dir)
			if !slices.ContainsFunc(problems, func(p Problem) bool { return p.File == e.Name() }) {
				t.Fatalf("%s, byte %d, bit %d: %v", e.Name(), i, i%8, problems)
			}
			if _, err := f.WriteAt([]byte{b}, int64(i)); err != nil {
				t.Fatal(err)
			}
			bytes++
		}
	}
	if problems, _ := Check(dir); len(problems) > 0 || bytes < 2000 {
		t.Errorf("%d bytes tried; put back, the sheet has %v", bytes, problems)
	}
}
