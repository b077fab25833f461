//go:build unix

package ptyport

import (
	"errors"
	"fmt"
	"io"
	"os"
	"sync"
	"sync/atomic"
	"time"

	"github.com/creack/pty"
	"golang.org/x/sys/unix"
)

// reopenPoll is how often a master without a far end looks for one.
const reopenPoll = 2 * time.Millisecond

// Master is the board's side of a pseudo-terminal. Read blocks until a byte
// arrives or the master is closed; it survives programs that come and go. Write
// blocks while the far end's buffer is full, unless SetLossy. Read and Write may
// be called at the same time, Close from anywhere; Close frees both.
type Master struct {
	file  *os.File
	path  string
	lossy atomic.Bool
	lost  atomic.Uint64
	clean atomic.Bool // the path was made as new since the last program left
	once  sync.Once
}

// Open makes a pseudo-terminal in raw mode and returns its master and the path
// of its other side.
func Open() (*Master, string, error) {
	blocking, slave, err := pty.Open()
	if err != nil {
		return nil, "", fmt.Errorf("open a pseudo-terminal: %w", err)
	}
	defer blocking.Close()
	defer slave.Close()
	// The master comes in blocking mode, in which Close does not free a Read.
	// A duplicate in non-blocking mode is served by the runtime's poller.
	fd, err := unix.FcntlInt(blocking.Fd(), unix.F_DUPFD_CLOEXEC, 0)
	if err != nil {
		return nil, "", fmt.Errorf("duplicate the pseudo-terminal: %w", err)
	}
	if err := unix.SetNonblock(fd, true); err != nil {
		unix.Close(fd)
		return nil, "", fmt.Errorf("set the pseudo-terminal non-blocking: %w", err)
	}
	m := &Master{file: os.NewFile(uintptr(fd), "pseudo-terminal of "+slave.Name()), path: slave.Name()}
	if err := m.fresh(int(slave.Fd())); err != nil {
		m.Close()
		return nil, "", err
	}
	return m, m.path, nil
}

// SetLossy makes Write drop what the far end has no room for, as a UART does
// whose receiver is not served, instead of waiting for it.
func (m *Master) SetLossy(on bool) { m.lossy.Store(on) }

// Lost returns how many bytes Write has dropped: because nobody had the path
// open or, when lossy, because the far end's buffer was full.
func (m *Master) Lost() uint64 { return m.lost.Load() }

// Path returns the path of the other side.
func (m *Master) Path() string { return m.path }

// Read returns what the far end wrote.
func (m *Master) Read(p []byte) (int, error) {
	for {
		n, err := m.file.Read(p)
		// EIO on Linux and EOF elsewhere: the last program has closed the
		// path. Our own Close gives os.ErrClosed instead.
		if !errors.Is(err, unix.EIO) && err != io.EOF {
			m.clean.Store(false)
			return n, err
		}
		if err := m.afterLast(); err != nil {
			return 0, err
		}
		time.Sleep(reopenPoll)
	}
}

// Write sends p to the far end. It reports len(p) also for bytes that were lost
// as Lost counts them: a board does not learn whether anyone listens.
func (m *Master) Write(p []byte) (int, error) {
	if m.lossy.Load() {
		return m.writeLossy(p)
	}
	sent := 0
	for sent < len(p) {
		alone, err := m.alone()
		if err != nil {
			return sent, err
		}
		if alone {
			m.lost.Add(uint64(len(p) - sent))
			break
		}
		// A program that leaves while its buffer is full would leave this
		// Write waiting for ever, so it looks up now and then.
		m.file.SetWriteDeadline(time.Now().Add(50 * time.Millisecond))
		n, err := m.file.Write(p[sent:])
		sent += n
		if err != nil && !errors.Is(err, os.ErrDeadlineExceeded) && !errors.Is(err, unix.EIO) {
			return sent, err
		}
	}
	return len(p), nil
}

func (m *Master) writeLossy(p []byte) (int, error) {
	alone, err := m.alone()
	if err != nil {
		return 0, err
	}
	n := 0
	if !alone {
		conn, err := m.file.SyscallConn()
		if err != nil {
			return 0, err
		}
		var werr error
		err = conn.Control(func(fd uintptr) { n, werr = unix.Write(int(fd), p) })
		if err != nil {
			return 0, err
		}
		n = max(n, 0)
		if werr != nil && werr != unix.EAGAIN && werr != unix.EIO && werr != unix.EINTR {
			return n, werr
		}
	}
	m.lost.Add(uint64(len(p) - n))
	return len(p), nil
}

// Close ends the pseudo-terminal; the far end sees an error.
func (m *Master) Close() error {
	err := error(nil)
	m.once.Do(func() { err = m.file.Close() })
	return err
}

// alone reports whether nobody has the path open.
func (m *Master) alone() (bool, error) {
	conn, err := m.file.SyscallConn()
	if err != nil {
		return false, err
	}
	var hung bool
	err = conn.Control(func(fd uintptr) {
		poll := [1]unix.PollFd{{Fd: int32(fd), Events: unix.POLLOUT}}
		n, perr := unix.Poll(poll[:], 0)
		hung = perr == nil && n > 0 && poll[0].Revents&unix.POLLHUP != 0
	})
	if err != nil {
		return false, err
	}
	if hung {
		return true, m.afterLast()
	}
	m.clean.Store(false)
	return false, nil
}

// afterLast opens the path itself for a moment and makes it as new, once after
// each program.
func (m *Master) afterLast() error {
	if !m.clean.CompareAndSwap(false, true) {
		return nil
	}
	fd, err := unix.Open(m.path, unix.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK|unix.O_CLOEXEC, 0)
	if err != nil {
		// Somebody holds it exclusively: then it is not ours to clean.
		if err == unix.EBUSY {
			return nil
		}
		return fmt.Errorf("reopen %s: %w", m.path, err)
	}
	defer unix.Close(fd)
	return m.fresh(fd)
}

// fresh sets the far side raw, unlocked and empty.
func (m *Master) fresh(fd int) error {
	t, err := unix.IoctlGetTermios(fd, getTermios)
	if err != nil {
		return fmt.Errorf("read the mode of %s: %w", m.path, err)
	}
	t.Iflag &^= unix.IGNBRK | unix.BRKINT | unix.PARMRK | unix.ISTRIP | unix.INLCR | unix.IGNCR | unix.ICRNL | unix.IXON
	t.Oflag &^= unix.OPOST
	t.Lflag &^= unix.ECHO | unix.ECHONL | unix.ICANON | unix.ISIG | unix.IEXTEN
	t.Cflag = t.Cflag&^(unix.CSIZE|unix.PARENB) | unix.CS8
	t.Cc[unix.VMIN], t.Cc[unix.VTIME] = 1, 0
	if err := unix.IoctlSetTermios(fd, setTermios, t); err != nil {
		return fmt.Errorf("set %s raw: %w", m.path, err)
	}
	// Neither can fail in a way that matters: an old lock or old bytes stay.
	_ = unix.IoctlSetInt(fd, unix.TIOCNXCL, 0)
	_ = flushInput(fd)
	return nil
}
