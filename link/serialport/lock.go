package serialport

import (
	"errors"
	"fmt"
	"net/url"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"
	"unicode"
)

// Holder is the process that has a port.
type Holder struct {
	PID     int
	Program string
	Since   time.Time // zero = not known
}

func (h *Holder) String() string {
	s := h.Program
	if s == "" {
		s = "another program"
	}
	if h.PID > 0 {
		s += fmt.Sprintf(" (process %d)", h.PID)
	}
	if !h.Since.IsZero() {
		s += " since " + h.Since.Local().Format("2006-01-02 15:04:05")
	}
	return s
}

// lock is a held lock: an open file that the system locked for this process.
// The system drops it when the process ends, so no lock is ever stale. The file
// stays: removing it would let two processes lock two files of one name.
type lock struct{ file *os.File }

// errHeld says that somebody else has locked the file.
var errHeld = errors.New("held by another process")

// acquire locks device or returns an *OpenError that names who has it.
func acquire(device string) (*lock, error) {
	if h := foreignLock(device); h != nil {
		return nil, &OpenError{Err: ErrBusy, Holder: h}
	}
	name := filepath.Join(lockDir, url.PathEscape(device)+".lock")
	f, err := openLockFile(name)
	if err != nil {
		return nil, &OpenError{Err: ErrLock, Detail: err.Error()}
	}
	if err := lockFile(f); err != nil {
		defer f.Close()
		if errors.Is(err, errHeld) {
			return nil, &OpenError{Err: ErrBusy, Holder: readHolder(f)}
		}
		return nil, &OpenError{Err: ErrLock, Detail: err.Error()}
	}
	l := &lock{file: f}
	if err := writeHolder(f, Holder{PID: os.Getpid(), Program: filepath.Base(os.Args[0]), Since: time.Now()}); err != nil {
		l.release()
		return nil, &OpenError{Err: ErrLock, Detail: err.Error()}
	}
	return l, nil
}

// release gives the lock back. The holder's name goes first, so that nobody
// reads a name that no longer holds.
func (l *lock) release() {
	_ = l.file.Truncate(0)
	_ = l.file.Close()
}

// openLockFile opens name for everybody, so that a port that another user had
// before can be locked by this one. It does not create what exists: Linux
// refuses that for files of others in a directory like /tmp.
func openLockFile(name string) (*os.File, error) {
	if err := os.MkdirAll(lockDir, 0o777); err != nil {
		return nil, err
	}
	_ = os.Chmod(lockDir, 0o777|os.ModeSticky) // fails for a directory of another user, who did it
	f, err := os.OpenFile(name, os.O_RDWR|noFollow, 0)
	if !errors.Is(err, os.ErrNotExist) {
		return f, err
	}
	f, err = os.OpenFile(name, os.O_RDWR|os.O_CREATE|os.O_EXCL|noFollow, 0o666)
	if errors.Is(err, os.ErrExist) { // somebody was faster
		return os.OpenFile(name, os.O_RDWR|noFollow, 0)
	}
	if err == nil {
		_ = f.Chmod(0o666) // whatever the umask says
	}
	return f, err
}

func writeHolder(f *os.File, h Holder) error {
	if err := f.Truncate(0); err != nil {
		return err
	}
	_, err := f.WriteAt(fmt.Appendf(nil, "pid %d\nsince %s\nprogram %s\n", h.PID, h.Since.UTC().Format(time.RFC3339), h.Program), 0)
	return err
}

// readHolder reads what writeHolder wrote. Anybody may have written into the
// file, so nothing of it is believed beyond a number, a time and a short name.
func readHolder(f *os.File) *Holder {
	var buf [512]byte
	n, _ := f.ReadAt(buf[:], 0)
	h := &Holder{}
	for l := range strings.Lines(string(buf[:n])) {
		key, value, _ := strings.Cut(strings.TrimSpace(l), " ")
		switch key {
		case "pid":
			h.PID, _ = strconv.Atoi(value)
		case "since":
			h.Since, _ = time.Parse(time.RFC3339, value)
		case "program":
			h.Program = printable(value)
		}
	}
	return h
}

// printable keeps what may reach a terminal, at most 40 characters of it.
func printable(s string) string {
	kept := []rune{}
	for _, r := range s {
		if unicode.IsPrint(r) && len(kept) < 40 {
			kept = append(kept, r)
		}
	}
	return string(kept)
}
