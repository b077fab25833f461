//go:build unix

package tap

import (
	"os"
	"os/signal"
	"syscall"
)

func sizeSignal() (changed <-chan os.Signal, stop func()) {
	c := make(chan os.Signal, 1)
	signal.Notify(c, syscall.SIGWINCH)
	return c, func() { signal.Stop(c) }
}
