package serialport

import (
	"fmt"
	"os"
	"os/user"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"

	"golang.org/x/sys/unix"
)

const (
	getTermios = unix.TCGETS
	setTermios = unix.TCSETS
)

// uucpLockDir is where other programs say that they have a port; a variable for
// the tests.
var uucpLockDir = "/var/lock"

// foreignLock looks for another program's lock file. Its whole content is the
// process number in decimal (Filesystem Hierarchy Standard 3.0, section 5.9). A
// lock whose process has ended means nothing.
func foreignLock(device string) *Holder {
	text, err := os.ReadFile(filepath.Join(uucpLockDir, "LCK.."+filepath.Base(device)))
	if err != nil {
		return nil
	}
	pid, err := strconv.Atoi(strings.TrimSpace(string(text)))
	if err != nil || pid <= 0 || unix.Kill(pid, 0) == unix.ESRCH {
		return nil
	}
	return &Holder{PID: pid, Program: command(pid)}
}

// whoHas looks through the files of all processes that may be looked at.
func whoHas(path string) *Holder {
	device, err := resolve(path)
	if err != nil {
		return nil
	}
	fds, _ := filepath.Glob("/proc/[0-9]*/fd/*")
	for _, fd := range fds {
		if to, err := os.Readlink(fd); err != nil || to != device {
			continue
		}
		pid, err := strconv.Atoi(strings.Split(fd, "/")[2])
		if err == nil && pid != os.Getpid() {
			return &Holder{PID: pid, Program: command(pid)}
		}
	}
	return nil
}

func command(pid int) string {
	name, _ := os.ReadFile(fmt.Sprintf("/proc/%d/comm", pid))
	return printable(strings.TrimSpace(string(name)))
}

// permissionRemedy names the group that owns the device: dialout, uucp or
// plugdev, as the distribution has it.
func permissionRemedy(path string) string {
	group := ""
	if info, err := os.Stat(path); err == nil {
		if st, ok := info.Sys().(*syscall.Stat_t); ok && st.Gid != 0 {
			if g, err := user.LookupGroupId(strconv.Itoa(int(st.Gid))); err == nil {
				group = g.Name
			}
		}
	}
	if group == "" {
		return "ask the administrator for read and write permission on it"
	}
	return fmt.Sprintf("join the group that owns it, `sudo usermod -aG %s $USER`, then log out and in again", group)
}
