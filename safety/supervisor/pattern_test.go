package supervisor

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/sim"
)

// patternEnd is a farEnd that is asked for a pattern, and grants it, refuses it or
// says nothing.
type patternEnd struct {
	*farEnd
	how  int
	asks []string
}

func (f *patternEnd) Request(b []byte) error {
	w := f.line(b)
	if w[0] != protocol.VerbExper {
		return f.farEnd.Request(b)
	}
	f.asks = append(f.asks, strings.Join(w[2:], " "))
	if w[3] != f.token || f.state != protocol.Driving {
		f.fail("%q under no arm that drives (%q, %v)", b, f.token, f.state)
	}
	switch f.how {
	case 0:
		f.answer = append(f.answer, "ok "+w[1])
	case 1:
		f.answer = append(f.answer, "no "+w[1]+" 8")
	}
	return nil
}

// TestPatternsOnTheWire: a pattern is asked for once, with the token of the arm that
// stands and the numbers of its plan; what is not granted ends the run, and so does
// a stop at any moment.
func TestPatternsOnTheWire(t *testing.T) {
	ended := map[string]int{}
	for seed := range uint64(60) {
		env := sim.Envelope()
		env.Stop = safety.StopCut
		env.StallVolts, env.Look = 20, safety.LookAhead{} // the far end has no motor
		hold := safety.Segment{Mode: safety.ModeVolts, From: 3, To: 3, Duration: 800 * ms}
		x := []safety.Pattern{
			{Kind: safety.PatternRelay, Amplitude: 1.9999, Middle: -50.0005, Hysteresis: 3, Switchings: 40},
			{Kind: safety.PatternSequence, Amplitude: 0.5, Stages: 9, Loops: 12, Seed: 511},
			{Kind: safety.PatternSquare, Amplitude: 2, Loops: 60, Steps: 6},
		}[seed%3]
		on := hold
		on.Pattern = x
		plan, err := env.Admit(safety.Plan{Name: "pattern", Segments: []safety.Segment{hold, on}})
		if err != nil {
			t.Fatal(err)
		}
		rng := rand.New(rand.NewPCG(seed, 5))
		f := &patternEnd{farEnd: &farEnd{t: t, seed: seed, rng: rng, voltsM: int(env.VoltsMax * 1000)}, how: rng.IntN(3)}
		var reached [safety.Tripped + 1]int
		sink := &endSink{}
		r := &wireRun{rig: &rig{sink: &sink.fakeSink}, f: f.farEnd, plan: plan, reached: &reached}
		r.Core = NewCore(f, sink, 100)
		r.SetEnvelope(0, env)
		r.Opened(0)
		r.Connected(r.at, protocol.Identity{Board: "b", Boots: 7, ProtoMajor: protocol.Major, Baud: 115200, Input: "V", Loop: ms, LimitNames: []string{"vmax", "slew"},
			Powers: []string{"exper"}, Scales: protocol.Scales{SpeedLSB: 0.1, VoltsLSB: 0.001, BusLSB: 0.001}}, "")
		r.Streaming(r.at, true)
		r.pass(500 * ms)
		r.LimitsHeld(r.at, 0xABCD)
		r.st.Checks = ^safety.Checks(0) // seen elsewhere: TestChecksComeBeforeMotion
		r.Do(safety.ArmRequest{At: r.at, Plan: plan, Stops: r.st.Stops})
		r.pass(500 * ms)
		r.onward() // clear area and start
		r.pass(env.CountDown + 100*ms)
		stops := rng.IntN(3) == 0
		if stops {
			r.pass(time.Duration(rng.IntN(1500)) * ms)
			r.Stop(r.at, safety.ByStopKey)
		}
		r.pass(3 * time.Second)
		if r.Phase() != safety.Disarmed || len(sink.ends) != 1 {
			t.Fatalf("seed %d: %v, %d ends", seed, r.Phase(), len(sink.ends))
		}
		e := sink.ends[0]
		if len(f.asks) > 1 || len(f.asks) == 0 && !stops {
			t.Errorf("seed %d: asked for %d times", seed, len(f.asks))
		}
		if len(f.asks) == 1 {
			want := map[safety.PatternKind]string{safety.PatternRelay: "relay %s 1999 3000 -50000 40", safety.PatternSequence: "prbs %s 500 9 12 511", safety.PatternSquare: "steps %s 2000 60 6"}[x.Kind]
			if token := strings.Fields(f.asks[0])[1]; f.asks[0] != fmt.Sprintf(want, token) {
				t.Errorf("seed %d: %q, want %q", seed, f.asks[0], want)
			}
		}
		switch {
		case e.Cause.Code == safety.CodeNoPattern && f.how > 0:
			ended["not granted"]++
		case e.Reason == safety.EndDone && f.how == 0 && !stops:
			ended["done"]++
		case e.Cause.Code == safety.CodeAsked && stops:
			ended["stopped"]++
		case stops && e.Reason == safety.EndDone && f.how == 0: // the stop came after its end
		default:
			t.Errorf("seed %d: how %d, stopped %v: %+v", seed, f.how, stops, e)
		}
	}
	if len(ended) != 3 {
		t.Errorf("too little happened: %v", ended)
	}
}

// endSink keeps the ends of runs.
type endSink struct {
	fakeSink
	ends []safety.RunEnded
}

func (s *endSink) Effect(_ time.Duration, x safety.Effect) {
	if e, ok := x.(safety.RunEnded); ok {
		s.ends = append(s.ends, e)
	}
}
