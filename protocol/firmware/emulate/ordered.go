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
	in, out, err := begin(cmd)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		in.Close()
		_ = cmd.Wait() // the end of its input ends it, one way or another
		out.Close()
	})
	return &ordered{in: in, out: bufio.NewReader(out)}
}

// begin starts a program with pipes for its standard input and output. The pipes
// block: with a million short orders to a test the thread that waits for an answer
// costs much less than the runtime's looking for another that could run.
func begin(cmd *exec.Cmd) (in, out *os.File, err error) {
	theirIn, in, err := os.Pipe()
	if err != nil {
		return nil, nil, err
	}
	defer theirIn.Close()
	out, theirOut, err := os.Pipe()
	if err != nil {
		in.Close()
		return nil, nil, err
	}
	defer theirOut.Close()
	in.Fd() // makes it block
	out.Fd()
	cmd.Stdin, cmd.Stdout = theirIn, theirOut
	if err = cmd.Start(); err != nil {
		in.Close()
		out.Close()
	}
	return in, out, err
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
