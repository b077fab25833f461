package supervisor

import (
	"fmt"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/safetytest"
	"gainwright/safety/sim"
)

// farEnd is a board by the rules of SPEC.md P2 and P6, and a judge of what it is
// sent: it sees bytes only.
type farEnd struct {
	t      *testing.T
	seed   uint64
	rng    *rand.Rand
	voltsM int

	state  protocol.State
	nonce  string
	token  string // of the arm that stands, "" after a cut
	old    []string
	k      int
	volts  int // mV
	cuts   int
	answer []string // lines on their way to the console

	drives, arms, beats int
}

func (f *farEnd) fail(format string, args ...any) {
	f.t.Errorf("seed %d: %s", f.seed, fmt.Sprintf(format, args...))
}

func (f *farEnd) Stop(b []byte) uint64 {
	if len(b) > 0 && f.rng.IntN(20) > 0 { // one of twenty is lost on the way
		f.cuts++
		f.state, f.nonce, f.token, f.volts = protocol.Off, "", "", 0
		f.answer = append(f.answer, fmt.Sprintf("cut %d 7", f.cuts))
	}
	return 0
}

func (f *farEnd) line(b []byte) []string {
	body, sum, ok := strings.Cut(strings.TrimSpace(string(b)), ";")
	if again := strings.TrimSpace(string(protocol.AppendLine(nil, []byte(body)))); !ok || again != body+";"+sum {
		f.fail("%q has not its own check code", b)
	}
	return strings.Fields(body)
}

// Motion judges a line with a drive value or a heartbeat: the token of the arm
// that stands (or, if a cut was on its way, of one that stood), numbers that count
// up from 1, a value inside the envelope.
func (f *farEnd) Motion(b []byte) error {
	w := f.line(b)
	k, _ := strconv.Atoi(w[1])
	if w[2] != f.token {
		f.fail("%q carries the token of no arm that stands (%q)", b, f.token)
		return nil
	}
	if k != f.k+1 {
		f.fail("%q follows number %d", b, f.k)
	}
	f.k = k
	switch w[0] {
	case "hb":
		f.beats++
	case "dv":
		f.drives++
		v, _ := strconv.Atoi(w[3])
		if v > f.voltsM || -v > f.voltsM {
			f.fail("%q is over %d mV", b, f.voltsM)
		}
		f.state, f.volts = protocol.Driving, v
	}
	return nil
}

func (f *farEnd) Request(b []byte) error {
	w := f.line(b)
	switch w[0] {
	case protocol.VerbNonce:
		f.nonce = fmt.Sprintf("%08X", f.rng.Uint32())
		f.answer = append(f.answer, "ok "+w[1]+" "+f.nonce)
	case protocol.VerbArm:
		f.arms++
		if w[2] != f.nonce {
			f.fail("%q echoes a number that is void (%q)", b, f.nonce)
			return nil
		}
		f.nonce, f.k, f.state = "", 0, protocol.Armed
		f.token = fmt.Sprintf("%04X", f.rng.IntN(65536))
		f.old = append(f.old, "ok "+w[1]+" "+f.token)
		f.answer = append(f.answer, "ok "+w[1]+" "+f.token)
	case protocol.VerbDisarm:
		f.state, f.token, f.volts = protocol.Off, "", 0
		f.answer = append(f.answer, "ok "+w[1])
	}
	return nil
}

// wireRun is one random history of a Core with that board.
type wireRun struct {
	*rig
	f       *farEnd
	plan    safety.Admitted
	reached *[safety.Tripped + 1]int
}

func (r *wireRun) pass(d time.Duration) {
	for end := r.at + d; r.at < end; {
		r.at += 10 * ms
		if n := r.f.rng.IntN(3); len(r.f.answer) > 0 && n > 0 {
			l := r.f.answer[0]
			r.f.answer = r.f.answer[1:]
			r.says(l)
		}
		r.seq++
		var b []byte
		if r.seq%25 == 0 {
			b = protocol.AppendSlow(b, protocol.RawSlow{Seq: r.seq, Inputs: 1, Boots: 7, Temp: protocol.TempUnknown})
		}
		b = protocol.AppendExtra(b, protocol.RawExtra{Seq: r.seq, Bus: 24000})
		b = protocol.AppendFast(b, protocol.RawFast{Seq: r.seq, TimeUS: uint32(r.at.Microseconds()) & 0xFFFFFF, State: r.f.state, Volts: int16(r.f.volts)})
		r.Bytes(r.at, b)
		r.Do(safety.Lease{At: r.at})
		r.Tick(r.at)
		r.reached[r.Phase()]++
	}
}

func (r *wireRun) onward() {
	switch st := r.State(); st.Phase {
	case safety.Disarmed:
		if !st.LimitsHeld {
			r.LimitsHeld(r.at, 0xABCD)
		}
		for _, c := range []safety.Check{safety.CheckStopKey, safety.CheckCount} {
			r.Do(safety.CheckPassed{At: r.at, Check: c})
		}
		r.Do(safety.ArmRequest{At: r.at, Plan: r.plan, Stops: st.Stops})
	case safety.Armed:
		r.pass(2100 * ms)
		r.Do(safety.ClearArea{At: r.at})
		r.Do(safety.Start{At: r.at})
	case safety.CountDown:
		r.pass(3100 * ms)
	case safety.Tripped:
		r.Do(safety.Acknowledge{At: r.at})
		r.Do(safety.Reset{At: r.at})
	}
}

func (r *wireRun) anything() {
	switch r.f.rng.IntN(9) {
	case 0:
		r.Stop(r.at, safety.ByStopKey)
	case 1:
		r.Do(safety.Paste{At: r.at})
	case 2:
		r.Do(safety.Key{At: r.at})
	case 3:
		if n := len(r.f.old); n > 0 { // an answer to an arm comes again
			r.says(r.f.old[r.f.rng.IntN(n)])
		}
	case 4:
		r.Do(safety.Disarm{At: r.at})
	case 5:
		r.says("ev trip 20")
	case 6:
		r.Bytes(r.at, []byte("ok 101 12;\x00\xff\n"))
	case 7: // the board starts anew, armed or not
		r.f.state, r.f.token, r.f.nonce, r.f.volts, r.f.answer = protocol.Off, "", "", 0, nil
		r.says("ev boot 7 brownout")
		r.connect()
	case 8:
		for i := range 5 {
			r.Ask(r.at, protocol.Request{Verb: protocol.VerbLimit, Args: fmt.Sprint("get ", i), Tries: 1}, func(protocol.Answer) {})
		}
	}
}

// TestRandomHistoriesOnTheWire draws histories of a Core and a board that loses
// cuts, repeats old answers and starts anew, and judges the bytes: never a drive
// value, a heartbeat or an arm but under an arm that stands. The referee watches
// the same histories from the events.
func TestRandomHistoriesOnTheWire(t *testing.T) {
	var reached [safety.Tripped + 1]int
	drives, arms, beats := 0, 0, 0
	for seed := range uint64(60) {
		env := sim.Envelope()
		env.Stop = safety.StopCut
		plan, err := env.Admit(safety.Plan{Name: "sign", Check: safety.CheckSign, SpeedMax: 50, TurnsMax: 1,
			Segments: []safety.Segment{{Mode: safety.ModeVolts, From: 0, To: 3, Duration: time.Second, Until: safety.Until{Kind: safety.UntilMotion, Counts: 20}}}})
		if err != nil {
			t.Fatal(err)
		}
		f := &farEnd{t: t, seed: seed, rng: rand.New(rand.NewPCG(seed, 23)), voltsM: int(env.VoltsMax * 1000)}
		ref := safetytest.New(env)
		r := &wireRun{rig: &rig{sink: &fakeSink{}}, f: f, plan: plan, reached: &reached}
		r.Core = NewCore(f, r.sink, 100)
		r.SetEnvelope(0, env)
		r.Watch = func(e safety.Event, out []safety.Effect) {
			if s, ok := e.(*safety.Sample); ok {
				e = *s
			}
			ref.Saw(e, out)
		}
		r.Opened(0)
		r.connect()
		r.pass(500 * ms)
		for range 60 {
			if f.rng.IntN(4) > 0 {
				r.onward()
			} else {
				r.anything()
			}
			r.pass(time.Duration([]int{10, 40, 160, 600}[f.rng.IntN(4)]) * ms)
			if len(r.order) > 80 || len(r.done) != len(r.order) {
				t.Fatalf("seed %d: %d requests and %d callbacks are held", seed, len(r.order), len(r.done))
			}
		}
		for _, v := range ref.Violations() {
			t.Errorf("seed %d: %v", seed, v)
		}
		drives, arms, beats = drives+f.drives, arms+f.arms, beats+f.beats
		if t.Failed() {
			break
		}
	}
	t.Logf("%d arms, %d drive values, %d heartbeats, phases %v", arms, drives, beats, reached)
	for p, n := range reached {
		if n == 0 {
			t.Errorf("%v was never reached", safety.Phase(p))
		}
	}
	if arms < 100 || drives < 100 || beats < 1000 {
		t.Error("too little happened for this to show anything")
	}
}
