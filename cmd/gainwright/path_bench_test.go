//go:build unix

package main

import (
	"context"
	"io"
	"path/filepath"
	"runtime"
	"slices"
	"syscall"
	"testing"
	"time"

	"gainwright/link"
	"gainwright/link/ptyport"
	"gainwright/protocol"
	"gainwright/safety/rig"
	"gainwright/tune/bench"
	"gainwright/tune/sheet"
)

// BenchmarkWholePath sends telemetry through a pseudo-terminal that is opened
// like any port, and compares two readers in the same run: one that only counts
// the bytes, and the console's whole path behind it (tape on disk, framer, limiter,
// what the screens show). Wanted: ratio 1.3 at most, nothing lost.
//
// In full: as fast as the kernel passes lines on, by the clock, and by the
// processor time of the process, which others on the machine disturb less; medians. At 5000 lines a
// second: by the processor time of the whole process, of which a share belongs to
// the board's side of the line; wanted: at most 10 % of a core more than counting.
func BenchmarkWholePath(b *testing.B) {
	old := runtime.GOMAXPROCS(runtime.NumCPU() + 2) // as the console has it
	defer runtime.GOMAXPROCS(old)
	b.Run("in-full", func(b *testing.B) {
		const lines = 200_000
		var counting, whole, ratio, cpuRatio, more []float64
		for range b.N {
			t0, cpu0 := streamed(b, lines, 0, false)
			t, cpu := streamed(b, lines, 0, true)
			counting, whole = append(counting, float64(t0.Nanoseconds())/lines), append(whole, float64(t.Nanoseconds())/lines)
			ratio, cpuRatio = append(ratio, float64(t)/float64(t0)), append(cpuRatio, float64(cpu)/float64(cpu0))
			more = append(more, float64((cpu-cpu0).Nanoseconds())/lines)
		}
		b.ReportMetric(middle(counting), "ns/line-counting")
		b.ReportMetric(middle(whole), "ns/line")
		b.ReportMetric(middle(ratio), "ratio")
		b.ReportMetric(middle(cpuRatio), "cpu-ratio")
		b.ReportMetric(middle(more), "cpu-ns/line-more")
	})
	b.Run("5000-lines-a-second", func(b *testing.B) {
		const lines = 15_000
		var counting, whole, more []float64
		for range b.N {
			wall, cpu0 := streamed(b, lines, 5000, false)
			_, cpu := streamed(b, lines, 5000, true)
			counting, whole = append(counting, 100*float64(cpu0)/float64(wall)), append(whole, 100*float64(cpu)/float64(wall))
			more = append(more, 100*float64(cpu-cpu0)/float64(wall))
		}
		b.ReportMetric(middle(counting), "%core-counting")
		b.ReportMetric(middle(whole), "%core")
		b.ReportMetric(middle(more), "%core-more")
	})
}

// streamed passes lines through a pseudo-terminal (rate 0: as fast as they go)
// and returns how long that took by the clock and in processor time.
func streamed(b *testing.B, lines, rate int, whole bool) (wall, cpu time.Duration) {
	b.Helper()
	port, path, err := ptyport.Open()
	if err != nil {
		b.Skip("no pseudo-terminals")
	}
	defer port.Close()
	var seen func() uint64
	if whole {
		dir := filepath.Join(b.TempDir(), "sheet")
		o := bench.Options{Program: "gainwright", Open: consoleFlags{baud: 115200}.open,
			NewSheet: func(board string, r rig.Rig) (*sheet.Sheet, error) {
				return sheet.Create(dir, sheet.Header{Rig: r.Name, BoardID: board, Program: "gainwright"})
			}}
		live := bench.NewLive(o)
		defer live.Close()
		live.Connect(path)
		seen = func() uint64 { v := live.View(); return v.Link.Frames + v.Link.Lost }
		defer func() {
			if lost := live.View().Link.Lost; lost > 0 && !b.Failed() {
				b.Errorf("%d of %d lines lost", lost, lines)
			}
		}()
		go io.Copy(io.Discard, port) // what the console asks; nobody answers
	} else {
		opened, err := consoleFlags{baud: 115200}.open(path)
		for range 100 { // the kernel gives names again that a reader is still leaving
			if err == nil {
				break
			}
			time.Sleep(10 * time.Millisecond)
			opened, err = consoleFlags{baud: 115200}.open(path)
		}
		if err != nil {
			b.Fatal(err)
		}
		defer opened.Port.Close()
		n := make(chan uint64, 1)
		n <- 0
		r := link.NewReader(opened.Port, link.ReaderConfig{OnBytes: func(_ time.Duration, c []byte) { n <- <-n + uint64(len(c)) }})
		ctx, cancel := context.WithCancel(context.Background())
		defer cancel()
		go r.Run(ctx)
		seen = func() uint64 { k := <-n; n <- k; return k / protocol.HexLine }
	}
	time.Sleep(200 * time.Millisecond) // for the port to be open
	var text []byte
	for i := range lines {
		text = protocol.AppendFast(text, protocol.RawFast{Seq: uint8(i), TimeUS: uint32(i*200) & 0xFFFFFF, Speed: int16(i & 1023)})
	}
	cpu0, t0 := processorTime(b), time.Now()
	for at, due := 0, t0; at < len(text); {
		n := min(4096, len(text)-at)
		if rate > 0 { // bursts of ten milliseconds
			n = min(rate/100*protocol.HexLine, len(text)-at)
			due = due.Add(10 * time.Millisecond)
			time.Sleep(time.Until(due))
		}
		k, err := port.Write(text[at : at+n])
		if err != nil {
			b.Fatal(err)
		}
		at += k
	}
	for end := time.Now().Add(5 * time.Second); seen() < uint64(lines); time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			b.Fatalf("%d of %d lines arrived", seen(), lines)
		}
	}
	return time.Since(t0), processorTime(b) - cpu0
}

// middle is the median.
func middle(x []float64) float64 {
	x = slices.Sorted(slices.Values(x))
	return (x[(len(x)-1)/2] + x[len(x)/2]) / 2
}

func processorTime(b *testing.B) time.Duration {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}
