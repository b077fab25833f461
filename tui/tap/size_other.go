//go:build !unix

package tap

import "time"

// sizePoll is how often the size is asked for where nothing announces a change.
const sizePoll = 250 * time.Millisecond

func sizeSignal() (changed <-chan time.Time, stop func()) {
	t := time.NewTicker(sizePoll)
	return t.C, t.Stop
}
