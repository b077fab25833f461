package emulate

import (
	"bufio"
	"encoding/binary"
	"fmt"
	"io"
	"os"
	"os/exec"
	"testing"
	"time"
)

// ordered is a program that takes orders on its standard input, five bytes each,
// and answers each with a length and so many bytes: host/host.c says which.
type ordered struct {
	in  io.Writer
	out *bufio.Reader
}

func startOrdered(t testing.TB, name string, args ...string) *ordered {
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
		_ = cmd.Wait() // the end of its input ends it, one way or another
	})
	return &ordered{in: in, out: bufio.NewReader(out)}
}

func (p *ordered) order(op byte, arg uint32, payload []byte) ([]byte, error) {
	msg := append(binary.LittleEndian.AppendUint32([]byte{op}, arg), payload...)
	if _, err := p.in.Write(msg); err != nil {
		return nil, fmt.Errorf("emulate: the board is gone: %w", err)
	}
	var head [4]byte
	if _, err := io.ReadFull(p.out, head[:]); err != nil {
		return nil, fmt.Errorf("emulate: the board is gone: %w", err)
	}
	n := binary.LittleEndian.Uint32(head[:])
	if n == 0 {
		return nil, nil
	}
	reply := make([]byte, n)
	_, err := io.ReadFull(p.out, reply)
	return reply, err
}

func (p *ordered) receive(b []byte) error {
	_, err := p.order('B', uint32(len(b)), b)
	return err
}

func (p *ordered) step(d time.Duration) ([]byte, error) {
	return p.order('R', uint32(d/time.Microsecond), nil)
}

func (p *ordered) restart() error {
	_, err := p.order('X', 0, nil)
	return err
}

func (p *ordered) hand() error {
	_, err := p.order('H', 0, nil)
	return err
}
