package simrig

import (
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
)

// FuzzReceive: whatever comes in, a board that was not armed never puts power
// out, and what it says is lines with a good CRC.
func FuzzReceive(f *testing.F) {
	f.Add([]byte("id\ntel\nstop\n\x18"), uint8(3))
	f.Add(protocol.AppendRequest(nil, "lim", 3, "set 0 41400000"), uint8(0))
	f.Add(protocol.AppendRequest(protocol.AppendRequest(nil, "cap", 3, "now 1 9"), "cap", 4, "get 8"), uint8(200))
	f.Add(protocol.AppendDriveVolts(nil, 1, 0, 5), uint8(9))
	f.Fuzz(func(t *testing.T, b []byte, gap uint8) { feed(t, b, gap) })
}

func feed(t *testing.T, b []byte, gap uint8) {
	r := New(benchConfig(), 1)
	at := 200 * time.Millisecond
	r.Advance(at)
	var fr protocol.Framer
	var h tally
	fr.Feed(r.Output(), &h)
	for len(b) > 0 {
		n := min(len(b), 1+int(gap)%40)
		r.Receive(b[:n])
		b = b[n:]
		at += time.Duration(gap) * 50 * time.Microsecond
		r.Advance(at)
		fr.Feed(r.Output(), &h)
		if r.Powered() {
			t.Fatal("power without an arm")
		}
	}
	r.Advance(at + time.Second)
	fr.Feed(r.Output(), &h)
	if h.bad > 0 {
		t.Fatalf("%d bad lines from the board", h.bad)
	}
}

type tally struct{ bad int }

func (h *tally) Sample(protocol.Sample) {}
func (h *tally) Line([]byte)            {}
func (h *tally) Bad([]byte, error)      { h.bad++ }

// TestRandomRequests sends well-formed lines with random words.
func TestRandomRequests(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 9))
	words := strings.Fields("id tel stop rate nonce arm dis ramp reset lim gain cap log in hb dv ds get set use crc run store now state " +
		"0 1 2 7 14 99 -1 65535 1000000 x d t tu 00000000 3F800000 7F800000 0000 FFFF kp")
	for range 300 {
		var b []byte
		for n := range 30 {
			args := make([]string, rng.IntN(5))
			for i := range args {
				args[i] = words[rng.IntN(len(words))]
			}
			b = protocol.AppendRequest(b, words[rng.IntN(17)], uint16(n+1), strings.Join(args, " "))
		}
		feed(t, b, uint8(rng.IntN(256)))
	}
}
