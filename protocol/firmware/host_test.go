// Package firmware_test runs the C firmware on this machine, in a time of its
// own, and speaks to it with the codec of package protocol.
package firmware_test

import (
	"bufio"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"gainwright/protocol"
)

// warnings is what every compiler must be silent about.
var warnings = []string{"-std=c99", "-Wall", "-Wextra", "-Wconversion", "-Wshadow", "-Wstrict-prototypes", "-pedantic", "-Werror"}

// variants are the builds of the host program that tests use.
var variants = map[string][]string{
	"float": {"-O1", "-g", "-fsanitize=address,undefined", "-fno-sanitize-recover=all"},
	"fixed": {"-O1", "-g", "-fsanitize=address,undefined", "-fno-sanitize-recover=all", "-DGW_FIXED=1"},
}

var buildDir string

func TestMain(m *testing.M) {
	dir, err := os.MkdirTemp("", "firmware")
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	buildDir = dir
	code := m.Run()
	os.RemoveAll(dir)
	os.Exit(code)
}

// need skips the test, with a word, where a program is not installed.
func need(t *testing.T, program string) {
	t.Helper()
	if _, err := exec.LookPath(program); err != nil {
		t.Skipf("%s is not installed", program)
	}
}

func glob(t *testing.T, patterns ...string) (files []string) {
	t.Helper()
	for _, p := range patterns {
		// The core may be built from elsewhere: so it is shown that breaking a line of
		// it is seen.
		if dir := os.Getenv("GAINWRIGHT_CORE"); dir != "" && strings.HasPrefix(p, "core/") {
			p = filepath.Join(dir, p[len("core/"):])
		}
		m, err := filepath.Glob(p)
		if err != nil || len(m) == 0 {
			t.Fatalf("no files match %s", p)
		}
		files = append(files, m...)
	}
	return files
}

// hostBinary builds a variant of the host program, once.
func hostBinary(t *testing.T, variant string) string {
	t.Helper()
	need(t, "gcc")
	out := filepath.Join(buildDir, "gwhost-"+variant)
	if _, err := os.Stat(out); err == nil {
		return out
	}
	args := append([]string{"-Icore", "-Ihost", "-o", out}, warnings...)
	args = append(args, variants[variant]...)
	args = append(args, glob(t, "core/*.c", "host/*.c")...)
	args = append(args, "-lm")
	if msg, err := exec.Command("gcc", args...).CombinedOutput(); err != nil {
		t.Fatalf("gcc: %v\n%s", err, msg)
	}
	return out
}

// The keys of S orders; see host/host.c.
const (
	setJam = iota
	setEncoder
	setInputs
	setLoad
	setSupply
	setFault
	setStoreFails
	setHang
	setKick
)

// scales are those that the host build declares; TestIdentity compares them.
var scales = protocol.Scales{SpeedLSB: float64(float32(2 * math.Pi / 2000 / 0.005 / 4)), VoltsLSB: 0.002, CurrentLSB: 0.001, BusLSB: 0.002}

// truth is what the simulated hardware itself says.
type truth struct {
	State            protocol.State
	Driven, Wanted   int   // mV across the bridge, mV the firmware set
	Speed, MilliAmps int   // mrad/s, mA
	US, OffUS        int64 // board time; when the bridge last went off
}

// board is a running firmware. Its lines and samples collect until they are taken.
type board struct {
	t       *testing.T
	in      io.WriteCloser
	out     *bufio.Reader
	framer  protocol.Framer
	raw     []byte // everything it ever sent
	samples []protocol.Sample
	lines   []string
	bad     []string
	n       uint16
	token   uint16
	k       uint16
	limits  uint16   // CRC of the limits in use
	live    net.Conn // an emulator that runs in real time; nil: host/host.c
}

func (b *board) Sample(s protocol.Sample)           { b.samples = append(b.samples, s) }
func (b *board) Line(body []byte)                   { b.lines = append(b.lines, string(body)) }
func (b *board) Bad(raw []byte, err error)          { b.bad = append(b.bad, fmt.Sprintf("%q %v", raw, err)) }
func (b *board) take() (lines []string)             { lines, b.lines = b.lines, nil; return lines }
func (b *board) takeSamples() (s []protocol.Sample) { s, b.samples = b.samples, nil; return s }

// start runs a variant and waits for its first line.
func start(t *testing.T, variant string) *board {
	t.Helper()
	cmd := exec.Command(hostBinary(t, variant), "--virtual")
	cmd.Stderr = os.Stderr
	in, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	b := &board{t: t, in: in, out: bufio.NewReader(out)}
	b.framer.Scales = scales
	t.Cleanup(func() {
		in.Close()
		if err := cmd.Wait(); err != nil {
			t.Errorf("the firmware ended with %v: a sanitizer found something, see above", err)
		}
		if len(b.bad) > 0 {
			t.Errorf("lines that the codec refuses: %v", b.bad)
		}
	})
	b.run(20)
	return b
}

// order gives one order to the host program and returns its reply.
func (b *board) order(op byte, arg uint32, payload []byte) []byte {
	b.t.Helper()
	msg := binary.LittleEndian.AppendUint32([]byte{op}, arg)
	if _, err := b.in.Write(append(msg, payload...)); err != nil {
		b.t.Fatalf("the firmware is gone: %v", err)
	}
	var head [4]byte
	if _, err := io.ReadFull(b.out, head[:]); err != nil {
		b.t.Fatalf("the firmware is gone: %v", err)
	}
	reply := make([]byte, binary.LittleEndian.Uint32(head[:]))
	if _, err := io.ReadFull(b.out, reply); err != nil {
		b.t.Fatalf("the firmware is gone: %v", err)
	}
	return reply
}

// run lets so many ms pass.
func (b *board) run(ms float64) {
	b.t.Helper()
	if b.live != nil {
		b.runLive(ms)
		return
	}
	out := b.order('R', uint32(ms*1000), nil)
	b.raw = append(b.raw, out...)
	b.framer.Feed(out, b)
}

// send puts bytes on the line, at the line's rate.
func (b *board) send(p []byte) {
	b.t.Helper()
	if b.live == nil {
		b.order('B', uint32(len(p)), p)
		return
	}
	if _, err := b.live.Write(p); err != nil {
		b.t.Fatal(err)
	}
}

// now hands bytes to the receive interrupt at once, with nothing between.
func (b *board) now(p []byte) { b.t.Helper(); b.order('D', uint32(len(p)), p) }

func (b *board) set(key uint32, v int32) {
	b.t.Helper()
	b.order('S', key, binary.LittleEndian.AppendUint32(nil, uint32(v)))
}

func (b *board) truth() (x truth) {
	b.t.Helper()
	s := string(b.order('Q', 0, nil))
	if _, err := fmt.Sscan(s, &x.State, &x.Driven, &x.Wanted, &x.Speed, &x.MilliAmps, &x.US, &x.OffUS); err != nil {
		b.t.Fatalf("%q: %v", s, err)
	}
	return x
}

// restart restarts the firmware for a cause of GW_RESET_…: 0 power, 4 soft.
func (b *board) restart(cause uint32) {
	b.t.Helper()
	b.order('X', cause, nil)
	b.framer.Reset()
	b.run(20)
}

// ask sends a request and returns the answer after its number: "ok …" or
// "no <code> …".
func (b *board) ask(verb, args string) string {
	b.t.Helper()
	b.n++
	return b.askLine(protocol.AppendRequest(nil, verb, b.n, args), b.n)
}

func (b *board) askLine(line []byte, n uint16) string {
	b.t.Helper()
	b.send(line)
	for range 400 {
		b.run(1)
		for i, l := range b.lines {
			for _, word := range []string{"ok ", "no "} {
				head := fmt.Sprint(word, n)
				if l == head || strings.HasPrefix(l, head+" ") {
					b.lines = append(b.lines[:i:i], b.lines[i+1:]...)
					return strings.TrimSpace(word + strings.TrimPrefix(strings.TrimPrefix(l, head), " "))
				}
			}
		}
	}
	b.t.Fatalf("no answer to %q; lines %q, bad %v", line, b.lines, b.bad)
	return ""
}

// must asks and fails unless the answer begins with want; it returns the rest.
func (b *board) must(want, verb, args string) string {
	b.t.Helper()
	got := b.ask(verb, args)
	if got != want && !strings.HasPrefix(got, want+" ") {
		b.t.Fatalf("%s %s: %q, want %q", verb, args, got, want)
	}
	return strings.TrimSpace(strings.TrimPrefix(got, want))
}

// drive sends one motion line; the heartbeat number counts up by itself.
func (b *board) volts(v float64) {
	b.t.Helper()
	b.k++
	b.send(protocol.AppendDriveVolts(nil, b.k, b.token, v))
}

func (b *board) speed(w float64) {
	b.t.Helper()
	b.k++
	b.send(protocol.AppendDriveSpeed(nil, b.k, b.token, w))
}

func (b *board) beat() {
	b.t.Helper()
	b.k++
	b.send(protocol.AppendBeat(nil, b.k, b.token))
}

// alive beats every 50 ms for so long.
func (b *board) alive(ms int) {
	b.t.Helper()
	for range ms / 50 {
		b.beat()
		b.run(50)
	}
}
