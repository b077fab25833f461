//go:build unix

package emulate

import (
	"os"
	"syscall"
)

// fifos makes the two named pipes of QEMU's character device "pipe" and opens
// them, both ways, so that neither end waits for the other to open.
func fifos(path string) (in, out *os.File, err error) {
	for _, end := range []string{".in", ".out"} {
		if err := syscall.Mkfifo(path+end, 0o600); err != nil {
			return nil, nil, err
		}
	}
	if in, err = os.OpenFile(path+".in", os.O_RDWR, 0); err != nil {
		return nil, nil, err
	}
	if out, err = os.OpenFile(path+".out", os.O_RDWR, 0); err != nil {
		in.Close()
	}
	return in, out, err
}
