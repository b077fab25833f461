package tui

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
	"time"

	tea "github.com/charmbracelet/bubbletea"

	"gainwright/tune/job"
)

// Session is what the console needs of the work that goes on behind it. None of
// its methods may wait for anything.
type Session interface {
	// Stop asks for a stop and says who asked.
	Stop(source string)
	// Post hands over what the person wants.
	Post(job.Intent)
	// View returns the newest state to show.
	View() *job.View
	// Alive says that a frame has just been taken by the terminal.
	Alive()
}

// Options says where the console runs.
type Options struct {
	Session Session
	// Input is where keys come from, behind the tap that takes the stop key.
	// Raw mode is the caller's affair.
	Input io.Reader
	// Output is the terminal. Where it is a file, its size is followed.
	Output io.Writer
	// Getenv tells about the terminal (LookFrom); nil means an empty one.
	Getenv func(string) string
	// Size gives columns and rows where Output is no file; nil means 80 by 24.
	Size func() (w, h int)
	// BytesPerSecond bounds what is written, for slow lines: frames are left
	// out to keep it. 0 means no bound.
	BytesPerSecond int
}

// ErrStalled says that the terminal did not take the last frame, so the console
// was left behind. The caller restores the terminal.
var ErrStalled = errors.New("tui: the terminal does not read")

const (
	framesPerSecond = 30
	// pulseFrames is how many frames may pass without anything written. A
	// screen on which nothing changes is written to this often all the same,
	// to see that the terminal still takes it.
	pulseFrames = 6
	// leaveTime is how long the console may take to leave the screen.
	leaveTime = time.Second
)

// Run shows the console until ctx ends. It returns nil after a clean end,
// ErrStalled where the terminal did not let go, or what the terminal library
// reports. The terminal is back on its main screen unless it stalled.
func Run(ctx context.Context, o Options) error {
	if o.Getenv == nil {
		o.Getenv = func(string) string { return "" }
	}
	out := &output{w: o.Output, alive: o.Session.Alive, now: time.Now}
	var to io.Writer = out
	if f, ok := o.Output.(file); ok {
		to = fileOutput{out, f}
	} else if o.Size == nil {
		o.Size = func() (int, int) { return fullWidth, fullHeight }
	}
	r := &root{ctx: ctx, session: o.Session, screen: New(LookFrom(o.Getenv)), out: out, size: o.Size, budget: o.BytesPerSecond, start: time.Now()}
	if r.size != nil {
		r.w, r.h = r.size()
	}
	p := tea.NewProgram(r, tea.WithInput(o.Input), tea.WithOutput(to), tea.WithAltScreen(), tea.WithoutSignalHandler(), tea.WithFPS(2*framesPerSecond))
	done := make(chan error, 1)
	go func() {
		_, err := p.Run()
		done <- err
	}()
	select {
	case err := <-done:
		return ended(ctx, err)
	case <-ctx.Done():
	}
	select {
	case err := <-done:
		return ended(ctx, err)
	case <-time.After(leaveTime):
		p.Kill()
		return ErrStalled
	}
}

// ended turns the end of the program into what Run promises.
func ended(ctx context.Context, err error) error {
	if err == nil || (ctx.Err() != nil && errors.Is(err, context.Cause(ctx))) {
		return nil
	}
	return fmt.Errorf("tui: %w", err)
}

// root is the model that the terminal library runs: the only place in this
// package with commands, and the only one that asks for the time.
type root struct {
	ctx     context.Context
	session Session
	screen  Screen
	out     *output
	size    func() (int, int)
	budget  int

	w, h   int
	view   *job.View // the one that was drawn last
	text   string
	dirty  bool
	start  time.Time
	frames int64 // shown or left out, since start
	quiet  int   // frames since something was written
	pulse  bool
	sent   int64 // bytes written when last looked, for the pulse
	spent  int64 // the same, for the bound on bytes
	credit float64
	rang   string // the moment of the count-down that was rung
	rest   time.Time
}

type frameMsg struct{}

// tick waits for the next frame. Frames lie on a grid from the start, so that
// the time a frame takes does not slow the next one down.
func (r *root) tick() tea.Cmd {
	const period = time.Second / framesPerSecond
	since := time.Since(r.start)
	r.frames = max(r.frames+1, int64(since/period))
	wait := time.Duration(r.frames)*period - since
	return tea.Tick(max(wait, 0), func(time.Time) tea.Msg { return frameMsg{} })
}

// Init draws the first frame and starts the clock of frames.
func (r *root) Init() tea.Cmd {
	r.view = r.session.View()
	r.dirty = true
	if r.size != nil {
		return tea.Batch(r.resized(), r.tick())
	}
	return r.tick()
}

// resized tells the library of a size that it cannot see itself.
func (r *root) resized() tea.Cmd {
	w, h := r.w, r.h
	return func() tea.Msg { return tea.WindowSizeMsg{Width: w, Height: h} }
}

// Update takes keys, sizes and frames. A fault in here stops the motor first.
func (r *root) Update(msg tea.Msg) (tea.Model, tea.Cmd) {
	defer r.fault()
	switch msg := msg.(type) {
	case frameMsg:
		if r.ctx.Err() != nil {
			return r, tea.Quit
		}
		return r, r.frame()
	case tea.WindowSizeMsg:
		r.w, r.h, r.dirty = msg.Width, msg.Height, true
	case tea.KeyMsg:
		return r, r.keys(tea.Key(msg))
	}
	return r, nil
}

func (r *root) fault() {
	if e := recover(); e != nil {
		r.session.Stop("screen failed")
		panic(e)
	}
}

// frame takes the newest view and decides whether it is drawn now.
func (r *root) frame() tea.Cmd {
	next := r.tick()
	if r.size != nil && r.frames%10 == 0 {
		if w, h := r.size(); w != r.w || h != r.h {
			r.w, r.h, r.dirty = w, h, true
			next = tea.Batch(next, r.resized())
		}
	}
	if !r.afford() {
		return next
	}
	if v := r.session.View(); v != r.view {
		r.view, r.dirty = v, true
	}
	r.ring()
	sent := r.out.sent.Load()
	if sent != r.sent {
		r.sent, r.quiet = sent, 0
	}
	if r.quiet++; r.quiet >= pulseFrames {
		r.quiet, r.pulse, r.dirty = 0, !r.pulse, true
	}
	return next
}

// afford reports whether a frame may be drawn now: not while the terminal needs
// longer for one than a frame lasts, and not beyond the bound on bytes.
func (r *root) afford() bool {
	now := time.Now()
	if now.Before(r.rest) {
		return false
	}
	if took := time.Duration(r.out.took.Swap(0)); took > time.Second/framesPerSecond {
		r.rest = now.Add(min(took, 250*time.Millisecond))
		return false
	}
	if r.budget <= 0 {
		return true
	}
	per := float64(r.budget)
	r.credit = min(r.credit+per/framesPerSecond, per/2) - float64(r.out.sent.Load()-r.spent)
	r.spent = r.out.sent.Load()
	return r.credit > 0
}

// ring asks for a bell at each second of the count-down.
func (r *root) ring() {
	v := r.view
	if v == nil || v.Drive.Phase != countDown {
		r.rang = ""
		return
	}
	if left := fmt.Sprint(math.Ceil(v.Drive.CountLeft.Seconds())); left != r.rang {
		r.rang = left
		r.out.bell.Store(true)
	}
}

// keys takes what was typed, one key after another.
func (r *root) keys(k tea.Key) tea.Cmd {
	view := r.view // a key means what the person saw
	if now := r.session.View(); Hot(now) {
		view = now
	}
	r.dirty = true
	switch {
	case k.Alt:
		return nil
	case k.Type == tea.KeyCtrlL:
		return tea.ClearScreen
	case k.Paste && !r.screen.typing(view):
		return nil // the tap has dealt with it
	case k.Type == tea.KeyRunes || k.Type == tea.KeySpace:
		for _, c := range k.Runes {
			r.press(string(c), view)
		}
	default:
		r.press(k.String(), view)
	}
	return nil
}

func (r *root) press(key string, view *job.View) {
	var wants []job.Intent
	r.screen, wants = r.screen.Update(key, view)
	for _, w := range wants {
		r.session.Post(w)
	}
}

// View returns the newest text; it draws only when something changed.
func (r *root) View() string {
	defer r.fault()
	if r.w <= 0 || r.h <= 0 {
		return ""
	}
	if r.dirty {
		r.dirty = false
		r.text = r.screen.Draw(r.view, r.w, r.h)
		if r.pulse {
			r.text = beat(r.text, r.w)
		}
	}
	return r.text
}

// beat changes the shortest row of a frame without a change to the eye, so that
// the renderer writes that row again.
func beat(text string, w int) string {
	rows := strings.Split(text, "\n")
	short := 0
	for i, row := range rows {
		if len(row) < len(rows[short]) {
			short = i
		}
	}
	if len(rows[short]) < w {
		rows[short] += " "
	} else {
		rows[short] += "\x1b[m"
	}
	return strings.Join(rows, "\n")
}
