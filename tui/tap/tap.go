package tap

import (
	"bytes"
	"errors"
	"io"
	"runtime"
	"runtime/debug"
	"sync"
	"time"
)

// Bounds and thresholds.
const (
	// PasteMin is how many printable keys in one read are a paste: nobody
	// types eight keys between two reads, also not over a slow connection.
	PasteMin = 8
	// QueueMax is how many bytes may wait for Bubble Tea. What comes on top is
	// dropped and counted.
	QueueMax = 4096
	// KeyAgeMax is how long a key may wait for Bubble Tea. An older one was
	// pressed at a screen that is no longer there, and is dropped.
	KeyAgeMax = time.Second

	readMax = 1024
)

// The keys that stop, wherever they stand in what was read. In raw mode Ctrl-C
// and Ctrl-\ are bytes like any other and reach no signal handler.
const (
	Space         = 0x20
	CtrlC         = 0x03
	CtrlBackslash = 0x1C
)

const stopKeys = "\x20\x03\x1c"

// Hooks are called from the goroutine that runs Run, in the order of the bytes
// but for a stop, which comes first. They must not block. All may be nil but
// OnStop.
type Hooks struct {
	// OnStop is called once for each read that holds a stop key, before
	// anything else is done with it.
	OnStop func(key byte)
	// OnKey is called for every other key with its first byte; for a key that
	// sends a sequence, such as an arrow, that is ESC (1B hex).
	OnKey func(key byte)
	// OnPaste is called instead of OnKey when one read holds many keys: a
	// bracketed paste, or PasteMin printable bytes or more.
	OnPaste func(keys int)
	// OnClosed is called once when the terminal gives no more bytes: closed,
	// hung up, or failed. err is io.EOF or what the system said.
	OnClosed func(err error)
	// OnPanic is called first if Run panics; the panic then goes on.
	OnPanic func(v any, stack []byte)
}

// Tap reads keys, tells the hooks, and serves what it read to Bubble Tea.
type Tap struct {
	in    io.Reader
	hooks Hooks

	pasting bool // within a bracketed paste; owned by Run

	mu      sync.Mutex
	queue   []key
	waiting int // bytes in queue
	dropped uint64
	closed  bool
	added   chan struct{}
	now     func() time.Time
}

// key is what one Read of Bubble Tea gets.
type key struct {
	at   time.Time
	b    []byte
	part bool // the beginning has been read: only of a paste
}

// drop throws k away. A paste of which the beginning has been read keeps its
// end: Bubble Tea would take every later key for a part of it.
func (k *key) drop() {
	keep := 0
	if k.part {
		keep = min(len(k.b), len(pasteEnd))
	}
	k.b = k.b[len(k.b)-keep:]
}

// New returns a Tap of in, usually os.Stdin. Nothing is read before Run.
func New(in io.Reader, hooks Hooks) *Tap {
	if hooks.OnStop == nil {
		panic("tap: Hooks.OnStop is nil")
	}
	return &Tap{in: in, hooks: hooks, added: make(chan struct{}, 1), now: time.Now}
}

// Run reads until the terminal gives no more bytes. It has a goroutine to
// itself: a Read of a terminal cannot be called off, so Run ends with the
// terminal or with the program.
func (t *Tap) Run() {
	defer func() {
		if v := recover(); v != nil {
			if t.hooks.OnPanic != nil {
				t.hooks.OnPanic(v, debug.Stack())
			}
			panic(v)
		}
	}()
	var buf [readMax]byte
	for {
		began := time.Now()
		n, err := t.in.Read(buf[:])
		if n > 0 {
			t.take(buf[:n])
		}
		if err == nil {
			continue
		}
		// Go's reader of a Windows console reports Ctrl-Z as EOF. A console
		// that is really gone gives the next one at once.
		if ctrlZIsEOF && errors.Is(err, io.EOF) && time.Since(began) > 10*time.Millisecond {
			t.take([]byte{0x1A})
			continue
		}
		if t.hooks.OnClosed != nil {
			t.hooks.OnClosed(err)
		}
		t.Close()
		return
	}
}

var ctrlZIsEOF = runtime.GOOS == "windows"

// take handles the bytes of one read.
func (t *Tap) take(chunk []byte) {
	if i := bytes.IndexAny(chunk, stopKeys); i >= 0 {
		t.hooks.OnStop(chunk[i])
		t.void() // a stop voids what was pressed before it
	}
	for len(chunk) > 0 {
		if t.pasting {
			var part []byte
			part, chunk, t.pasting = cutPaste(chunk)
			t.paste(part)
			continue
		}
		var typed []byte
		typed, chunk, t.pasting = bytes.Cut(chunk, pasteStart)
		t.typed(typed)
	}
}

// typed handles bytes outside of a bracketed paste.
func (t *Tap) typed(b []byte) {
	if printable(b) >= PasteMin {
		t.paste(b)
		return
	}
	for len(b) > 0 {
		n, isKey := keyLen(b)
		if isKey && t.hooks.OnKey != nil && !isStop(b[:n]) {
			t.hooks.OnKey(b[0])
		}
		t.push(append([]byte(nil), b[:n]...))
		b = b[n:]
	}
}

// paste hands on what was pasted as a bracketed paste of its own, whole and
// without control bytes, so that nothing in it is ever taken for a key.
func (t *Tap) paste(b []byte) {
	if len(b) == 0 {
		return
	}
	keys, text := 0, append([]byte(nil), pasteStart...)
	for _, c := range b {
		if c&0xC0 != 0x80 { // not a continuation of UTF-8
			keys++
		}
		if c >= 0x20 && c != 0x7F {
			text = append(text, c)
		}
	}
	if t.hooks.OnPaste != nil {
		t.hooks.OnPaste(keys)
	}
	t.push(append(text, pasteEnd...))
}

func (t *Tap) push(b []byte) {
	t.mu.Lock()
	if t.closed || t.waiting+len(b) > QueueMax {
		t.dropped++
	} else {
		t.queue = append(t.queue, key{at: t.now(), b: b})
		t.waiting += len(b)
	}
	t.mu.Unlock()
	select {
	case t.added <- struct{}{}:
	default:
	}
}

func (t *Tap) void() {
	t.mu.Lock()
	t.discard(func(key) bool { return true })
	t.mu.Unlock()
}

// discard drops keys from the front of the queue for as long as unwanted says
// so. The caller holds the mutex.
func (t *Tap) discard(unwanted func(key) bool) {
	var kept []key
	for len(t.queue) > 0 && unwanted(t.queue[0]) {
		first := t.queue[0]
		t.queue = t.queue[1:]
		t.waiting -= len(first.b)
		t.dropped++
		if first.drop(); len(first.b) > 0 {
			t.waiting += len(first.b)
			kept = append(kept, first)
		}
	}
	if kept != nil {
		t.queue = append(kept, t.queue...)
	}
}

// Read gives Bubble Tea one key, or as much of one paste as fits p. It blocks
// until there is one, and returns io.EOF after Close.
func (t *Tap) Read(p []byte) (int, error) {
	for {
		n, closed := t.pop(p)
		if n > 0 || len(p) == 0 {
			return n, nil
		}
		if closed {
			return 0, io.EOF
		}
		<-t.added
	}
}

func (t *Tap) pop(p []byte) (n int, closed bool) {
	t.mu.Lock()
	defer t.mu.Unlock()
	now := t.now()
	t.discard(func(k key) bool { return now.Sub(k.at) > KeyAgeMax })
	if len(t.queue) == 0 {
		return 0, t.closed
	}
	first := &t.queue[0]
	n = copy(p, first.b)
	t.waiting -= n
	if first.b = first.b[n:]; len(first.b) == 0 {
		t.queue = t.queue[1:]
	} else if n > 0 {
		first.part = true
	}
	return n, false
}

// Dropped returns how many keys Bubble Tea did not get: voided by a stop, too
// old, or too many.
func (t *Tap) Dropped() uint64 {
	t.mu.Lock()
	defer t.mu.Unlock()
	return t.dropped
}

// Close lets Read return io.EOF. The hooks go on working until the terminal
// itself is closed.
func (t *Tap) Close() error {
	t.mu.Lock()
	t.closed = true
	t.mu.Unlock()
	select {
	case t.added <- struct{}{}:
	default:
	}
	return nil
}
