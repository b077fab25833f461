package conformance

import (
	"bufio"
	"encoding/binary"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

// hostLine is a Line to a board in a program of its own that is given its time:
// five bytes an order, a letter and a little-endian number, and the answer with
// its length before it, as protocol/firmware/host/host.c describes.
type hostLine struct {
	in  io.Writer
	out *bufio.Reader
	now time.Duration
}

func (l *hostLine) Now() time.Duration { return l.now }

func (l *hostLine) order(op byte, arg uint32, payload []byte) ([]byte, error) {
	msg := append(binary.LittleEndian.AppendUint32([]byte{op}, arg), payload...)
	if _, err := l.in.Write(msg); err != nil {
		return nil, err
	}
	var head [4]byte
	if _, err := io.ReadFull(l.out, head[:]); err != nil {
		return nil, err
	}
	reply := make([]byte, binary.LittleEndian.Uint32(head[:]))
	_, err := io.ReadFull(l.out, reply)
	return reply, err
}

func (l *hostLine) Write(p []byte) error {
	_, err := l.order('B', uint32(len(p)), p)
	return err
}

func (l *hostLine) Read(until time.Duration) ([]byte, error) {
	for l.now < until {
		d := min(4*time.Millisecond, until-l.now)
		l.now += d
		b, err := l.order('R', uint32(d/time.Microsecond), nil)
		if err != nil || len(b) > 0 {
			return b, err
		}
	}
	return nil, nil
}

func (l *hostLine) restart() error {
	_, err := l.order('X', 0, nil)
	return err
}

// startHost runs a board program until the test ends.
func startHost(t *testing.T, name string, args ...string) *hostLine {
	t.Helper()
	cmd := exec.Command(name, args...)
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
	t.Cleanup(func() {
		in.Close()
		_ = cmd.Wait() // it may have been killed by the end of its input
	})
	return &hostLine{in: in, out: bufio.NewReader(out)}
}

func need(t *testing.T, program string) {
	t.Helper()
	if _, err := exec.LookPath(program); err != nil {
		t.Skipf("%s is not installed", program)
	}
}

func hostConforms(t *testing.T, l *hostLine, o Options) {
	t.Helper()
	if _, err := l.Read(300 * time.Millisecond); err != nil {
		t.Fatal(err)
	}
	o.Restart = l.restart
	r, err := Run(l, o)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%d passed, %d not judged", r.Passed, len(r.NotJudged))
	if !r.Conforms || r.Use != UseDrive {
		t.Errorf("conforms %t, use %s (%s)", r.Conforms, r.Use, r.Reason)
		tell(t, r)
	}
}

// sources lists files and reads them, so that a cached result of this test ends
// with their change.
func sources(t *testing.T, pattern string) []string {
	t.Helper()
	files, err := filepath.Glob(pattern)
	if err != nil || len(files) == 0 {
		t.Fatalf("no files match %s", pattern)
	}
	for _, f := range files {
		if _, err := os.ReadFile(f); err != nil {
			t.Fatal(err)
		}
	}
	return files
}
