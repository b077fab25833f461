package tap

import (
	"context"
	"errors"
	"fmt"
	"os"
	"time"

	"golang.org/x/term"
)

// ErrNotTerminal says that the input is a file or a pipe: no keys come from it,
// and nothing may be armed through it.
var ErrNotTerminal = errors.New("standard input is not a terminal; start from a terminal window")

// leave is what a screen program has to take back: mouse, focus and paste
// reports off, attributes off, cursor on, main screen.
const leave = "\x1b[?1000l\x1b[?1002l\x1b[?1003l\x1b[?1006l\x1b[?1004l\x1b[?2004l\x1b[0m\x1b[?25h\x1b[?1049l\r"

// Terminal is a terminal in raw mode.
type Terminal struct {
	in, out *os.File
	state   *term.State
}

// MakeRaw puts the terminal of in into raw mode: every key comes at once, none
// is echoed, none becomes a signal. out is where Restore takes back what screens
// have set.
func MakeRaw(in, out *os.File) (*Terminal, error) {
	if !term.IsTerminal(int(in.Fd())) {
		return nil, ErrNotTerminal
	}
	state, err := term.MakeRaw(int(in.Fd()))
	if err != nil {
		return nil, fmt.Errorf("set the terminal to raw mode: %w", err)
	}
	return &Terminal{in: in, out: out, state: state}, nil
}

// Restore gives the terminal back as MakeRaw found it. It may be called again,
// and from a panic hook. The mode comes first, because that never waits; what
// has to be written may wait for a terminal that does not read, so it gets
// patience and is then left.
func (t *Terminal) Restore(patience time.Duration) error {
	err := term.Restore(int(t.in.Fd()), t.state)
	if err != nil {
		err = fmt.Errorf("give the terminal back: %w; type `reset` if it looks odd", err)
	}
	wrote := make(chan error, 1)
	go func() { _, werr := t.out.WriteString(leave); wrote <- werr }()
	select {
	case werr := <-wrote:
		return errors.Join(err, werr)
	case <-time.After(patience):
		return errors.Join(err, fmt.Errorf("the terminal did not read for %v; type `reset` if it looks odd", patience))
	}
}

// WatchSize calls onSize with columns and rows, at once and whenever they have
// changed, until ctx is done. onSize must not wait for Bubble Tea: store the
// size where the next frame finds it. A terminal that does not tell its size
// gives 80 × 24.
func WatchSize(ctx context.Context, out *os.File, onSize func(columns, rows int)) {
	changed, stop := sizeSignal()
	defer stop()
	lastColumns, lastRows := 0, 0
	for {
		columns, rows, err := term.GetSize(int(out.Fd()))
		if err != nil || columns <= 0 || rows <= 0 {
			columns, rows = 80, 24
		}
		if columns != lastColumns || rows != lastRows {
			lastColumns, lastRows = columns, rows
			onSize(columns, rows)
		}
		select {
		case <-ctx.Done():
			return
		case <-changed:
		}
	}
}
