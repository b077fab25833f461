package emulate

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

// stepped is a machine under QEMU with two UARTs: the line on the emulator's own
// standard input and output, and one that gives the image its time, as
// boards/mps2-an385/main.c says. The counts of bytes in both directions make the
// order of events the same in every run.
type stepped struct {
	line   io.Writer
	sent   io.Reader
	time   io.Writer
	pipe   *os.File // where answer comes from
	answer *bufio.Reader
	queue  []byte // not yet on the line
	in     byte   // bytes put on the line, modulo 256
	out    byte   // bytes taken off it, modulo 256
}

const (
	stepBase  = 0x80 // a control period, with seven bits of the count of bytes
	stepHand  = 'h'
	stepReset = 'x'
	stepUp    = 'r' // what the image says after a start
	lineMS    = 11  // bytes that a line of 115 200 baud carries in a ms
)

func startStepped(t testing.TB, dir string) *stepped {
	t.Helper()
	pipe := filepath.Join(dir, "time")
	in, answer, err := fifos(pipe)
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("qemu-system-arm", "-M", "mps2-an385", "-kernel", filepath.Join(dir, "an385-stepped.elf"),
		"-display", "none", "-monitor", "none", "-nodefaults", "-chardev", "stdio,id=u0,signal=off", "-chardev", "pipe,id=u1,path="+pipe,
		"-serial", "chardev:u0", "-serial", "chardev:u1")
	cmd.Stderr = os.Stderr
	line, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	sent, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = cmd.Process.Kill()
		_ = cmd.Wait()
		in.Close()
		answer.Close()
	})
	s := &stepped{line: line, sent: sent, time: in, pipe: answer, answer: bufio.NewReader(answer)}
	if err := s.up(); err != nil {
		t.Fatal(err)
	}
	return s
}

// patience is how long the machine may take to answer, on the host's clock; it is
// only there so that one that hangs fails a test.
const patience = 10 * time.Second

// next is the next byte of an answer.
func (s *stepped) next() (byte, error) {
	if err := s.pipe.SetReadDeadline(time.Now().Add(patience)); err != nil {
		return 0, err
	}
	b, err := s.answer.ReadByte()
	if err != nil {
		err = fmt.Errorf("emulate: the machine does not answer: %w", err)
	}
	return b, err
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
	for ; d > 0; d -= time.Millisecond {
		n := min(len(s.queue), lineMS)
		if n > 0 {
			if _, err := s.line.Write(s.queue[:n]); err != nil {
				return out, err
			}
			s.queue = s.queue[n:]
			s.in += byte(n)
		}
		if _, err := s.time.Write([]byte{stepBase | s.in&0x7F}); err != nil {
			return out, err
		}
		count, err := s.next()
		if err != nil {
			return out, err
		}
		if more := int(count - s.out); more > 0 {
			p := make([]byte, more)
			if _, err := io.ReadFull(s.sent, p); err != nil {
				return out, err
			}
			out = append(out, p...)
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
