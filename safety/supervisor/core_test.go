package supervisor

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

const ms = time.Millisecond

// fakeWire keeps what was put on it, in order: a cut as "CUT".
type fakeWire struct{ out []string }

func (w *fakeWire) Stop(b []byte) uint64 {
	if len(b) > 0 {
		w.out = append(w.out, "CUT")
	}
	return 0
}
func (w *fakeWire) Motion(b []byte) error  { w.out = append(w.out, verb(b)); return nil }
func (w *fakeWire) Request(b []byte) error { w.out = append(w.out, verb(b)); return nil }

func verb(b []byte) string { v, _, _ := strings.Cut(string(b), " "); return v }

// fakeSink keeps what it is told.
type fakeSink struct {
	samples  int
	events   []string
	restarts []string
	stops    []StopTimes
	logs     []LogEntry
}

func (s *fakeSink) Sample(time.Duration, protocol.Sample) { s.samples++ }
func (s *fakeSink) Effect(time.Duration, safety.Effect)   {}
func (s *fakeSink) Event(_ time.Duration, t string)       { s.events = append(s.events, t) }
func (s *fakeSink) BoardStop(_ time.Duration, l LogEntry) { s.logs = append(s.logs, l) }
func (s *fakeSink) Restarted(_ time.Duration, n int, why string) {
	s.restarts = append(s.restarts, fmt.Sprintf("%d %s", n, why))
}
func (s *fakeSink) Stopped(t StopTimes) { s.stops = append(s.stops, t) }

// rig is a Core with both ends in hand.
type rig struct {
	*Core
	wire *fakeWire
	sink *fakeSink
	at   time.Duration
	seq  uint8
}

func newRig() *rig {
	r := &rig{wire: &fakeWire{}, sink: &fakeSink{}}
	r.Core = NewCore(r.wire, r.sink, 100)
	r.Opened(0)
	return r
}

// says feeds lines of the board, each with its check code.
func (r *rig) says(lines ...string) {
	for _, l := range lines {
		r.Bytes(r.at, protocol.AppendLine(nil, []byte(l)))
	}
}

// sample feeds one fast line, 10 ms after the one before.
func (r *rig) sample(s protocol.State) {
	r.at += 10 * ms
	r.seq++
	r.Bytes(r.at, protocol.AppendFast(nil, protocol.RawFast{Seq: r.seq, TimeUS: uint32(r.at.Microseconds()) & 0xFFFFFF, State: s}))
	r.Tick(r.at)
}

func (r *rig) connect() {
	r.Connected(r.at, protocol.Identity{Board: "b", Boots: 7, ProtoMajor: protocol.Major, Baud: 115200, Input: "V", Loop: ms, LimitNames: []string{"vmax"}, Scales: protocol.Scales{SpeedLSB: 0.1, VoltsLSB: 0.001, BusLSB: 0.001}}, "")
	r.Streaming(r.at, true)
}

// A stop goes ahead, voids every request that waits, and none of them is sent or
// answered later.
func TestAStopVoidsRequests(t *testing.T) {
	r := newRig()
	r.connect()
	var got []error
	for i := range 5 {
		r.Ask(r.at, protocol.Request{Verb: protocol.VerbLimit, Args: fmt.Sprint("get ", i)}, func(a protocol.Answer) { got = append(got, a.Err) })
	}
	r.Tick(r.at)
	r.wire.out = nil
	r.Stop(r.at, safety.ByStopKey)
	if len(got) != 5 {
		t.Fatalf("%d of 5 are told", len(got))
	}
	for _, err := range got {
		if err != protocol.ErrVoid {
			t.Errorf("told %v", err)
		}
	}
	if len(r.wire.out) == 0 || r.wire.out[0] != "CUT" {
		t.Errorf("on the wire is %q", r.wire.out)
	}
	for range 300 {
		r.sample(protocol.Off)
		r.says("ok 101 0 vmax 41C00000") // an answer that comes late
	}
	for _, l := range r.wire.out {
		if l == protocol.VerbLimit {
			t.Errorf("a voided request left: %q", r.wire.out)
		}
	}
	if len(got) != 5 {
		t.Errorf("%d answers", len(got))
	}
}

// The board's answer to a stop ends it, with the times in their order.
func TestAStopIsTimed(t *testing.T) {
	r := newRig()
	r.connect()
	r.sample(protocol.Off)
	r.at += 3 * ms
	r.Stop(r.at, safety.ByStopKey)
	r.Wrote(r.at+1*ms, []byte{protocol.Cut})
	r.at += 5 * ms
	r.says("cut 4 123456")
	r.says("cut 4 123456") // said twice
	if len(r.sink.stops) != 1 {
		t.Fatalf("%d stops are told of; events %q", len(r.sink.stops), r.sink.events)
	}
	s := r.sink.stops[0]
	if s.Wire-s.Asked != 1*ms || s.Answer-s.Asked != 5*ms || s.Source != safety.ByStopKey || s.OffUS != 123456 {
		t.Errorf("%+v", s)
	}
}

// A board that starts anew, by its own word or by its counter, voids what was
// asked of it and ends the session's connection.
func TestARestartVoidsWhatWasAsked(t *testing.T) {
	for name, restart := range map[string]func(r *rig){
		"its own word": func(r *rig) { r.says("ev boot 8 brownout") },
		"its counter": func(r *rig) {
			r.at += 10 * ms
			r.Bytes(r.at, protocol.AppendSlow(nil, protocol.RawSlow{Seq: r.seq + 1, Boots: 8, Temp: protocol.TempUnknown}))
			r.sample(protocol.Off)
		},
	} {
		t.Run(name, func(t *testing.T) {
			r := newRig()
			r.connect()
			for range 5 {
				r.sample(protocol.Off)
			}
			told := error(nil)
			r.Ask(r.at, protocol.Request{Verb: protocol.VerbNonce}, func(a protocol.Answer) { told = a.Err })
			restart(r)
			if len(r.sink.restarts) != 1 || !strings.HasPrefix(r.sink.restarts[0], "8 ") {
				t.Errorf("restarts %q", r.sink.restarts)
			}
			if told != protocol.ErrVoid {
				t.Errorf("the request was told %v", told)
			}
			if r.Link().Connected || r.Phase() != safety.Disarmed {
				t.Errorf("connected %v, %v", r.Link().Connected, r.Phase())
			}
		})
	}
}

// A board that says it is armed although a stop came since is cut again: an arm
// of an answer that nobody waits for never stands.
func TestALateArmIsTakenBack(t *testing.T) {
	r := newRig()
	r.connect()
	for range 100 {
		r.sample(protocol.Off)
	}
	r.Stop(r.at, safety.ByStopKey)
	for range 100 {
		r.sample(protocol.Off)
	}
	r.wire.out = nil
	for range 60 { // longer than the settling that a late state is given
		r.sample(protocol.Armed)
	}
	cuts := strings.Count(strings.Join(r.wire.out, " "), "CUT")
	if cuts == 0 {
		t.Errorf("armed by itself and not stopped: %q, %v", r.wire.out, r.Phase())
	}
}

// Whatever bytes come, what is held stays bounded, nothing panics, and only whole
// lines with their check code do anything.
func TestHostileBytes(t *testing.T) {
	r := newRig()
	r.connect()
	rng := rand.New(rand.NewPCG(4, 4))
	words := []string{"ev boot 9 x", "ev trip 999", "ev trip -1", "ok 1", "no 1 2", "id x", "cut", "cut a b c", "ok 101 0", "ev", "x"}
	for i := range 20000 {
		var b []byte
		switch rng.IntN(4) {
		case 0:
			b = make([]byte, rng.IntN(300))
			for k := range b {
				b[k] = byte(rng.Uint32())
			}
		case 1:
			b = []byte(words[rng.IntN(len(words))] + "\x18\n") // without its check code
		case 2:
			b = protocol.AppendLine(nil, []byte(words[rng.IntN(len(words))]+strings.Repeat(" 7", rng.IntN(9))))
		case 3:
			b = protocol.AppendFast(nil, protocol.RawFast{Seq: uint8(rng.Uint32()), TimeUS: rng.Uint32() & 0xFFFFFF, State: protocol.State(rng.IntN(8)), Speed: int16(rng.Uint32()), Volts: int16(rng.Uint32())})
		}
		r.at += time.Duration(rng.IntN(3)) * ms
		r.Bytes(r.at, b)
		if i%10 == 0 {
			r.Tick(r.at)
		}
		if r.Pending() > protocol.LineMax || len(r.order) > 80 || len(r.done) > 80 {
			t.Fatalf("held: %d bytes, %d requests, %d callbacks", r.Pending(), len(r.order), len(r.done))
		}
	}
	for _, l := range r.wire.out {
		if l == "dv" || l == "ds" || l == protocol.VerbArm {
			t.Fatalf("noise made it send %q", l)
		}
	}
	r.Opened(r.at)
	if l := r.Link(); l.Connected || l.Lost || l.Seen {
		t.Errorf("opened anew: %+v", l)
	}
}

// A link that streamed and falls silent is lost, once, and says so.
func TestSilenceIsALostLink(t *testing.T) {
	r := newRig()
	r.connect()
	for range 10 {
		r.sample(protocol.Off)
	}
	for range 200 {
		r.at += 10 * ms
		r.Tick(r.at)
	}
	if l := r.Link(); !l.Lost || l.LostWhy == "" {
		t.Errorf("%+v", l)
	}
	if n := strings.Count(strings.Join(r.sink.events, "\n"), "LINK LOST"); n != 1 {
		t.Errorf("said %d times: %q", n, r.sink.events)
	}
	if r.Permit(safety.GainWrite{At: r.at}) == nil {
		t.Error("gains may be written over a lost link")
	}
}

// Whoever is told that a request is void may ask again and stop again; everybody
// is still told of their own request, and once.
func TestVoidsInsideVoidsDoNotMix(t *testing.T) {
	r := newRig()
	r.connect()
	told := map[string][]string{}
	ask := func(arg string, also func()) {
		r.Ask(r.at, protocol.Request{Verb: protocol.VerbLimit, Args: arg}, func(a protocol.Answer) {
			told[arg] = append(told[arg], a.Request.Args)
			if also != nil {
				also()
			}
		})
	}
	ask("a", func() { ask("c", nil); r.Stop(r.at, safety.BySignal) })
	ask("b", nil)
	r.Stop(r.at, safety.ByStopKey)
	for _, arg := range []string{"a", "b", "c"} {
		if len(told[arg]) != 1 || told[arg][0] != arg {
			t.Errorf("who asked %q was told of %q", arg, told[arg])
		}
	}
	if len(r.order) != 0 || len(r.done) != 0 {
		t.Errorf("%d, %d are held", len(r.order), len(r.done))
	}
}

// An answer to a stop is never counted for one that was asked for on a line that
// is gone, or so long ago that its own answer is lost: the stop check would be told
// of minutes.
func TestAStopIsTimedByItsOwnPress(t *testing.T) {
	for name, between := range map[string]func(r *rig){
		"another connection": func(r *rig) {
			r.LinkLost(r.at, "unplugged")
			r.Opened(r.at)
			r.connect()
		},
		"no answer in time": func(r *rig) {
			for range 150 {
				r.sample(protocol.Off)
			}
		},
	} {
		t.Run(name, func(t *testing.T) {
			r := newRig()
			r.connect()
			r.sample(protocol.Off)
			r.Stop(r.at, safety.ByStopKey)
			r.Wrote(r.at, []byte{protocol.Cut})
			between(r)
			r.Wrote(r.at-1, []byte{protocol.Cut}) // a repeat of before
			asked := r.at
			r.Stop(r.at, safety.ByStopKey)
			r.Wrote(r.at-1, []byte{protocol.Cut})
			r.Wrote(r.at+1*ms, []byte{protocol.Cut})
			r.at += 4 * ms
			r.says("cut 1 5")
			if len(r.sink.stops) != 1 || r.sink.stops[0].Asked != asked || r.sink.stops[0].Wire != asked+1*ms {
				t.Errorf("pressed at %v: %+v", asked, r.sink.stops)
			}
		})
	}
}
