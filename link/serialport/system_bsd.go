//go:build unix && !linux

package serialport

import "golang.org/x/sys/unix"

const (
	getTermios = unix.TIOCGETA
	setTermios = unix.TIOCSETA
)

func foreignLock(string) *Holder { return nil }

func whoHas(string) *Holder { return nil }

func permissionRemedy(path string) string {
	return "ask the administrator for read and write permission; `ls -l " + path + "` shows the group that has it"
}
