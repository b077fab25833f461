package tap

import (
	"bytes"
	"fmt"
	"io"
	"slices"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	tea "github.com/charmbracelet/bubbletea"
)

// chunks is a terminal that gives one chunk a read, then EOF.
type chunks []string

func (c *chunks) Read(p []byte) (int, error) {
	if len(*c) == 0 {
		return 0, io.EOF
	}
	n := copy(p, (*c)[0])
	*c = (*c)[1:]
	return n, nil
}

// listen runs a Tap over chunks and gives what the hooks heard.
func listen(in ...string) (heard []string, t *Tap) {
	c := chunks(in)
	t = New(&c, Hooks{
		OnStop:   func(k byte) { heard = append(heard, fmt.Sprintf("stop %02x", k)) },
		OnKey:    func(k byte) { heard = append(heard, fmt.Sprintf("key %02x", k)) },
		OnPaste:  func(n int) { heard = append(heard, fmt.Sprintf("paste %d", n)) },
		OnClosed: func(err error) { heard = append(heard, fmt.Sprint(err)) },
	})
	t.Run()
	return heard, t
}

func forwarded(t *Tap) (got []string) {
	buf := make([]byte, 256) // as Bubble Tea reads
	for {
		n, err := t.Read(buf)
		if err != nil {
			return got
		}
		got = append(got, string(buf[:n]))
	}
}

func TestHooksAndKeys(t *testing.T) {
	paste200 := strings.Repeat("y\rg ", 50)
	for _, c := range []struct {
		name  string
		in    []string
		heard []string
		keys  []string
	}{
		{"space", []string{" "}, []string{"stop 20"}, []string{" "}},
		{"ctrl-c and ctrl-backslash", []string{"\x03", "\x1c"}, []string{"stop 03", "stop 1c"}, []string{"\x1c"}},
		{"alt and space", []string{"\x1b "}, []string{"stop 20"}, []string{"\x1b "}},
		{"escape, then space", []string{"\x1b", " "}, []string{"key 1b", "stop 20"}, []string{" "}},
		{"space among keys comes first and once", []string{"ab  c"}, []string{"stop 20", "key 61", "key 62", "key 63"}, []string{"a", "b", " ", " ", "c"}},
		{"space inside half a sequence", []string{"\x1b[1 "}, []string{"stop 20", "key 1b"}, []string{"\x1b[1 "}},
		{"keys of one read stay apart", []string{"ss"}, []string{"key 73", "key 73"}, []string{"s", "s"}},
		{"arrow, F1, F5, Linux F1, alt-x", []string{"\x1b[A\x1bOP\x1b[15~\x1b[[A\x1bx"},
			[]string{"key 1b", "key 1b", "key 1b", "key 1b", "key 1b"}, []string{"\x1b[A", "\x1bOP", "\x1b[15~", "\x1b[[A", "\x1bx"}},
		{"ctrl-z is a key", []string{"\x1a"}, []string{"key 1a"}, []string{"\x1a"}},
		{"a letter of two bytes", []string{"é"}, []string{"key c3"}, []string{"é"}},
		{"half a sequence is a key", []string{"\x1b[1;", "5A"}, []string{"key 1b", "key 35", "key 41"}, []string{"\x1b[1;", "5", "A"}},
		{"the terminal's answer is no key", []string{"\x1b]11;rgb:0000/0000/0000\x1b\\"}, nil, []string{"\x1b]11;rgb:0000/0000/0000\x1b\\"}},
		{"the same, ended by BEL", []string{"\x1b]11;rgb:0/0/0\ax"}, []string{"key 78"}, []string{"\x1b]11;rgb:0/0/0\a", "x"}},
		{"an answer without an end swallows nothing", []string{"\x1b]11;", "x"}, []string{"key 1b", "key 31", "key 31", "key 3b", "key 78"}, []string{"\x1b]", "1", "1", ";", "x"}},
		{"seven keys are keys", []string{"1234567"}, []string{"key 31", "key 32", "key 33", "key 34", "key 35", "key 36", "key 37"}, []string{"1", "2", "3", "4", "5", "6", "7"}},
		{"eight keys are a paste", []string{"12345678"}, []string{"paste 8"}, []string{"\x1b[200~12345678\x1b[201~"}},
		{"a paste executes nothing", []string{paste200}, []string{"stop 20", "paste 200"}, []string{"\x1b[200~" + strings.Repeat("yg ", 50) + "\x1b[201~"}},
		{"bracketed paste", []string{"a\x1b[200~x\ry\x1b[201~b"}, []string{"key 61", "paste 3", "key 62"}, []string{"a", "\x1b[200~xy\x1b[201~", "b"}},
		{"bracketed paste in pieces", []string{"\x1b[200~ab", "cd", "e\x1b[201~f"}, []string{"paste 2", "paste 2", "paste 1", "key 66"},
			[]string{"\x1b[200~ab\x1b[201~", "\x1b[200~cd\x1b[201~", "\x1b[200~e\x1b[201~", "f"}},
		{"a paste without an end still stops", []string{"\x1b[200~ab", " "}, []string{"paste 2", "stop 20", "paste 1"}, []string{"\x1b[200~ \x1b[201~"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			heard, tap := listen(c.in...)
			if want := append(slices.Clone(c.heard), "EOF"); !slices.Equal(heard, want) {
				t.Errorf("heard %q\nwant  %q", heard, want)
			}
			if got := forwarded(tap); !slices.Equal(got, c.keys) {
				t.Errorf("Bubble Tea gets %q\nwant             %q", got, c.keys)
			}
		})
	}
}

// Whatever bytes arrive, cut however: every chunk with a stop byte stops, and
// nothing else does.
func FuzzEveryStopByteStops(f *testing.F) {
	f.Add([]byte("abc \x1b[200~ x\x03\x1b]"), uint8(3))
	f.Fuzz(func(t *testing.T, b []byte, size uint8) {
		want := 0
		var in []string
		for c := range slices.Chunk(b, int(size)+1) {
			in = append(in, string(c))
			if bytes.ContainsAny(c, " \x03\x1c") {
				want++
			}
		}
		heard, _ := listen(in...)
		got := 0
		for _, h := range heard {
			if strings.HasPrefix(h, "stop") {
				got++
			}
		}
		if got != want {
			t.Errorf("%q in pieces of %d: %d stops, want %d", b, size, got, want)
		}
	})
}

func TestQueueIsBounded(t *testing.T) {
	in := chunks(slices.Repeat([]string{"j"}, QueueMax+100))
	tap := New(&in, Hooks{OnStop: func(byte) {}})
	tap.now = func() time.Time { return time.Time{} } // none gets old here
	tap.Run()
	if n := len(forwarded(tap)); n != QueueMax || tap.Dropped() != 100 {
		t.Errorf("%d keys waited, %d dropped, want %d and 100", n, tap.Dropped(), QueueMax)
	}
}

func TestAKeyThatWaitedTooLongIsDropped(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r, w := io.Pipe()
		tap := New(r, Hooks{OnStop: func(byte) {}})
		go tap.Run()
		w.Write([]byte("a")) // pressed while the screen stands still
		time.Sleep(KeyAgeMax + time.Millisecond)
		w.Write([]byte("b"))
		buf := make([]byte, 8)
		if n, _ := tap.Read(buf); string(buf[:n]) != "b" || tap.Dropped() != 1 {
			t.Errorf("Bubble Tea gets %q, %d dropped; want b and 1", buf[:n], tap.Dropped())
		}
		w.Close()
		if _, err := tap.Read(buf); err != io.EOF {
			t.Errorf("after the end: %v", err)
		}
	})
}

// A paste that is voided half read must still end, or Bubble Tea takes every
// later key for a part of it.
func TestAHalfReadPasteStillEnds(t *testing.T) {
	for cutAt := 1; cutAt < 110; cutAt++ {
		r, w := io.Pipe()
		tap := New(r, Hooks{OnStop: func(byte) {}})
		go tap.Run()
		w.Write([]byte(strings.Repeat("x", 100)))
		head := make([]byte, cutAt)
		n, _ := tap.Read(head)
		w.Write([]byte(" "))
		w.Close()
		got := string(head[:n]) + strings.Join(forwarded(tap), "")
		if !strings.HasPrefix(got, "\x1b[200~"[:min(6, n)]) || !strings.HasSuffix(got, "\x1b[201~ ") {
			t.Fatalf("read %d first: Bubble Tea gets %q", cutAt, got)
		}
		r.Close()
	}
}

func TestPanicHookComesFirst(t *testing.T) {
	var hooked any
	in := chunks{"x"}
	defer func() {
		if v := recover(); v != "bug" || hooked != "bug" {
			t.Errorf("recovered %v, hook heard %v", v, hooked)
		}
	}()
	New(&in, Hooks{
		OnStop:  func(byte) {},
		OnKey:   func(byte) { panic("bug") },
		OnPanic: func(v any, stack []byte) { hooked = v },
	}).Run()
}

// eofs gives Ctrl-Z as Go's reader of a Windows console does.
type eofs struct{ first bool }

func (e *eofs) Read(p []byte) (int, error) {
	if e.first {
		e.first = false
		time.Sleep(time.Second) // until the key
	}
	return 0, io.EOF
}

func TestCtrlZOfAWindowsConsoleIsAKey(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		defer func(was bool) { ctrlZIsEOF = was }(ctrlZIsEOF)
		ctrlZIsEOF = true
		var heard []string
		New(&eofs{first: true}, Hooks{
			OnStop:   func(byte) {},
			OnKey:    func(k byte) { heard = append(heard, fmt.Sprintf("key %02x", k)) },
			OnClosed: func(err error) { heard = append(heard, err.Error()) },
		}).Run()
		if want := []string{"key 1a", "EOF"}; !slices.Equal(heard, want) {
			t.Errorf("heard %q, want %q", heard, want)
		}
	})
}

// What Bubble Tea makes of what the Tap gives it.
type seen struct{ keys *[]string }

func (s seen) Init() tea.Cmd { return nil }
func (s seen) View() string  { return "" }
func (s seen) Update(m tea.Msg) (tea.Model, tea.Cmd) {
	if k, ok := m.(tea.KeyMsg); ok {
		*s.keys = append(*s.keys, fmt.Sprint(k, k.Paste))
		if k.String() == "q" {
			return s, tea.Quit
		}
	}
	return s, nil
}

func TestBubbleTeaGetsSingleKeysAndWholePastes(t *testing.T) {
	var keys []string
	in := chunks{"ss", " \x1b[A", "\x1b[200~ab\rcd", "ef", "\x1b[201~", "\rq"}
	tap := New(&in, Hooks{OnStop: func(byte) {}})
	done := make(chan error, 1)
	go func() {
		_, err := tea.NewProgram(seen{&keys}, tea.WithInput(tap), tea.WithOutput(io.Discard), tea.WithoutSignalHandler()).Run()
		done <- err
	}()
	tap.Run()
	select {
	case err := <-done:
		if err != nil {
			t.Error(err)
		}
	case <-time.After(10 * time.Second):
		t.Fatal("the program did not see q")
	}
	want := []string{"  false", "up false", "[abcd] true", "[ef] true", "enter false", "q false"}
	for len(keys) > 0 && keys[0] == "s false" { // read before the stop voided them
		keys = keys[1:]
	}
	if !slices.Equal(keys, want) {
		t.Errorf("Bubble Tea saw %q\nwant            %q", keys, want)
	}
}
