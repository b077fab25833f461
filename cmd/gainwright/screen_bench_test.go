//go:build unix

package main

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/creack/pty"

	"gainwright/link/ptyport"
)

// BenchmarkScreen runs the console on a terminal while telemetry comes in, and
// beside it a Bubble Tea program that reads the same lines and draws plain text of
// the same size thirty times a second. It compares processor time, as the
// scheduler counts it, and bytes a second. Wanted: cpu ratio 1.5 at most; at 5000
// lines a second 10 % of a core at most. The terminal answers no question, as some
// do not.
func BenchmarkScreen(b *testing.B) {
	bin, floor := screenPrograms(b)
	for _, c := range []struct {
		name       string
		rows, cols uint16
		lines      int // a second
	}{{"80x24", 24, 80, 100}, {"200x50", 50, 200, 100}, {"200x50-5000-lines-a-second", 50, 200, 5000}} {
		b.Run(c.name, func(b *testing.B) {
			var mine, raw, ratio []float64
			var rate, rawRate float64
			for range b.N {
				console := consoleOn(b, bin, c.lines)
				m := drawn(b, console, c.rows, c.cols, 4*time.Second)
				r := drawn(b, []string{floor, console[3]}, c.rows, c.cols, 4*time.Second)
				mine, raw, ratio = append(mine, m.cpu), append(raw, r.cpu), append(ratio, m.cpu/r.cpu)
				rate, rawRate = m.rate, r.rate
			}
			b.ReportMetric(middle(mine), "%core")
			b.ReportMetric(middle(raw), "%core-floor")
			b.ReportMetric(middle(ratio), "cpu-ratio")
			b.ReportMetric(rate/1000, "kB/s")
			b.ReportMetric(rawRate/1000, "kB/s-floor")
		})
	}
}

// BenchmarkFirstFrame measures from the start of the program to its first frame,
// against a program that shows one word. Wanted: ratio 1.5 at most.
func BenchmarkFirstFrame(b *testing.B) {
	bin, floor := screenPrograms(b)
	var mine, raw []time.Duration
	for range b.N {
		mine = append(mine, firstFrame(b, consoleOn(b, bin, 100), "space"))
		raw = append(raw, firstFrame(b, []string{floor, "hello"}, "hello"))
	}
	m, r := quantile(mine, 0.5)/1000, quantile(raw, 0.5)/1000
	b.ReportMetric(m, "ms")
	b.ReportMetric(r, "ms-hello")
	b.ReportMetric(m/r, "ratio")
}

func screenPrograms(b *testing.B) (console, floor string) {
	b.Helper()
	console, err := program()
	if err != nil {
		b.Fatal(err)
	}
	floor = filepath.Join(b.TempDir(), "screenfloor")
	if out, err := exec.Command("go", "build", "-o", floor, "./testdata/screenfloor").CombinedOutput(); err != nil {
		b.Fatalf("%v: %s", err, out)
	}
	return console, floor
}

// consoleOn is a command line that opens the console on a port with so many lines
// a second.
func consoleOn(b *testing.B, bin string, lines int) []string {
	b.Helper()
	port, path, err := ptyport.Open()
	if err != nil {
		b.Skip("no pseudo-terminals")
	}
	port.SetLossy(true)
	quit := make(chan struct{})
	b.Cleanup(func() { close(quit); port.Close() })
	go flood(port, lines, quit)
	return []string{bin, "console", "--port", path, "--baud", "115200", "--out", filepath.Join(b.TempDir(), "s")}
}

// answered is the terminal's answer to a floor program's question for colours:
// without one Bubble Tea waits five seconds. The console gets none.
func answered(tty io.Writer, asked []byte, args []string) {
	if strings.HasSuffix(args[0], "screenfloor") && bytes.Contains(asked, []byte("\x1b]11;?")) {
		io.WriteString(tty, "\x1b]11;rgb:0000/0000/0000\x07\x1b[1;1R")
	}
}

type drawing struct {
	cpu  float64 // percent of a core
	rate float64 // bytes a second
}

// drawn runs a program on a terminal and measures from one second after its
// start on.
func drawn(b *testing.B, args []string, rows, cols uint16, lasts time.Duration) drawing {
	b.Helper()
	cmd := exec.Command(args[0], args[1:]...)
	cmd.Env = append(cmd.Environ(), "TERM=xterm-256color", "LANG=C.UTF-8")
	tty, err := pty.StartWithSize(cmd, &pty.Winsize{Rows: rows, Cols: cols})
	if err != nil {
		b.Fatal(err)
	}
	defer func() { cmd.Process.Kill(); cmd.Wait(); tty.Close() }()
	var sum atomic.Int64
	go func() {
		for buf := make([]byte, 65536); ; {
			k, err := tty.Read(buf)
			sum.Add(int64(k))
			answered(tty, buf[:k], args)
			if err != nil {
				return
			}
		}
	}()
	time.Sleep(time.Second)
	cpu, n := scheduled(b, cmd.Process.Pid), sum.Load()
	time.Sleep(lasts)
	cpu, n = scheduled(b, cmd.Process.Pid)-cpu, sum.Load()-n
	return drawing{cpu: 100 * float64(cpu) / float64(lasts), rate: float64(n) / lasts.Seconds()}
}

// scheduled is how long the threads of a process have run. Counting by clock
// ticks would not do: a program that wakes on a timer is always there at the tick.
func scheduled(b *testing.B, pid int) (d time.Duration) {
	files, _ := filepath.Glob(fmt.Sprintf("/proc/%d/task/*/schedstat", pid))
	if len(files) == 0 {
		b.Skip("this system does not count the time of threads")
	}
	for _, f := range files {
		text, _ := os.ReadFile(f)
		ns, _, _ := strings.Cut(string(text), " ")
		n, _ := strconv.ParseInt(ns, 10, 64)
		d += time.Duration(n)
	}
	return d
}

func firstFrame(b *testing.B, args []string, word string) time.Duration {
	b.Helper()
	cmd := exec.Command(args[0], args[1:]...)
	cmd.Env = append(cmd.Environ(), "TERM=xterm-256color", "LANG=C.UTF-8")
	t0 := time.Now()
	tty, err := pty.StartWithSize(cmd, &pty.Winsize{Rows: 24, Cols: 80})
	if err != nil {
		b.Fatal(err)
	}
	defer func() { cmd.Process.Kill(); cmd.Wait(); tty.Close() }()
	var seen bytes.Buffer
	buf := make([]byte, 65536)
	for !strings.Contains(seen.String(), word) {
		n, err := tty.Read(buf)
		seen.Write(buf[:n])
		answered(tty, buf[:n], args)
		if err != nil || time.Since(t0) > 20*time.Second {
			b.Fatalf("no first frame: %v\n%.300q", err, seen.String())
		}
	}
	return time.Since(t0)
}
