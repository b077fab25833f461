//go:build unix

package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"

	"gainwright/link/ptyport"
)

// A board that prints its own lines is recorded and its record fitted; nothing is
// ever sent to it.
func TestWatchRecordsForAFit(t *testing.T) {
	port, path, err := ptyport.Open()
	if err != nil {
		t.Skip("no pseudo-terminals")
	}
	dir := t.TempDir()
	csv := filepath.Join(dir, "trace.csv")
	var sent atomic.Int64
	go func() {
		b := make([]byte, 256)
		for {
			n, err := port.Read(b)
			sent.Add(int64(n))
			if err != nil {
				return
			}
		}
	}()
	var msg bytes.Buffer
	said, say := io.Pipe()
	done := make(chan int)
	go func() {
		code := run([]string{"watch", "--port", path, "--adapter", "../../testdata/adapters/milliseconds.toml", "--out", csv}, &bytes.Buffer{}, say)
		say.Close()
		done <- code
	}()
	// Opening a port throws away what came before: wait for its word.
	lines := bufio.NewReader(said)
	first, err := lines.ReadString('\n')
	if err != nil {
		t.Fatal(err)
	}
	msg.WriteString(first)
	heard := make(chan struct{})
	go func() { io.Copy(&msg, lines); close(heard) }()
	// K = 21 rad/s per V, tau = 80 ms, every 5 ms; a pseudo-terminal passes what
	// is written only as it is read.
	const k, tau, h = 21.0, 0.08, 0.005
	w, volts := 0.0, 6.0
	port.Write([]byte("# tuner 1.4 ready\r\n"))
	for i := range 4000 {
		if i%97 == 0 {
			volts = 6 + float64((i/97*7)%5)
		}
		line := fmt.Sprintf("%d,%.3f,%d\r\n", (60000+5*i)%65536, w*60/(2*math.Pi), int(volts*1000))
		if _, err := port.Write([]byte(line)); err != nil {
			t.Fatal(err)
		}
		next := 6 + float64(((i+1)/97*7)%5)
		w = k*next + (w-k*next)*math.Exp(-h/tau)
	}
	port.Close()
	code := <-done
	<-heard
	if code != exitDone {
		t.Fatalf("exit %d: %s", code, msg.String())
	}
	if n := sent.Load(); n != 0 {
		t.Errorf("%d bytes were sent to a board that is look-only", n)
	}
	if !strings.Contains(msg.String(), "look-only") || !strings.Contains(msg.String(), "LINK LOST") {
		t.Errorf("it says %q", msg.String())
	}
	text, err := os.ReadFile(csv)
	if err != nil || bytes.Count(text, []byte{'\n'}) < 3000 {
		t.Fatalf("%d lines kept: %v", bytes.Count(text, []byte{'\n'}), err)
	}
	var out bytes.Buffer
	run([]string{"fit", csv, "--kind", "first-order", "--json"}, &out, &msg)
	var fit struct {
		Models []struct {
			Num, Den []float64
		}
	}
	if err := json.Unmarshal(out.Bytes(), &fit); err != nil || len(fit.Models) == 0 {
		t.Fatalf("%v: %.300s", err, out.String())
	}
	m := fit.Models[0]
	gain, lag := m.Num[0]/m.Den[1], m.Den[0]/m.Den[1]
	if math.Abs(gain/k-1) > 0.01 || math.Abs(lag/tau-1) > 0.03 {
		t.Errorf("fitted K %.4g, tau %.4g; the board has %g, %g", gain, lag, k, tau)
	}
	// A second recording does not overwrite the first.
	if code := run([]string{"watch", "--port", path, "--adapter", "../../testdata/adapters/milliseconds.toml", "--out", csv}, &out, &msg); code != exitUsage {
		t.Errorf("exit %d for a file that is there", code)
	}
}
