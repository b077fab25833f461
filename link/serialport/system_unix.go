//go:build unix

package serialport

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"syscall"

	"go.bug.st/serial"
	"golang.org/x/sys/unix"
)

// lockDir is the same for all users: two people at one machine must not drive
// one board. It is a variable for the tests.
var lockDir = "/tmp/gainwright-ports"

const noFollow = syscall.O_NOFOLLOW

func lockFile(f *os.File) error {
	err := unix.Flock(int(f.Fd()), unix.LOCK_EX|unix.LOCK_NB)
	if err == unix.EWOULDBLOCK {
		return errHeld
	}
	return err
}

// resolve follows links, such as the stable names of Linux, to the device.
func resolve(path string) (string, error) { return filepath.EvalSymlinks(path) }

func systemKind(err error) error {
	switch {
	case errors.Is(err, unix.EBUSY):
		return ErrBusy
	case errors.Is(err, unix.ENXIO), errors.Is(err, unix.ENODEV), errors.Is(err, unix.EIO):
		return ErrNoPort // a name without a device behind it
	case errors.Is(err, unix.ENOTTY), errors.Is(err, unix.EISDIR), errors.Is(err, unix.EINVAL):
		return ErrNotSerial
	}
	return err
}

// control is a second file on the port, for what the library cannot do. It is
// opened before the library locks the port against second files.
type control struct{ fd int }

func openControl(device string) (*control, error) {
	fd, err := unix.Open(device, unix.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK|unix.O_CLOEXEC, 0)
	if err != nil {
		return nil, err
	}
	if _, err := unix.IoctlGetTermios(fd, getTermios); err != nil {
		unix.Close(fd)
		return nil, err
	}
	return &control{fd}, nil
}

func (c *control) close() { unix.Close(c.fd) }

// keepOnClose switches hang-up on close off.
func (c *control) keepOnClose() error {
	t, err := unix.IoctlGetTermios(c.fd, getTermios)
	if err != nil {
		return err
	}
	t.Cflag &^= unix.HUPCL
	return unix.IoctlSetTermios(c.fd, setTermios, t)
}

// initialBits is nil: asking the library for lines makes it fail on devices that
// have none, and comes too late here in any case.
func initialBits(Lines) *serial.ModemOutputBits { return nil }

func settleLines(want Lines, c *control, port serial.Port) string {
	const raised = "the system raised DTR and RTS on opening, which restarts some boards"
	if want == LinesLeave {
		return raised + "; hang-up on close is as the system has it"
	}
	s := raised
	if err := c.keepOnClose(); err != nil {
		s += fmt.Sprintf("; hang-up on close could not be switched off (%v), so closing may restart the board too", err)
	} else {
		s += "; hang-up on close is switched off, so opening again should not restart it"
	}
	if want == LinesAssert {
		if err := port.SetDTR(true); err != nil {
			s += fmt.Sprintf("; DTR could not be set (%v)", err)
		} else {
			s += "; DTR is set"
		}
	}
	return s
}
