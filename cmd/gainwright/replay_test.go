package main

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/tune/trace"
)

// simulatedTape records three seconds of talk with a simulated board: identity, then
// telemetry while the shaft is turned by hand, a stop, a broken line, a loss and
// a remark. It returns the tape's file and the turns of the shaft.
func simulatedTape(t *testing.T) (path string, turns float64) {
	t.Helper()
	cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	path = filepath.Join(t.TempDir(), "tape.txt")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	w := tape.NewWriter(f, tape.Config{Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC)})
	board := simrig.New(cfg, 1)
	now := time.Duration(0)
	wait := func(d time.Duration) {
		for end := now + d; now < end; {
			now += time.Millisecond
			board.Advance(now)
			if b := board.Output(); len(b) > 0 {
				w.Record(now, tape.FromBoard, b)
			}
		}
	}
	send := func(b []byte) { w.Record(now, tape.ToBoard, b); board.Receive(b) }
	wait(100 * time.Millisecond)
	send(protocol.AppendRequest(nil, protocol.VerbID, 1, ""))
	wait(200 * time.Millisecond)
	send(protocol.AppendRequest(nil, protocol.VerbRate, 2, "100 x tu"))
	wait(100 * time.Millisecond)
	before := board.Angle()
	board.Hand(1)
	wait(2300 * time.Millisecond)
	turns = (board.Angle() - before) / (2 * math.Pi)
	send([]byte{protocol.Cut})
	wait(20 * time.Millisecond)
	w.Record(now, tape.FromBoard, []byte("t 1 2 \x1b[2Jnonsense;0000\n"))
	w.Record(now, tape.Loss, []byte("lost 3 chunks 212 bytes"))
	w.Remark(now, "operator said \x1b[31mhello")
	if err := w.Close(context.Background()); err != nil {
		t.Fatal(err)
	}
	return path, turns
}

func TestReplayCommand(t *testing.T) {
	path, _ := simulatedTape(t)
	code, out, errs := command("replay", path)
	if code != exitDone {
		t.Fatalf("exit %d %s", code, errs)
	}
	for _, want := range []string{"> id 1", "< id proto 1.", "< ok 1 ", "< sample ", " rpm ", "CUT x1", "BAD ", "! lost 3 chunks", `# operator said \x1b[31mhello`, "board 7A31-22", "0 lost"} {
		if !strings.Contains(out, want) {
			t.Errorf("the replay does not show %q", want)
		}
	}
	if strings.Contains(out, "\x1b") {
		t.Error("an escape sequence of the tape reached the terminal")
	}
	_, brief, _ := command("replay", path, "--brief")
	if strings.Contains(brief, "< sample ") || !strings.Contains(brief, " samples, off") || strings.Count(brief, "\n") > strings.Count(out, "\n")/2 {
		t.Errorf("brief:\n%s", brief)
	}
	m := object(t, exitDone, "replay", path, "--json")
	if m["samples"].(float64) < 200 || m["cuts"] != 1.0 || m["bad_lines"] != 1.0 || m["losses"] != 1.0 || m["samples_lost"] != 0.0 || m["cut_short"] != false || m["requests"] != 2.0 {
		t.Errorf("%v", m)
	}
	_, part, _ := command("replay", path, "--from", "0.5", "--to", "0.6")
	for _, l := range strings.Split(strings.TrimSpace(part), "\n") {
		var at float64
		if _, err := fmt.Sscanf(l, "%f <", &at); err == nil && strings.Contains(l, "sample") && (at < 0.5 || at > 0.6) {
			t.Errorf("outside of the part asked for: %s", l)
		}
	}
}

// One turn by hand is 2000 counts on this rig, in the trace as on the tape, and
// the speed in rad/s adds up to 2π.
func TestReplayMakesATrace(t *testing.T) {
	path, turns := simulatedTape(t)
	csv := filepath.Join(t.TempDir(), "trace.csv")
	if code, _, errs := command("replay", path, "--csv", csv, "--brief"); code != exitDone {
		t.Fatalf("exit %d %s", code, errs)
	}
	tr, err := trace.ReadFile(csv)
	if err != nil {
		t.Fatal(err)
	}
	n := tr.Len()
	if got := tr.Counts[n-1] - tr.Counts[0]; math.Abs(got-2000*turns) > 4 {
		t.Errorf("%v counts, want about %v", got, 2000*turns)
	}
	angle := 0.0
	for i := 1; i < n; i++ {
		angle += tr.Speed[i] * (tr.Time[i] - tr.Time[i-1])
	}
	if math.Abs(angle-2*math.Pi*turns) > 0.05*2*math.Pi {
		t.Errorf("speed adds up to %.3f rad, want about %.3f", angle, 2*math.Pi*turns)
	}
	if math.Abs(tr.Window-0.004) > 1e-9 || math.Abs(tr.RadPerCount-2*math.Pi/2000) > 1e-9 {
		t.Errorf("window %v s, %v rad per count", tr.Window, tr.RadPerCount)
	}
}

// A tape without an identity has no scales: no trace is made of it.
func TestReplayNeedsScales(t *testing.T) {
	path := filepath.Join(t.TempDir(), "tape.txt")
	line := protocol.AppendFast(nil, protocol.RawFast{Seq: 1, TimeUS: 1000, Speed: 5})
	text := "gainwright tape 1 2026-01-02T08:00:00Z\n1000 < " + strings.ReplaceAll(string(line), "\n", `\n`) + "\n2000 ? nothing\n"
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	code, out, errs := command("replay", path)
	if code != exitFailed || !strings.Contains(errs, "tape:3:") || !strings.Contains(out, "no identity") {
		t.Errorf("exit %d\n%s%s", code, out, errs)
	}
	if code, _, errs := command("replay", path, "--csv", filepath.Join(t.TempDir(), "x.csv")); code != exitRefused || !strings.Contains(errs, "scales") {
		t.Errorf("exit %d %s", code, errs)
	}
}
