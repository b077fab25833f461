package linktest

import (
	"bytes"
	"errors"
	"fmt"
	"time"

	"gainwright/link"
)

// patience is how long CheckPort waits for what must happen. It is generous: a
// loaded machine must not fail the contract, a port that hangs must.
const patience = 5 * time.Second

// CheckPort tests what every link.Port promises and returns the first promise
// that is broken. open returns a new pair each time: the port under test and the
// far end of the same line, on which CheckPort plays the board.
func CheckPort(open func() (near, far link.Port, err error)) error {
	for _, c := range []struct {
		name  string
		check func(near, far link.Port) error
	}{
		{"bytes arrive in order, both ways, all 256 values", checkBytes},
		{"read and write do not wait for each other", checkBothWays},
		{"idle read returns nothing, and close frees it", checkIdle},
		{"closed port refuses, and closing twice is harmless", checkClosed},
	} {
		near, far, err := open()
		if err != nil {
			return fmt.Errorf("%s: open: %w", c.name, err)
		}
		err = c.check(near, far)
		near.Close()
		far.Close()
		if err != nil {
			return fmt.Errorf("%s: %w", c.name, err)
		}
	}
	return nil
}

func checkBytes(near, far link.Port) error {
	all := make([]byte, 256)
	for i := range all {
		all[i] = byte(i)
	}
	for _, way := range []struct {
		name     string
		from, to link.Port
	}{{"to the board", near, far}, {"from the board", far, near}} {
		if err := send(way.from, all); err != nil {
			return fmt.Errorf("%s: %w", way.name, err)
		}
		if err := expect(way.to, all); err != nil {
			return fmt.Errorf("%s: %w", way.name, err)
		}
	}
	if n, err := near.Write(nil); n != 0 || err != nil {
		return fmt.Errorf("empty write gives %d, %v, want 0, nil", n, err)
	}
	return nil
}

func checkBothWays(near, far link.Port) error {
	reading := make(chan error, 1)
	go func() { reading <- expect(near, []byte("answer\n")) }()
	if err := send(near, []byte("ask\n")); err != nil {
		return err
	}
	if err := expect(far, []byte("ask\n")); err != nil {
		return fmt.Errorf("write while a read waits: %w", err)
	}
	if err := send(far, []byte("answer\n")); err != nil {
		return err
	}
	return <-reading
}

func checkIdle(near, far link.Port) error {
	ended := make(chan error, 1)
	go func() {
		var b [8]byte
		for {
			n, err := near.Read(b[:])
			if n != 0 {
				ended <- fmt.Errorf("idle read gives %d bytes: %q", n, b[:n])
				return
			}
			if err != nil {
				ended <- nil // freed by Close
				return
			}
		}
	}()
	select {
	case err := <-ended:
		return errors.Join(errors.New("idle read ended before close"), err)
	case <-time.After(3 * link.PipeTimeout):
	}
	if err := near.Close(); err != nil {
		return fmt.Errorf("close: %w", err)
	}
	select {
	case err := <-ended:
		return err
	case <-time.After(patience):
		return fmt.Errorf("close did not free a read within %v", patience)
	}
}

func checkClosed(near, far link.Port) error {
	near.Close()
	if n, err := near.Write([]byte("x")); err == nil {
		return fmt.Errorf("write on a closed port gives %d, nil", n)
	}
	if n, err := near.Read(make([]byte, 1)); err == nil {
		return fmt.Errorf("read on a closed port gives %d, nil", n)
	}
	near.Close()
	return nil
}

func send(p link.Port, b []byte) error {
	n, err := p.Write(b)
	if err != nil || n != len(b) {
		return fmt.Errorf("write of %d bytes gives %d, %v", len(b), n, err)
	}
	return nil
}

// expect reads until want has arrived. A port that stays idle for patience has
// lost it.
func expect(p link.Port, want []byte) error {
	var got []byte
	buf := make([]byte, 64)
	for end := time.Now().Add(patience); len(got) < len(want); {
		n, err := p.Read(buf)
		if n < 0 || n > len(buf) {
			return fmt.Errorf("read into %d bytes gives %d", len(buf), n)
		}
		got = append(got, buf[:n]...)
		if err != nil {
			return fmt.Errorf("read after %d of %d bytes: %w", len(got), len(want), err)
		}
		if time.Now().After(end) {
			return fmt.Errorf("%d of %d bytes arrived in %v: %q", len(got), len(want), patience, got)
		}
	}
	if !bytes.Equal(got, want) {
		return fmt.Errorf("got %q, want %q", got, want)
	}
	return nil
}
