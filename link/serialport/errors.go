package serialport

import (
	"errors"
	"fmt"
	"io/fs"
	"strings"

	"go.bug.st/serial"
)

// Kinds of OpenError and of errors of an open port.
var (
	ErrNoPort     = errors.New("no such port")
	ErrBusy       = errors.New("port is busy")
	ErrPermission = errors.New("permission denied")
	ErrNotSerial  = errors.New("not a serial port")
	ErrBaud       = errors.New("line rate is not possible")
	ErrLock       = errors.New("port cannot be locked")
	// ErrGone says that an open port has stopped existing: unplugged, or the
	// board's USB side has restarted.
	ErrGone = errors.New("serial device is gone")
)

// OpenError says why a port could not be opened and what to do about it.
type OpenError struct {
	Path   string
	Err    error   // one of the kinds above, or the system's error
	Holder *Holder // who has it, with ErrBusy, if known
	Detail string  // what the system said, may be empty
}

func (e *OpenError) Error() string {
	var b strings.Builder
	fmt.Fprintf(&b, "open %s: %v", e.Path, e.Err)
	if e.Holder != nil {
		fmt.Fprintf(&b, ": %v has it", e.Holder)
	}
	if e.Detail != "" {
		fmt.Fprintf(&b, " (%s)", e.Detail)
	}
	if r := e.Remedy(); r != "" {
		b.WriteString("; " + r)
	}
	return b.String()
}

// Unwrap returns the kind.
func (e *OpenError) Unwrap() error { return e.Err }

// Remedy returns what the person can do, on this system.
func (e *OpenError) Remedy() string {
	switch {
	case errors.Is(e.Err, ErrNoPort):
		return "plug the board in and look with `gainwright ports`"
	case errors.Is(e.Err, ErrBusy):
		return "close the other program and try again"
	case errors.Is(e.Err, ErrPermission):
		return permissionRemedy(e.Path)
	case errors.Is(e.Err, ErrNotSerial):
		return "look with `gainwright ports` for the names of serial ports"
	case errors.Is(e.Err, ErrBaud):
		return "choose one of the usual rates, such as 115200"
	case errors.Is(e.Err, ErrLock):
		return "make " + lockDir + " writable for you"
	}
	return ""
}

// classify turns what the system or the library said into an OpenError.
func classify(path string, err error) *OpenError {
	var oe *OpenError
	if errors.As(err, &oe) {
		oe.Path = path
		return oe
	}
	kind := kindOf(err)
	e := &OpenError{Path: path, Err: kind}
	if kind != err {
		e.Detail = err.Error()
	}
	if kind == ErrBusy {
		e.Holder = whoHas(path)
	}
	return e
}

func kindOf(err error) error {
	var pe *serial.PortError
	if errors.As(err, &pe) {
		switch pe.Code() {
		case serial.PortBusy:
			return ErrBusy
		case serial.PortNotFound:
			return ErrNoPort
		case serial.PermissionDenied:
			return ErrPermission
		case serial.InvalidSerialPort:
			return ErrNotSerial
		case serial.InvalidSpeed:
			return ErrBaud
		}
		return err
	}
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return ErrNoPort
	case errors.Is(err, fs.ErrPermission):
		return ErrPermission
	}
	return systemKind(err)
}
