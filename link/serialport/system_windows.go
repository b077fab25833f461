package serialport

import (
	"os"
	"path/filepath"
	"strings"

	"go.bug.st/serial"
	"golang.org/x/sys/windows"
)

// lockDir is each user's own. That is enough: the system itself refuses to open
// a port twice, the lock only names the holder.
var lockDir = filepath.Join(os.TempDir(), "gainwright-ports")

const noFollow = 0

// lockFile locks one byte far behind the text, which stays readable.
func lockFile(f *os.File) error {
	at := &windows.Overlapped{OffsetHigh: 1}
	err := windows.LockFileEx(windows.Handle(f.Fd()), windows.LOCKFILE_EXCLUSIVE_LOCK|windows.LOCKFILE_FAIL_IMMEDIATELY, 0, 1, 0, at)
	if err == windows.ERROR_LOCK_VIOLATION || err == windows.ERROR_IO_PENDING {
		return errHeld
	}
	return err
}

func resolve(path string) (string, error) { return strings.ToUpper(path), nil }

func systemKind(err error) error { return err }

func foreignLock(string) *Holder { return nil }

func whoHas(string) *Holder { return nil }

func permissionRemedy(string) string {
	return "close the program that has it, or ask the administrator"
}

// control has nothing to do here: the library opens the port with its lines as
// initialBits says, before the driver raises them.
type control struct{}

func openControl(string) (*control, error) { return &control{}, nil }

func (*control) close() {}

func initialBits(want Lines) *serial.ModemOutputBits {
	switch want {
	case LinesLeave:
		return nil
	case LinesAssert:
		return &serial.ModemOutputBits{DTR: true}
	}
	return &serial.ModemOutputBits{}
}

func settleLines(want Lines, _ *control, _ serial.Port) string {
	switch want {
	case LinesLeave:
		return "DTR and RTS were raised on opening, which restarts some boards"
	case LinesAssert:
		return "DTR was raised on opening, RTS left low"
	}
	return "DTR and RTS were left low; a board that stays silent may want DTR, see the rig file"
}
