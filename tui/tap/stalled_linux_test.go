package tap

import (
	"context"
	"io"
	"os"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	tea "github.com/charmbracelet/bubbletea"
	"github.com/creack/pty"
	"golang.org/x/sys/unix"
	"golang.org/x/term"
)

// busy is a screen that repaints all it has, all the time.
type busy struct{ frames *atomic.Int64 }

type again struct{}

func (b busy) Init() tea.Cmd { return func() tea.Msg { return again{} } }

func (b busy) Update(tea.Msg) (tea.Model, tea.Cmd) {
	b.frames.Add(1)
	return b, func() tea.Msg { return again{} }
}

func (b busy) View() string {
	digit := string('0' + rune(b.frames.Load()%10))
	return strings.Repeat(strings.Repeat(digit, 200)+"\n", 50)
}

func until(t *testing.T, what string, ok func() bool) {
	t.Helper()
	for end := time.Now().Add(15 * time.Second); !ok(); time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("never: ", what)
		}
	}
}

// A terminal that no longer reads stops Bubble Tea altogether; the stop key
// must not notice.
func TestStopFiresWhileTheTerminalDoesNotRead(t *testing.T) {
	terminal, tty, err := pty.Open() // nobody reads from terminal
	if err != nil {
		t.Fatal(err)
	}
	defer terminal.Close()
	raw, err := MakeRaw(tty, tty)
	if err != nil {
		t.Fatal(err)
	}
	var stops, keys, closed atomic.Int64
	tap := New(tty, Hooks{
		OnStop:   func(byte) { stops.Add(1) },
		OnKey:    func(byte) { keys.Add(1) },
		OnClosed: func(error) { closed.Add(1) },
	})
	go tap.Run()
	var frames atomic.Int64
	p := tea.NewProgram(busy{&frames}, tea.WithInput(tap), tea.WithOutput(tty), tea.WithoutSignalHandler())
	done := make(chan struct{})
	go func() { p.Run(); close(done) }()

	// The premise: the screen really stands still.
	until(t, "the program stalls", func() bool {
		before := frames.Load()
		time.Sleep(50 * time.Millisecond)
		return before > 0 && frames.Load() == before
	})
	before := frames.Load()
	for i, k := range []string{" ", "\x03", "\x1c", "\x1b "} {
		io.WriteString(terminal, k)
		until(t, "a stop for "+k, func() bool { return stops.Load() == int64(i+1) })
	}
	io.WriteString(terminal, "x")
	until(t, "a key", func() bool { return keys.Load() == 1 })
	if after := frames.Load(); after != before {
		t.Errorf("the program drew %d frames meanwhile: this test shows nothing", after-before)
	}
	if err := raw.Restore(20 * time.Millisecond); err == nil || !strings.Contains(err.Error(), "did not read") {
		t.Errorf("Restore on a stalled terminal gives %v, want it to give up", err)
	}
	if !canonical(t, tty) {
		t.Error("the terminal is still raw")
	}
	terminal.Close() // the window is closed: all that waits on it fails
	until(t, "OnClosed", func() bool { return closed.Load() == 1 })
	p.Kill()
	<-done
}

func canonical(t *testing.T, f *os.File) bool {
	tio, err := unix.IoctlGetTermios(int(f.Fd()), unix.TCGETS)
	if err != nil {
		t.Fatal(err)
	}
	return tio.Lflag&unix.ICANON != 0 && tio.Lflag&unix.ECHO != 0
}

func TestMakeRawAndRestore(t *testing.T) {
	terminal, tty, err := pty.Open()
	if err != nil {
		t.Fatal(err)
	}
	defer terminal.Close()
	defer tty.Close()
	raw, err := MakeRaw(tty, tty)
	if err != nil {
		t.Fatal(err)
	}
	if canonical(t, tty) {
		t.Error("the terminal is not raw")
	}
	for range 2 {
		if err := raw.Restore(10 * time.Second); err != nil || !canonical(t, tty) {
			t.Errorf("Restore gives %v", err)
		}
	}
	got := make([]byte, len(leave))
	if _, err := io.ReadFull(terminal, got); err != nil || string(got) != leave {
		t.Errorf("the terminal was told %q, %v", got, err)
	}
}

func TestAPipeIsNoTerminal(t *testing.T) {
	r, w, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	defer w.Close()
	if _, err := MakeRaw(r, w); err != ErrNotTerminal {
		t.Errorf("MakeRaw of a pipe gives %v", err)
	}
}

func TestWatchSizeTellsChangesOnce(t *testing.T) {
	terminal, tty, err := pty.Open()
	if err != nil {
		t.Fatal(err)
	}
	defer terminal.Close()
	defer tty.Close()
	sizes := make(chan [2]int, 100)
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan struct{})
	go func() { WatchSize(ctx, tty, func(c, r int) { sizes <- [2]int{c, r} }); close(done) }()
	if got := <-sizes; got != [2]int{80, 24} { // a new pseudo-terminal has no size
		t.Errorf("first size %v, want 80 × 24", got)
	}
	for _, want := range [][2]int{{120, 40}, {200, 50}} {
		if err := pty.Setsize(terminal, &pty.Winsize{Cols: uint16(want[0]), Rows: uint16(want[1])}); err != nil {
			t.Fatal(err)
		}
		if c, r, err := term.GetSize(int(tty.Fd())); err != nil || c != want[0] || r != want[1] {
			t.Fatalf("the terminal says %d × %d, %v", c, r, err)
		}
		unix.Kill(os.Getpid(), unix.SIGWINCH) // it is not our controlling terminal
		if got := <-sizes; got != want {
			t.Errorf("size %v, want %v", got, want)
		}
	}
	for range 20 { // announcements without a change
		unix.Kill(os.Getpid(), unix.SIGWINCH)
		time.Sleep(time.Millisecond)
	}
	cancel()
	<-done
	if len(sizes) != 0 {
		t.Errorf("size %v was told without a change", <-sizes)
	}
}
