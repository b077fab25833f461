package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

var updateSheets = flag.Bool("update-sheets", false, "do the jobs of testdata/sheets again")

const sheetsDir = "../../testdata/sheets"

// kept are the jobs whose records stand in testdata/sheets: simulated, on the
// board of thin.toml. They end after the push, so that they stay small.
var keptJobs = []struct {
	name string
	seed uint64
	skip job.StepID
	last job.StepID
}{
	{"20260102-080000-thin-7a31-23-rec00001", 1, job.StepLimits, job.StepPush},
	{"20260102-090000-thin-7a31-23-rec00002", 3, job.StepSecond, job.StepDesign},
}

// makeSheet does a job in virtual time up to a step, then as-left and card.
func makeSheet(t *testing.T, dir string, cfg simrig.Config, seed uint64, skip, last job.StepID, start time.Time) {
	t.Helper()
	r, text, err := bench.RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	v := bench.NewVirtual(simrig.New(cfg, seed), start)
	s, err := sheet.Create(dir, sheet.Header{Rig: r.Name, BoardID: cfg.Board.ID, Program: "gainwright test", Seed: seed,
		Start: start.Format(time.RFC3339Nano), Simulated: true}, sheet.WithClock(v.Now))
	if err != nil {
		t.Fatal(err)
	}
	j := job.New(v.Hands(s), job.Options{Rig: r, RigText: text, Version: "gainwright test", Seed: uint32(seed)})
	for _, p := range job.Path {
		if p.Optional {
			continue
		}
		if p.ID == skip {
			j.Skip(p.ID, "left out on purpose")
			continue
		}
		if err := j.Do(p.ID); err != nil {
			t.Fatalf("%s: %v", p.ID, err)
		}
		if p.ID == last {
			break
		}
	}
	for _, id := range []job.StepID{job.StepAsLeft, job.StepCard} {
		if err := j.Do(id); err != nil {
			t.Fatalf("%s: %v", id, err)
		}
	}
	if err := s.Close("ended", "ended after the "+string(last)+" on purpose"); err != nil {
		t.Fatal(err)
	}
}

func sheetsOfTestdata(t *testing.T) []string {
	t.Helper()
	if *updateSheets {
		cfg, err := simrig.Load(filepath.Join(sheetsDir, "thin.toml"))
		if err != nil {
			t.Fatal(err)
		}
		for i, k := range keptJobs {
			dir := filepath.Join(sheetsDir, k.name)
			if err := os.RemoveAll(dir); err != nil {
				t.Fatal(err)
			}
			makeSheet(t, dir, cfg, k.seed, k.skip, k.last, time.Date(2026, 1, 2, 8+i, 0, 0, 0, time.UTC))
		}
	}
	dirs, err := filepath.Glob(filepath.Join(sheetsDir, "*", "index.txt"))
	if err != nil || len(dirs) < len(keptJobs) {
		t.Fatalf("%d sheets in %s, want at least %d (%v)", len(dirs), sheetsDir, len(keptJobs), err)
	}
	for i := range dirs {
		dirs[i] = filepath.Dir(dirs[i])
	}
	return dirs
}

// command runs a command line in this process.
func command(args ...string) (code int, out, errs string) {
	var o, e bytes.Buffer
	code = run(args, &o, &e)
	return code, o.String(), e.String()
}

// object runs a command and decodes the one JSON object it must print.
func object(t *testing.T, want int, args ...string) map[string]any {
	t.Helper()
	code, out, errs := command(args...)
	if code != want {
		t.Fatalf("%v: exit %d, want %d\n%s%s", args, code, want, out, errs)
	}
	var m map[string]any
	d := json.NewDecoder(strings.NewReader(out))
	if err := d.Decode(&m); err != nil {
		t.Fatalf("%v: %v\n%s", args, err, out)
	}
	if d.More() {
		t.Fatalf("%v: more than one object on standard output", args)
	}
	return m
}

func TestSheetsRecompute(t *testing.T) {
	for _, dir := range sheetsOfTestdata(t) {
		m := object(t, exitDone, "recompute", dir, "--json")
		if m["identical"] != true || m["gains"] == nil || m["model"] == nil || m["chain"] != "agrees" {
			t.Errorf("%s: identical %v, chain %v", dir, m["identical"], m["chain"])
		}
		if n := m["compared"].(float64); n < 100 {
			t.Errorf("%s: only %v numbers compared", dir, n)
		}
		if code, out, _ := command("report", dir, "--check"); code != exitDone {
			t.Errorf("%s: %s", dir, out)
		}
		if size := sizeOfDir(t, dir); size > 300_000 {
			t.Errorf("%s is %d bytes, more than 300 kB", dir, size)
		}
	}
}

func sizeOfDir(t *testing.T, dir string) (n int64) {
	t.Helper()
	files, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		info, err := f.Info()
		if err != nil {
			t.Fatal(err)
		}
		n += info.Size()
	}
	return n
}

func copySheet(t *testing.T, from string) string {
	t.Helper()
	to := filepath.Join(t.TempDir(), filepath.Base(from))
	if err := os.CopyFS(to, os.DirFS(from)); err != nil {
		t.Fatal(err)
	}
	return to
}

// rechain writes the index anew over the files as they are now, as the head of an
// index says that it is done: a forger who knows the format.
func rechain(t *testing.T, dir string) {
	t.Helper()
	path := filepath.Join(dir, "index.txt")
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var head, body strings.Builder
	chain := ""
	for _, line := range strings.SplitAfter(string(text), "\n") {
		w := strings.Fields(line)
		switch {
		case strings.HasPrefix(line, "#"):
			head.WriteString(line)
			continue
		case len(w) != 7:
			continue
		}
		if chain == "" {
			chain = sha(head.String())
		}
		b, err := os.ReadFile(filepath.Join(dir, w[3]))
		if err != nil {
			t.Fatal(err)
		}
		w[4], w[5] = fmt.Sprint(len(b)), sha(string(b))
		row := strings.Join(w[:6], " ")
		chain = sha(chain + " " + row)
		body.WriteString(row + " " + chain + "\n")
	}
	if err := os.WriteFile(path, []byte(head.String()+body.String()), 0o644); err != nil {
		t.Fatal(err)
	}
}

func sha(s string) string {
	h := sha256.Sum256([]byte(s))
	return hex.EncodeToString(h[:])
}

// change replaces every old by new in each file of dir whose name holds part,
// and returns the name of one of them.
func change(t *testing.T, dir, part, old, new string) string {
	t.Helper()
	found, err := filepath.Glob(filepath.Join(dir, "*"+part+"*"))
	if err != nil || len(found) == 0 {
		t.Fatalf("no file like %s (%v)", part, err)
	}
	for _, path := range found {
		b, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if !strings.Contains(string(b), old) {
			t.Fatalf("%s does not hold %q", path, old)
		}
		if err := os.WriteFile(path, []byte(strings.ReplaceAll(string(b), old, new)), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return filepath.Base(found[0])
}

// A record that was changed does not compute as recorded: neither with its own
// chain, which says so, nor with a chain made to fit.
func TestRecomputeFindsChanges(t *testing.T) {
	dirs := sheetsOfTestdata(t)
	source := dirs[0]
	step, second := digitOf(t, source, "trace-step", "counts"), digitOf(t, source, "trace-prbs", "speed")
	for _, tt := range []struct {
		name, file, old, new string
		want                 string // in one of the differences
	}{
		{"a digit of the step trace", "trace-step", step[0], step[1], "fit-first-order.json model.num"},
		{"a digit of the second trace", "trace-prbs", second[0], second[1], "holdout_nrmse"},
		{"the kinds that are fitted", "fit-*-order", `"kind": "auto"`, `"kind": "second-order"`, "model"},
		{"the bound on Ms", "proposal-", `"ms_max": 1.6`, `"ms_max": 1.5`, "gains.ki"},
		{"the law of the board", "proposal-", `"window_s": 0.004`, `"window_s": 0.005`, "against the board's identity"},
		{"the seed of the worst case", "proposal-", `"worst_seed": "`, `"worst_seed": "7`, "worst.ms"},
		{"the words as found", "proposal-", "3CAC0831", "3CAC0832", "found_words"},
		{"the gain spread", "proposal-", `"worst_gain_max": 1`, `"worst_gain_max": 7`, "against the staircase"},
		{"the settings of one rule only", "proposal-simc", `"ms_max": 1.6`, `"ms_max": 1.5`, "proposals"},
		{"as-found", "as-found-board", "3CAC0831", "3CAC0832", "found_words"},
		{"the words that were pushed", "push-push", `"kp": "3`, `"kp": "2`, "words.kp"},
		{"a margin", "proposal-largest-ki", `"phase_margin_deg": 4`, `"phase_margin_deg": 5`, "phase_margin_deg"},
		{"the verdict", "fit-second-order", `"verdict": "refused"`, `"verdict": "believed"`, "fit-second-order.json verdict"},
		{"a number for people", "fit-first-order", `"plus_minus": 0`, `"plus_minus": 1`, "params"},
		{"a plotted point", "fit-first-order", `"fitted_rad_s": [`, `"fitted_rad_s": [1,`, "curve"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			dir := copySheet(t, source)
			file := change(t, dir, tt.file, tt.old, tt.new)
			m := object(t, exitFailed, "recompute", dir, "--json")
			if m["identical"] != false || !strings.Contains(m["error"].(string), "is not what was entered") {
				t.Errorf("%s with the old chain: identical %v, error %v", file, m["identical"], m["error"])
			}
			rechain(t, dir)
			if code, out, _ := command("report", dir, "--check"); code != exitDone {
				t.Fatalf("the forged chain does not agree with itself:\n%s", out)
			}
			m = object(t, exitFailed, "recompute", dir, "--json")
			var seen []string
			for _, d := range m["differences"].([]any) {
				d := d.(map[string]any)
				seen = append(seen, fmt.Sprint(d["what"]))
				if d["recorded"] == d["recomputed"] {
					t.Errorf("a difference between two equals: %v", d)
				}
			}
			if m["identical"] != false || !slices.ContainsFunc(seen, func(s string) bool { return strings.Contains(s, tt.want) }) {
				t.Errorf("want a difference that names %q, got %v, error %v", tt.want, seen, m["error"])
			}
		})
	}
}

// digitOf finds a row of a trace that a fit uses and returns it, and the same row
// with one digit of a column changed, the last before any point. The fit is made
// on counts and judged on speeds.
func digitOf(t *testing.T, dir, part, column string) [2]string {
	t.Helper()
	found, err := filepath.Glob(filepath.Join(dir, "*"+part+"*"))
	if err != nil || len(found) == 0 {
		t.Fatalf("no file like %s (%v)", part, err)
	}
	b, err := os.ReadFile(found[len(found)-1])
	if err != nil {
		t.Fatal(err)
	}
	rows := strings.Split(string(b), "\n")
	var names []string
	for _, r := range rows {
		if strings.HasPrefix(r, "time,") {
			names = strings.Split(r, ",")
		}
	}
	k := slices.Index(names, column)
	row := rows[len(rows)*5/6] // well after the count-down, which is at rest
	cells := strings.Split(row, ",")
	whole, rest, point := strings.Cut(cells[k], ".")
	digits := []byte(whole)
	at := len(digits) - 1
	digits[at] = '0' + (digits[at]-'0'+1)%10
	if cells[k] = string(digits); point {
		cells[k] += "." + rest
	}
	return [2]string{"\n" + row + "\n", "\n" + strings.Join(cells, ",") + "\n"}
}

// A job that is broken off after any of its entries leaves a record that
// computes as recorded, or that says that there is nothing to compute.
func TestRecomputeBrokenOff(t *testing.T) {
	source := sheetsOfTestdata(t)[1]
	text, err := os.ReadFile(filepath.Join(source, "index.txt"))
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.SplitAfter(strings.TrimRight(string(text), "\n"), "\n")
	dir := copySheet(t, source)
	counts := map[int]int{}
	for n := range lines {
		if strings.HasPrefix(lines[n], "#") {
			continue
		}
		if err := os.WriteFile(filepath.Join(dir, "index.txt"), []byte(strings.Join(lines[:n+1], "")), 0o644); err != nil {
			t.Fatal(err)
		}
		code, out, errs := command("recompute", dir)
		counts[code]++
		if code != exitDone && code != exitRefused {
			t.Errorf("broken off after %s: exit %d\n%s%s", strings.TrimSpace(lines[n]), code, out, errs)
		}
	}
	if counts[exitDone] < 3 || counts[exitRefused] < 10 {
		t.Errorf("exits %v: both ends of the job have to be seen", counts)
	}
}
