//go:build linux

package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/tune/bench"
)

// BenchmarkSoak runs the console on a simulated board that sends a thousand
// samples a second, with its record and its tape on the disk and frames on a
// terminal, for as long as GAINWRIGHT_SOAK says (a minute where it says nothing).
// It reports what is resident after the first tenth, at most the first minute, and
// at the end. Wanted: at most 60 MB, no growth after the first minute, no loss.
func BenchmarkSoak(b *testing.B) {
	lasts := time.Minute
	if s := os.Getenv("GAINWRIGHT_SOAK"); s != "" {
		var err error
		if lasts, err = time.ParseDuration(s); err != nil {
			b.Fatal(err)
		}
	}
	bin, err := program()
	if err != nil {
		b.Fatal(err)
	}
	cfg, err := simrig.Load("../../testdata/rigs/servo48.toml")
	if err != nil {
		b.Fatal(err)
	}
	for range b.N {
		board, err := bench.ServePTY(simrig.New(cfg, 1))
		if err != nil {
			b.Skip("no pseudo-terminals")
		}
		d := startConsole(b, bin, "console", "--port", board.Path, "--baud", fmt.Sprint(cfg.Board.Baud), "--rig", "../../testdata/rigs/servo48.rig.toml")
		d.until("a record", 30*time.Second, d.kept("event-limits"))
		board.Rig(func(r *simrig.Rig) { r.Receive(protocol.AppendRequest(nil, "rate", 60000, "1000 x t")) })
		first := min(lasts/10, time.Minute)
		time.Sleep(first)
		early, cpu := resident(b, d.cmd.Process.Pid), scheduled(b, d.cmd.Process.Pid)
		time.Sleep(lasts - first)
		late := resident(b, d.cmd.Process.Pid)
		cpu = scheduled(b, d.cmd.Process.Pid) - cpu
		time.Sleep(time.Second) // for the tape to be on the disk
		kept := taped(b, d.sheet)
		b.ReportMetric(early, "MB-early")
		b.ReportMetric(late, "MB-end")
		b.ReportMetric(100*cpu.Seconds()/(lasts-first).Seconds(), "%core")
		b.ReportMetric(float64(kept.Samples), "samples-on-tape")
		b.ReportMetric(float64(kept.Lost+kept.BadLines), "lost")
		d.cmd.Process.Kill()
		board.Close()
	}
}

// resident is the memory of a process that is in RAM, in MB.
func resident(b *testing.B, pid int) float64 {
	b.Helper()
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/status", pid))
	if err != nil {
		b.Fatal(err)
	}
	_, after, _ := strings.Cut(string(text), "VmRSS:")
	var kB float64
	if _, err := fmt.Sscan(after, &kB); err != nil {
		b.Fatal(err)
	}
	return kB * 1024 / 1e6
}

// taped is what a framer makes of the board's bytes in a tape.
func taped(b *testing.B, sheet string) protocol.Stats {
	b.Helper()
	m, err := filepath.Glob(filepath.Join(sheet, "*tape*"))
	if err != nil || len(m) == 0 {
		b.Fatalf("no tape in %s", sheet)
	}
	f, err := os.Open(m[0])
	if err != nil {
		b.Fatal(err)
	}
	defer f.Close()
	var framer protocol.Framer
	r, err := tape.NewReader(f)
	if err != nil {
		b.Fatal(err)
	}
	for {
		rec, err := r.Next()
		if err != nil { // the console was killed: its last line may be cut
			return framer.Stats
		}
		switch rec.Dir {
		case tape.FromBoard:
			framer.Feed(rec.Bytes, unheard{})
		case tape.Loss:
			b.Errorf("the tape lost something: %s", rec.Bytes)
		}
	}
}

type unheard struct{}

func (unheard) Sample(protocol.Sample) {}
func (unheard) Line([]byte)            {}
func (unheard) Bad([]byte, error)      {}
