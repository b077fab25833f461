//go:build unix

package main

import (
	"io"
	"math/rand/v2"
	"os/exec"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/creack/pty"

	"gainwright/link/ptyport"
	"gainwright/protocol"
)

// BenchmarkStopKey measures from the key's byte in the terminal to the stop byte
// on the serial line, through two pseudo-terminals, for the console and in the
// same run for a program that does nothing else (testdata/floor). It reports
// both medians, both 99th percentiles in µs, and their ratios.
//
//	go test -run xxx -bench StopKey -benchtime 300x ./cmd/gainwright
func BenchmarkStopKey(b *testing.B) {
	bin, err := program()
	if err != nil {
		b.Fatal(err)
	}
	floor := filepath.Join(b.TempDir(), "floor")
	if out, err := exec.Command("go", "build", "-o", floor, "./testdata/floor").CombinedOutput(); err != nil {
		b.Fatalf("%v: %s", err, out)
	}
	for _, c := range []struct {
		name        string
		lines, busy int
		deaf        bool
		rows, cols  uint16
	}{
		{"idle", 0, 0, false, 24, 80}, {"1000-lines", 1000, 0, false, 24, 80}, {"5000-lines", 5000, 0, false, 24, 80},
		{"20000-lines", 20000, 0, false, 24, 80}, {"200x50", 5000, 0, false, 50, 200}, {"cores-loaded", 5000, runtime.NumCPU(), false, 24, 80},
		{"terminal-does-not-read", 1000, 0, true, 24, 80},
	} {
		b.Run(c.name, func(b *testing.B) {
			quit := make(chan struct{})
			defer close(quit)
			for range c.busy {
				go func() {
					for x := 1.0; ; x *= 1.0000001 {
						select {
						case <-quit:
							return
						default:
						}
					}
				}()
			}
			mine := presses(b, []string{bin, "console", "--port", "", "--out", filepath.Join(b.TempDir(), "s")}, 3, c.lines, c.deaf, c.rows, c.cols, b.N)
			raw := presses(b, []string{floor, ""}, 1, c.lines, false, c.rows, c.cols, b.N)
			for _, q := range []struct {
				name string
				at   float64
			}{{"p50", 0.5}, {"p99", 0.99}} {
				m, r := quantile(mine, q.at), quantile(raw, q.at)
				b.ReportMetric(m, q.name+"-µs")
				b.ReportMetric(r, q.name+"-floor-µs")
				b.ReportMetric(m/r, q.name+"-ratio")
			}
		})
	}
}

func quantile(d []time.Duration, q float64) float64 {
	s := slices.Clone(d)
	slices.Sort(s)
	return float64(s[min(int(q*float64(len(s))), len(s)-1)].Nanoseconds()) / 1000
}

// presses runs a program on a terminal and a port (whose path goes into argument
// at) and presses the stop key n times.
func presses(b *testing.B, args []string, at, lines int, deaf bool, rows, cols uint16, n int) []time.Duration {
	b.Helper()
	port, path, err := ptyport.Open()
	if err != nil {
		b.Skip("no pseudo-terminals")
	}
	defer port.Close()
	port.SetLossy(true)
	args = slices.Clone(args)
	args[at] = path
	cmd := exec.Command(args[0], args[1:]...)
	cmd.Env = append(cmd.Environ(), "TERM=xterm-256color", "LANG=C.UTF-8")
	tty, err := pty.StartWithSize(cmd, &pty.Winsize{Rows: rows, Cols: cols})
	if err != nil {
		b.Fatal(err)
	}
	defer func() { cmd.Process.Kill(); cmd.Wait(); tty.Close() }()
	read := make(chan struct{})
	go func() {
		buf := make([]byte, 65536)
		for seen := 0; ; {
			k, err := tty.Read(buf)
			if seen == 0 && k > 0 {
				close(read)
			}
			seen += k
			if err != nil || deaf && seen > 2000 {
				return
			}
		}
	}()
	stops := make(chan time.Time, 64)
	go func() {
		buf := make([]byte, 4096)
		for {
			k, err := port.Read(buf)
			now := time.Now()
			if err != nil {
				return
			}
			if strings.IndexByte(string(buf[:k]), protocol.Cut) >= 0 {
				stops <- now
			}
		}
	}()
	quit := make(chan struct{})
	defer close(quit)
	if lines > 0 {
		go flood(port, lines, quit)
	}
	<-read
	time.Sleep(time.Second)
	rng := rand.New(rand.NewPCG(1, 2))
	var out []time.Duration
	for range n {
		time.Sleep(time.Duration(8+rng.IntN(8)) * time.Millisecond)
		for len(stops) > 0 {
			<-stops
		}
		t0 := time.Now()
		io.WriteString(tty, " ")
		select {
		case t := <-stops:
			out = append(out, t.Sub(t0))
		case <-time.After(5 * time.Second):
			b.Fatalf("no stop byte within 5 s, press %d", len(out))
		}
	}
	return out
}

// flood writes telemetry at a rate, in bursts of ten milliseconds.
func flood(w io.Writer, lines int, quit chan struct{}) {
	tick := time.NewTicker(10 * time.Millisecond)
	defer tick.Stop()
	var b []byte
	for seq, us := 0, 0; ; {
		select {
		case <-quit:
			return
		case <-tick.C:
		}
		b = b[:0]
		for range lines / 100 {
			seq, us = seq+1, us+1_000_000/lines
			b = protocol.AppendFast(b, protocol.RawFast{Seq: uint8(seq), TimeUS: uint32(us) & 0xFFFFFF})
		}
		if _, err := w.Write(b); err != nil {
			return
		}
	}
}
