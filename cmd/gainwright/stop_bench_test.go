//go:build unix

package main

import (
	"bytes"
	"io"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"slices"
	"testing"
	"time"

	"github.com/creack/pty"

	"gainwright/link/ptyport"
	"gainwright/protocol"
)

// BenchmarkStopKey measures from the key's byte in the terminal to the stop byte
// on the serial line, through two pseudo-terminals, for the console and in the
// same run for a program that does nothing else (testdata/floor). The two take
// turns, 25 presses each. It reports both medians, both 99th percentiles in µs,
// and their ratios. Wanted: median 1.3 (cores loaded 1.6), 99th percentile 5, with
// a terminal that does not read 2.
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
		name string
		pressing
		busy int
		disk bool // stalls
	}{
		{name: "idle"}, {name: "1000-lines", pressing: pressing{lines: 1000}}, {name: "5000-lines", pressing: pressing{lines: 5000}},
		{name: "20000-lines", pressing: pressing{lines: 20000}}, {name: "200x50", pressing: pressing{lines: 5000, rows: 50, cols: 200}},
		{name: "other-keys", pressing: pressing{lines: 1000, keys: 50}},
		{name: "cores-loaded", pressing: pressing{lines: 5000}, busy: runtime.NumCPU()},
		{name: "disk-stalls", pressing: pressing{lines: 1000}, disk: true},
		{name: "terminal-does-not-read", pressing: pressing{lines: 1000, deaf: true}},
	} {
		b.Run(c.name, func(b *testing.B) {
			for range c.busy {
				load := exec.Command(floor, "busy")
				if err := load.Start(); err != nil {
					b.Fatal(err)
				}
				defer func() { load.Process.Kill(); load.Wait() }()
			}
			out, stall := filepath.Join(b.TempDir(), "s"), func() {}
			if c.disk {
				var dir string
				dir, stall = stallingDisk(b)
				out = filepath.Join(dir, "s")
			}
			mine := c.pressing.start(b, []string{bin, "console", "--port", "", "--baud", "115200", "--out", out}, 3)
			defer mine.close()
			raw := c.pressing
			raw.deaf = false // a program that draws nothing has nobody to wait for
			fl := raw.start(b, []string{floor, ""}, 1)
			defer fl.close()
			time.Sleep(time.Second)
			stall()
			var m, r []time.Duration
			for len(m) < b.N {
				m = append(m, mine.press(min(25, b.N-len(m)))...)
				r = append(r, fl.press(min(25, b.N-len(r)))...)
			}
			for _, q := range []struct {
				name string
				at   float64
			}{{"p50", 0.5}, {"p99", 0.99}} {
				b.ReportMetric(quantile(m, q.at), q.name+"-µs")
				b.ReportMetric(quantile(r, q.at), q.name+"-floor-µs")
				b.ReportMetric(quantile(m, q.at)/quantile(r, q.at), q.name+"-ratio")
			}
		})
	}
}

func quantile(d []time.Duration, q float64) float64 {
	s := slices.Clone(d)
	slices.Sort(s)
	return float64(s[min(int(q*float64(len(s))), len(s)-1)].Nanoseconds()) / 1000
}

// stallingDisk mounts a small file system that can be frozen: whoever writes to it
// then waits. It needs Linux, root and a loop device.
func stallingDisk(b *testing.B) (dir string, stall func()) {
	b.Helper()
	dir, image := b.TempDir(), filepath.Join(b.TempDir(), "disk")
	for _, c := range [][]string{{"truncate", "-s", "32M", image}, {"mkfs.ext4", "-q", image}, {"mount", "-o", "loop", image, dir}} {
		if out, err := exec.Command(c[0], c[1:]...).CombinedOutput(); err != nil {
			b.Skipf("no disk to stall here: %v: %s", err, out)
		}
	}
	b.Cleanup(func() {
		exec.Command("fsfreeze", "-u", dir).Run()
		for range 20 { // the console has to be gone first
			if exec.Command("umount", dir).Run() == nil {
				return
			}
			time.Sleep(100 * time.Millisecond)
		}
	})
	return dir, func() {
		if out, err := exec.Command("fsfreeze", "-f", dir).CombinedOutput(); err != nil {
			b.Skipf("the disk does not stall: %v: %s", err, out)
		}
	}
}

// pressing is what goes on while the stop key is pressed.
type pressing struct {
	lines      int // of telemetry a second
	keys       int // other keys a second
	deaf       bool
	rows, cols uint16
}

// pressed is a program on a terminal and a port.
type pressed struct {
	pressing
	b     *testing.B
	port  *ptyport.Master
	tty   *os.File
	cmd   *exec.Cmd
	stops chan time.Time
	rng   *rand.Rand
}

// start runs a program on a terminal and a port, whose path goes into argument at,
// and waits for its first output.
func (c pressing) start(b *testing.B, args []string, at int) *pressed {
	b.Helper()
	port, path, err := ptyport.Open()
	if err != nil {
		b.Skip("no pseudo-terminals")
	}
	port.SetLossy(true)
	args = slices.Clone(args)
	args[at] = path
	cmd := exec.Command(args[0], args[1:]...)
	cmd.Env = append(cmd.Environ(), "TERM=xterm-256color", "LANG=C.UTF-8")
	if c.rows == 0 {
		c.rows, c.cols = 24, 80
	}
	tty, err := pty.StartWithSize(cmd, &pty.Winsize{Rows: c.rows, Cols: c.cols})
	if err != nil {
		b.Fatal(err)
	}
	p := &pressed{pressing: c, b: b, port: port, tty: tty, cmd: cmd, stops: make(chan time.Time, 64), rng: rand.New(rand.NewPCG(1, 2))}
	first := make(chan struct{})
	go func() {
		buf := make([]byte, 65536)
		for seen := 0; ; {
			k, err := tty.Read(buf)
			if seen == 0 && k > 0 {
				close(first)
			}
			seen += k
			if err != nil || c.deaf && seen > 2000 {
				return
			}
		}
	}()
	go func() {
		buf := make([]byte, 4096)
		for {
			k, err := port.Read(buf)
			now := time.Now()
			if err != nil {
				return
			}
			if bytes.IndexByte(buf[:k], protocol.Cut) >= 0 {
				p.stops <- now
			}
		}
	}()
	<-first
	return p
}

func (p *pressed) close() {
	p.cmd.Process.Kill()
	p.cmd.Wait()
	p.tty.Close()
	p.port.Close()
}

// press presses the stop key n times, while telemetry and other keys come.
func (p *pressed) press(n int) (took []time.Duration) {
	quit := make(chan struct{})
	defer close(quit)
	if p.lines > 0 {
		go flood(p.port, p.lines, quit)
	}
	if p.keys > 0 {
		go func() {
			tick := time.NewTicker(time.Second / time.Duration(p.keys))
			defer tick.Stop()
			for {
				select {
				case <-quit:
					return
				case <-tick.C:
					io.WriteString(p.tty, "j")
				}
			}
		}()
	}
	for range n {
		time.Sleep(time.Duration(8+p.rng.IntN(8)) * time.Millisecond)
		for len(p.stops) > 0 {
			<-p.stops
		}
		t0 := time.Now()
		io.WriteString(p.tty, " ")
		select {
		case t := <-p.stops:
			took = append(took, t.Sub(t0))
		case <-time.After(5 * time.Second):
			p.b.Fatalf("no stop byte within 5 s, press %d", len(took))
		}
	}
	return took
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
