package emulate

import (
	"bytes"
	"testing"
	"time"

	"gainwright/protocol"
)

// boards are all of them.
var boards = map[string]func(t testing.TB) *Board{
	"host":       func(t testing.TB) *Board { return Host(t, false) },
	"ATmega328P": func(t testing.TB) *Board { return ATmega328P(t, "m328-sim") },
	"CortexM3":   CortexM3,
}

type heard struct {
	samples []protocol.Sample
	lines   []string
}

func (h *heard) Sample(s protocol.Sample) { h.samples = append(h.samples, s) }
func (h *heard) Line(b []byte)            { h.lines = append(h.lines, string(b)) }
func (h *heard) Bad(raw []byte, _ error)  { h.lines = append(h.lines, "bad "+string(raw)) }

// A turn by hand counts one turn, a restart adds one to the count of starts, and
// the same orders give the same bytes.
func TestTimeHandAndRestart(t *testing.T) {
	for name, start := range boards {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			session := func(t *testing.T) []byte {
				b := start(t)
				b.Receive(protocol.AppendRequest(nil, "rate", 1, "50 x tu"))
				b.Advance(b.Now() + 100*time.Millisecond)
				b.Hand(1)
				b.Advance(b.Now() + 2500*time.Millisecond)
				b.PowerCycle()
				b.Advance(b.Now() + 300*time.Millisecond)
				if b.Err() != nil {
					t.Fatal(b.Err())
				}
				return b.Output()
			}
			out := session(t)
			var h heard
			var f protocol.Framer
			f.Feed(out, &h)
			if n := len(h.samples); n < 120 || n > 135 {
				t.Fatalf("%d samples in 2.6 s of 50 Hz; lines %q", n, h.lines)
			}
			if turn := h.samples[len(h.samples)-1].Counts - h.samples[0].Counts; turn < 1990 || turn > 2010 {
				t.Errorf("a turn by hand counted %d, want 2000", turn)
			}
			if len(h.lines) < 3 || h.lines[0] != "ev boot 1 power" || !bytes.HasPrefix([]byte(h.lines[len(h.lines)-1]), []byte("ev boot 2 ")) {
				t.Errorf("lines %q", h.lines)
			}
			if again := session(t); !bytes.Equal(out, again) {
				t.Error("the same orders gave other bytes")
			}
		})
	}
}
