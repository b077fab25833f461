// Package emulate runs the C firmware for tests: built for this machine, on an
// ATmega328P under libsimavr, on a Cortex-M3 under QEMU. Each board's time is
// given to it, so that a test of an hour takes as long as the computing takes,
// and the same test gives the same bytes. A motor is part of each of them.
package emulate

import (
	"fmt"
	"os"
	"path/filepath"
	"testing"
	"time"
)

// Board is a running firmware whose clock is the test's. The methods do nothing
// once Err is not nil. A Board belongs to one goroutine.
type Board struct {
	run machine
	now time.Duration
	out []byte
	err error
}

// machine is what the kinds of board differ in.
type machine interface {
	// receive puts bytes on the line to the board.
	receive(p []byte) error
	// step lets time pass, a whole number of units, and returns what was sent.
	step(d time.Duration) ([]byte, error)
	// restart resets the chip; what lasts without power stays.
	restart() error
	// hand has the shaft turned a turn in the positive direction, over two
	// seconds from now on.
	hand() error
}

// unit is what the time that a board is given is a multiple of.
const unit = time.Millisecond

// Now is the time that the board was given so far.
func (b *Board) Now() time.Duration { return b.now }

// Err is what ended the board: its program is gone, or an order failed.
func (b *Board) Err() error { return b.err }

func (b *Board) try(err error) {
	if b.err == nil {
		b.err = err
	}
}

// Advance gives the board its time up to to, in whole ms.
func (b *Board) Advance(to time.Duration) {
	if d := (to - b.now).Truncate(unit); b.err == nil && d > 0 {
		p, err := b.run.step(d)
		b.now += d
		b.out = append(b.out, p...)
		b.try(err)
	}
}

// Receive hands bytes from the console to the board.
func (b *Board) Receive(p []byte) {
	if b.err == nil {
		b.try(b.run.receive(p))
	}
}

// Output returns the bytes sent since the last call.
func (b *Board) Output() []byte {
	p := b.out
	b.out = nil
	return p
}

// PowerCycle restarts the board. Its lasting memory stays.
func (b *Board) PowerCycle() {
	if b.err == nil {
		b.try(b.run.restart())
	}
}

// Hand has the shaft turned by hand, as far as machine.hand does.
func (b *Board) Hand(float64) {
	if b.err == nil {
		b.try(b.run.hand())
	}
}

// Memory is what an ATmega328P takes of its RAM: static data, and the stack at
// its deepest, in bytes. ok is false on other boards.
func (b *Board) Memory() (static, stack int, ok bool) {
	p, is := b.run.(*ordered)
	if !is {
		return 0, 0, false
	}
	text, err := p.order('Q', 0, nil)
	if err != nil {
		return 0, 0, false
	}
	n, _ := fmt.Sscanf(string(text), "static %d stack %d", &static, &stack)
	return static, stack, n == 2
}

// Host runs the core compiled for this machine; fixed chooses the law in
// integers. Like its siblings it skips the test, with a word, where a program
// that it needs is not installed, and ends the board with the test.
func Host(t testing.TB, fixed bool) *Board {
	t.Helper()
	out := Images(t, "host", "gcc")
	name := "gwhost"
	if fixed {
		name = "gwhost-fixed"
	}
	return started(t, startOrdered(t, filepath.Join(out, name), "--virtual"))
}

// ATmega328P runs an image of that chip, "m328-sim" or another of those that
// boards/build.sh makes.
func ATmega328P(t testing.TB, image string) *Board {
	t.Helper()
	out := Images(t, "avr", "gcc", "avr-gcc")
	runner := filepath.Join(out, "avrrun")
	if _, err := os.Stat(runner); err != nil {
		t.Skip("libsimavr is not installed")
	}
	return started(t, startOrdered(t, runner, filepath.Join(out, image+".elf"), "--virtual"))
}

// CortexM3 runs the image of the machine mps2-an385 whose time is given to it.
func CortexM3(t testing.TB) *Board {
	t.Helper()
	out := Images(t, "arm", "arm-none-eabi-gcc", "qemu-system-arm")
	return started(t, startStepped(t, out))
}

func started(t testing.TB, m machine) *Board {
	b := &Board{run: m}
	b.Advance(50 * time.Millisecond) // its start, and the line that tells of it
	if b.err != nil {
		t.Fatal(b.err)
	}
	return b
}
