package emulate

import (
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"sync/atomic"
	"testing"
	"time"
)

// stepped is a machine under QEMU with two UARTs: the line on the emulator's own
// standard input and output, and one that gives the image its time, as
// boards/mps2-an385/main.c says. The counts of bytes in both directions make the
// order of events the same in every run.
type stepped struct {
	line   *os.File
	sent   *os.File
	time   *os.File
	answer *os.File
	asked  atomic.Uint64 // odd while an answer is waited for
	queue  []byte        // not yet on the line
	in     byte          // bytes put on the line, modulo 256
	out    byte          // bytes taken off it, modulo 256
	one    [1]byte
}

const (
	stepBase  = 0x80 // a control period, with seven bits of the count of bytes
	stepMany  = 0    // so many control periods
	stepsMax  = 16   // in one order; the bytes that are sent in them can be told
	stepHand  = 'h'
	stepReset = 'x'
	stepUp    = 'r' // what the image says after a start
	lineMS    = 11  // bytes that a line of 115 200 baud carries in a ms
)

func startStepped(t testing.TB, dir string) *stepped {
	t.Helper()
	pipe := filepath.Join(t.TempDir(), "time")
	in, answer, err := fifos(pipe)
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("qemu-system-arm", "-M", "mps2-an385", "-kernel", filepath.Join(dir, "an385-stepped.elf"),
		"-display", "none", "-monitor", "none", "-nodefaults", "-chardev", "stdio,id=u0,signal=off", "-chardev", "pipe,id=u1,path="+pipe,
		"-serial", "chardev:u0", "-serial", "chardev:u1")
	cmd.Stderr = os.Stderr
	line, sent, err := begin(cmd)
	if err != nil {
		t.Fatal(err)
	}
	s := &stepped{line: line, sent: sent, time: in, answer: answer}
	over := make(chan struct{})
	t.Cleanup(func() {
		close(over)
		_ = cmd.Process.Kill()
		_ = cmd.Wait()
		for _, f := range []*os.File{line, sent, in, s.answer} {
			f.Close()
		}
	})
	if err := answer.SetReadDeadline(time.Now().Add(patience)); err != nil {
		t.Fatal(err)
	}
	if err := s.up(); err != nil {
		t.Fatal(err)
	}
	// The machine has its end open now. An end that can only be read, and blocks,
	// tells when the machine is gone.
	if s.answer, err = os.Open(pipe + ".out"); err != nil {
		t.Fatal(err)
	}
	answer.Close()
	s.answer.Fd()
	go s.watch(cmd.Process, over)
	return s
}

// patience is how long the machine may take to answer, on the host's clock; it is
// only there so that one that hangs fails a test.
const patience = 10 * time.Second

// watch ends a machine that does not answer.
func (s *stepped) watch(p *os.Process, over <-chan struct{}) {
	for {
		was := s.asked.Load()
		select {
		case <-over:
			return
		case <-time.After(patience):
		}
		if was%2 == 1 && s.asked.Load() == was {
			_ = p.Kill()
			return
		}
	}
}

// next is the next byte of an answer.
func (s *stepped) next() (byte, error) {
	s.asked.Add(1)
	_, err := io.ReadFull(s.answer, s.one[:])
	s.asked.Add(1)
	if err != nil {
		err = fmt.Errorf("emulate: the machine does not answer: %w", err)
	}
	return s.one[0], err
}

// up waits until the image says that it has started.
func (s *stepped) up() error {
	for {
		b, err := s.next()
		if err != nil {
			return err
		}
		if b == stepUp {
			s.in, s.out = 0, 0
			return nil
		}
	}
}

func (s *stepped) receive(p []byte) error {
	s.queue = append(s.queue, p...)
	return nil
}

func (s *stepped) step(d time.Duration) ([]byte, error) {
	var out []byte
	for d > 0 {
		n := min(len(s.queue), lineMS)
		order, lasts := byte(0), time.Duration(1)
		if n > 0 {
			if _, err := s.line.Write(s.queue[:n]); err != nil {
				return out, err
			}
			s.queue = s.queue[n:]
			s.in += byte(n)
			order = stepBase | s.in&0x7F
		} else {
			lasts = min(d/time.Millisecond, stepsMax)
			order = stepMany + byte(lasts)
		}
		d -= lasts * time.Millisecond
		s.one[0] = order
		if _, err := s.time.Write(s.one[:]); err != nil {
			return out, err
		}
		count, err := s.next()
		if err != nil {
			return out, err
		}
		if more := int(count - s.out); more > 0 {
			at := len(out)
			out = append(out, make([]byte, more)...)
			if _, err := io.ReadFull(s.sent, out[at:]); err != nil {
				return out, err
			}
			s.out = count
		}
	}
	return out, nil
}

func (s *stepped) restart() error {
	s.queue = nil
	if _, err := s.time.Write([]byte{stepReset}); err != nil {
		return err
	}
	return s.up()
}

func (s *stepped) hand() error {
	if _, err := s.time.Write([]byte{stepHand}); err != nil {
		return err
	}
	_, err := s.next()
	return err
}
