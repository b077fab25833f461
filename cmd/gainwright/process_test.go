//go:build unix

package main

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/creack/pty"
)

// These tests run the real program as processes: a simulated board in one, the
// console on a pseudo-terminal in another. What they wait for is always
// something that can be seen, a file of the record or the word of the simulated
// board; the pauses in between are the times that the console insists on.

// program builds the program once for all tests.
var program = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp("", "gainwright-test-")
	if err != nil {
		return "", err
	}
	path := filepath.Join(dir, "gainwright")
	out, err := exec.Command("go", "build", "-o", path, ".").CombinedOutput()
	if err != nil {
		return "", fmt.Errorf("%w: %s", err, out)
	}
	return path, nil
})

// first lets a process go before others where that is permitted: tests of other
// packages run at the same time, and a console that is held up trips.
func first(pid int) { _ = syscall.Setpriority(syscall.PRIO_PROCESS, pid, -15) }

// board is a simulated board in a process of its own.
type board struct {
	path string
	in   io.Writer
	mu   sync.Mutex
	out  *bufio.Scanner
}

func startBoard(t *testing.T, bin string) *board {
	t.Helper()
	c := exec.Command(bin, "sim", "demo.toml")
	in, _ := c.StdinPipe()
	out, _ := c.StdoutPipe()
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	first(c.Process.Pid)
	t.Cleanup(func() { c.Process.Kill(); c.Wait() })
	b := &board{in: in, out: bufio.NewScanner(out)}
	if !b.out.Scan() {
		t.Fatal("the simulated board says no path")
	}
	b.path = b.out.Text()
	return b
}

// state asks the simulated board what its shaft does.
func (b *board) state() (powered bool, speed, turns float64) {
	b.mu.Lock()
	defer b.mu.Unlock()
	fmt.Fprintln(b.in, "state")
	if b.out.Scan() {
		fmt.Sscanf(b.out.Text(), "powered %t speed %g rad/s turns %g", &powered, &speed, &turns)
	}
	return powered, speed, turns
}

// desk is the console on a pseudo-terminal.
type desk struct {
	t      testing.TB
	cmd    *exec.Cmd
	tty    *os.File
	sheet  string
	ended  chan error
	screen sync.Mutex
	last   []byte // the end of what was written to the terminal
}

// patientRig allows the longest times there are: a test machine under load is no
// reason to trip.
const patientRig = "\n[timing]\ntelemetry_age_ms = 500\nscreen_lease_ms = 3000\nboard_timeout_ms = 1000\n"

func startConsole(t testing.TB, bin string, args ...string) *desk {
	t.Helper()
	d := &desk{t: t, sheet: filepath.Join(t.TempDir(), "sheet"), ended: make(chan error, 1)}
	d.cmd = exec.Command(bin, append(args, "--out", d.sheet)...)
	d.cmd.Env = append(os.Environ(), "TERM=xterm-256color", "LANG=C.UTF-8")
	var err error
	if d.tty, err = pty.StartWithSize(d.cmd, &pty.Winsize{Rows: 24, Cols: 80}); err != nil {
		t.Fatal(err)
	}
	first(d.cmd.Process.Pid)
	go func() { d.ended <- d.cmd.Wait() }()
	go func() {
		buf := make([]byte, 4096)
		for {
			n, err := d.tty.Read(buf)
			d.screen.Lock()
			d.last = append(d.last, buf[:n]...)
			d.last = d.last[max(0, len(d.last)-8000):]
			d.screen.Unlock()
			if err != nil {
				return
			}
		}
	}()
	t.Cleanup(func() { d.cmd.Process.Kill(); d.tty.Close() })
	return d
}

func (d *desk) key(k string) { io.WriteString(d.tty, k) }

// until polls for something that can be seen.
func (d *desk) until(what string, limit time.Duration, ok func() bool) {
	d.t.Helper()
	for end := time.Now().Add(limit); time.Now().Before(end); {
		if ok() {
			return
		}
		time.Sleep(20 * time.Millisecond)
	}
	d.screen.Lock()
	defer d.screen.Unlock()
	d.t.Fatalf("waited %v for %s; the end of the screen:\n%q", limit, what, d.last[max(0, len(d.last)-1500):])
}

// seen polls for something that can be seen, and says whether it came.
func seen(limit time.Duration, ok func() bool) bool {
	for end := time.Now().Add(limit); time.Now().Before(end); time.Sleep(20 * time.Millisecond) {
		if ok() {
			return true
		}
	}
	return false
}

// kept reports whether the record holds an entry.
func (d *desk) kept(pattern string) func() bool {
	return func() bool {
		m, _ := filepath.Glob(filepath.Join(d.sheet, "*"+pattern+"*"))
		return len(m) > 0
	}
}

// run does the step that is offered, arms and starts it, and reports whether the
// shaft was driven.
func (d *desk) run(b *board) bool {
	d.key("\r")
	time.Sleep(800 * time.Millisecond)
	d.key("a")
	time.Sleep(2700 * time.Millisecond)
	d.key("y")
	time.Sleep(300 * time.Millisecond)
	d.key("g")
	return seen(6*time.Second, func() bool { on, _, _ := b.state(); return on })
}

// toCreep goes from the cable to a shaft that creeps in the stop check. It gives
// up where something does not come: a machine under load holds the program up,
// and the limiter trips on that.
func (d *desk) toCreep(b *board) bool {
	if !seen(20*time.Second, d.kept("event-limits")) {
		return false
	}
	time.Sleep(500 * time.Millisecond)
	d.key("\r")
	for range 2 { // ambient is not known, the load state is that of the rig file
		time.Sleep(600 * time.Millisecond)
		d.key("\r")
	}
	if !seen(10*time.Second, d.kept("event-conditions")) {
		return false
	}
	time.Sleep(900 * time.Millisecond)
	fmt.Fprintln(b.in, "turn")
	if !seen(10*time.Second, func() bool { _, w, n := b.state(); return n > 0.999 && w == 0 }) {
		return false
	}
	time.Sleep(200 * time.Millisecond)
	d.key("\r")
	if !seen(10*time.Second, d.kept("check-count")) {
		return false
	}
	time.Sleep(300 * time.Millisecond)
	d.key(" ")
	if !seen(10*time.Second, d.kept("check-stop-key")) {
		return false
	}
	time.Sleep(900 * time.Millisecond)
	if !d.run(b) || !seen(15*time.Second, d.kept("check-sign")) {
		return false
	}
	time.Sleep(1500 * time.Millisecond)
	return d.run(b) && seen(10*time.Second, func() bool { on, w, _ := b.state(); return on && w > 5 })
}

// atCreep brings a new console on a new board to creep, in a few tries.
func atCreep(t *testing.T, bin string) (*board, *desk) {
	t.Helper()
	for range 4 {
		b := startBoard(t, bin)
		d := startConsole(t, bin, "console", "--port", b.path, "--rig", rigFile(t))
		if d.toCreep(b) {
			return b, d
		}
		d.screen.Lock()
		t.Logf("did not come to creep; the end of the screen: %q", d.last[max(0, len(d.last)-400):])
		d.screen.Unlock()
		d.cmd.Process.Kill()
		<-d.ended
	}
	t.Fatal("the shaft does not come to creep")
	return nil, nil
}

// stops waits until the simulated board has taken its output away and the shaft
// has come to rest.
func (d *desk) stops(b *board) {
	d.t.Helper()
	d.until("output off", 5*time.Second, func() bool { on, _, _ := b.state(); return !on })
	d.until("rest", 20*time.Second, func() bool { _, w, _ := b.state(); return w == 0 })
}

func rigFile(t *testing.T) string {
	t.Helper()
	text, err := os.ReadFile("testdata/demo.rig.toml")
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "demo.rig.toml")
	if err := os.WriteFile(path, append(text, patientRig...), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// Whatever becomes of the console, the simulated shaft stops: by the cut byte
// where the console still can, by the board's own timeout where it was killed.
func TestShaftStopsWhateverBecomesOfTheConsole(t *testing.T) {
	if testing.Short() {
		t.Skip("runs the real program for half a minute; leave out -short")
	}
	bin, err := program()
	if err != nil {
		t.Fatal(err)
	}
	seats := make(chan struct{}, 3) // so many at a time
	for name, end := range map[string]func(*desk){
		"kill -9":         func(d *desk) { d.cmd.Process.Kill() },
		"SIGTERM":         func(d *desk) { d.cmd.Process.Signal(syscall.SIGTERM) },
		"SIGHUP":          func(d *desk) { d.cmd.Process.Signal(syscall.SIGHUP) },
		"Ctrl-C":          func(d *desk) { d.key("\x03") },
		"terminal closed": func(d *desk) { d.tty.Close() },
		"suspended":       func(d *desk) { d.cmd.Process.Signal(syscall.SIGSTOP) },
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			seats <- struct{}{}
			defer func() { <-seats }()
			b, d := atCreep(t, bin)
			end(d)
			d.stops(b)
			if name == "kill -9" || name == "suspended" {
				return
			}
			select {
			case <-d.ended:
			case <-time.After(10 * time.Second):
				t.Error("the console does not end")
			}
			index, err := os.ReadFile(filepath.Join(d.sheet, "index.txt"))
			if err != nil || !strings.Contains(string(index), "close") {
				t.Errorf("the record was not closed: %v", err)
			}
		})
	}
}

// The demo by keys on a real pseudo-terminal: from the port to the record, and
// the terminal given back.
func TestDemoOnAPseudoTerminal(t *testing.T) {
	bin, err := program()
	if err != nil {
		t.Fatal(err)
	}
	d := startConsole(t, bin, "demo")
	d.until("a first frame", 20*time.Second, func() bool {
		d.screen.Lock()
		defer d.screen.Unlock()
		return strings.Contains(string(d.last), "DISARMED")
	})
	d.until("as-found", 30*time.Second, func() bool {
		d.key("\r")
		time.Sleep(300 * time.Millisecond)
		m, _ := filepath.Glob(filepath.Join(d.sheet, "*as-found*"))
		return len(m) > 0
	})
	d.until("the end", 30*time.Second, func() bool {
		d.key("q")
		time.Sleep(300 * time.Millisecond)
		d.key("y")
		select {
		case err := <-d.ended:
			if err != nil {
				t.Errorf("left with %v", err)
			}
			return true
		case <-time.After(300 * time.Millisecond):
			return false
		}
	})
	d.until("the terminal given back and the record named", 10*time.Second, func() bool {
		d.screen.Lock()
		defer d.screen.Unlock()
		end := string(d.last)
		return strings.Contains(end, "record: "+d.sheet) && strings.Contains(end, "\x1b[?1049l")
	})
}

// The console insists on a terminal: no script arms a board.
func TestConsoleNeedsATerminal(t *testing.T) {
	bin, err := program()
	if err != nil {
		t.Fatal(err)
	}
	c := exec.Command(bin, "console", "--port", "/nowhere")
	c.Stdin = strings.NewReader("a")
	out, err := c.CombinedOutput()
	if c.ProcessState.ExitCode() != exitUsage || !strings.Contains(string(out), "not a terminal") {
		t.Errorf("exit %v: %s", err, out)
	}
}
