//go:build linux

package ptyport_test

import (
	"io"
	"os"
	"strings"
	"syscall"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"gainwright/link/ptyport"
)

func open(t *testing.T) (*ptyport.Master, string) {
	t.Helper()
	m, path, err := ptyport.Open()
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { m.Close() })
	return m, path
}

// attach opens the path as any program would, without setting a mode of its own.
func attach(t *testing.T, path string) *os.File {
	t.Helper()
	f, err := os.OpenFile(path, os.O_RDWR|syscall.O_NOCTTY, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return f
}

func wantRead(t *testing.T, r io.Reader, want string) {
	t.Helper()
	got := make([]byte, len(want))
	done := make(chan error, 1)
	go func() { _, err := io.ReadFull(r, got); done <- err }()
	select {
	case err := <-done:
		if err != nil || string(got) != want {
			t.Fatalf("read %q, %v, want %q", got, err, want)
		}
	case <-time.After(10 * time.Second):
		t.Fatalf("%q did not arrive", want)
	}
}

func write(t *testing.T, w io.Writer, s string) {
	t.Helper()
	if n, err := io.WriteString(w, s); n != len(s) || err != nil {
		t.Fatalf("write of %q gives %d, %v", s, n, err)
	}
}

// Every byte value passes both ways unchanged: no echo, no line editing, no
// CR/LF translation, no signal characters.
func TestRawBeforeAnyoneWrites(t *testing.T) {
	m, path := open(t)
	f := attach(t, path)
	all := make([]byte, 256)
	for i := range all {
		all[i] = byte(i)
	}
	write(t, f, string(all))
	wantRead(t, m, string(all))
	write(t, m, string(all))
	wantRead(t, f, string(all))
	write(t, f, "x")
	wantRead(t, m, "x") // and not an echo of what the board sent
}

func TestMasterSurvivesProgramsThatComeAndGo(t *testing.T) {
	m, path := open(t)
	for _, ask := range []string{"first\n", "second\n", "third\n"} {
		f := attach(t, path)
		write(t, f, ask)
		wantRead(t, m, ask)
		f.Close()
	}
}

func TestBytesWithoutAFarEndAreLost(t *testing.T) {
	m, path := open(t)
	write(t, m, "nobody hears this\n")
	if m.Lost() != 18 {
		t.Errorf("%d bytes lost, want 18", m.Lost())
	}
	f := attach(t, path)
	write(t, m, "hello\n")
	wantRead(t, f, "hello\n")
}

// What one program left unread must not greet the next, and an exclusive lock
// that a killed program left behind must not keep it out.
func TestNextProgramFindsThePathAsNew(t *testing.T) {
	m, path := open(t)
	f := attach(t, path)
	if err := unix.IoctlSetInt(int(f.Fd()), unix.TIOCEXCL, 0); err != nil {
		t.Fatal(err)
	}
	write(t, m, "old telemetry\n")
	f.Close()
	write(t, m, "?") // notices that nobody is there
	if m.Lost() != 1 {
		t.Fatalf("%d bytes lost, want 1", m.Lost())
	}
	g := attach(t, path)
	if excl, err := unix.IoctlGetInt(int(g.Fd()), unix.TIOCGEXCL); err == nil && excl != 0 {
		t.Error("the lock of the program that is gone is still on")
	}
	write(t, m, "new\n")
	wantRead(t, g, "new\n")
}

func TestCloseFreesReadAndWrite(t *testing.T) {
	m, path := open(t)
	attach(t, path)
	ended := make(chan error, 2)
	go func() { _, err := m.Read(make([]byte, 1)); ended <- err }()
	go func() { _, err := m.Write([]byte(strings.Repeat("x", 1<<20))); ended <- err }()
	m.Close()
	for range 2 {
		select {
		case err := <-ended:
			if err == nil {
				t.Error("ended without an error")
			}
		case <-time.After(10 * time.Second):
			t.Fatal("close did not free read and write")
		}
	}
}

// The board must keep ticking when the far end has stopped reading.
func TestLossyWriteDoesNotWait(t *testing.T) {
	m, path := open(t)
	attach(t, path)
	m.SetLossy(true)
	done := make(chan struct{})
	go func() { write(t, m, strings.Repeat("x", 1<<20)); close(done) }()
	select {
	case <-done:
	case <-time.After(10 * time.Second):
		t.Fatal("lossy write waits for a program that does not read")
	}
	if lost := m.Lost(); lost == 0 || lost >= 1<<20 {
		t.Errorf("%d of %d bytes lost, want some", lost, 1<<20)
	}
}

// A write that waits for room must not wait for a program that has gone.
func TestWriteEndsWhenTheFarEndLeaves(t *testing.T) {
	m, path := open(t)
	f := attach(t, path)
	done := make(chan error, 1)
	go func() { _, err := m.Write([]byte(strings.Repeat("x", 1<<20))); done <- err }()
	wantRead(t, f, "x")
	f.Close()
	select {
	case err := <-done:
		if err != nil {
			t.Errorf("write gives %v", err)
		}
	case <-time.After(10 * time.Second):
		t.Fatal("write still waits")
	}
}
