//go:build unix && !linux

package ptyport

import "golang.org/x/sys/unix"

const (
	getTermios = unix.TIOCGETA
	setTermios = unix.TIOCSETA
)

// freadFlag selects the input queue in TIOCFLUSH (FREAD in sys/fcntl.h).
const freadFlag = 1

func flushInput(fd int) error { return unix.IoctlSetPointerInt(fd, unix.TIOCFLUSH, freadFlag) }
