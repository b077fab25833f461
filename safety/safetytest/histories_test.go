package safetytest_test

import (
	"testing"
	"time"

	"pgregory.net/rapid"

	"gainwright/protocol"
	"gainwright/protocol/si"
	"gainwright/safety"
	"gainwright/safety/safetytest"
	"gainwright/safety/sim"
)

const ms = time.Millisecond

// history draws events one after another, most of them what would bring a
// session on, the rest anything at all.
type history struct {
	rt    *rapid.T
	env   safety.Envelope
	s     safety.State
	ref   *safetytest.Referee
	now   time.Duration
	board protocol.Sample
	plans []safety.Admitted
	seen  *[safety.Tripped + 1]int
}

// TestRandomHistories has the referee judge histories that rapid draws and
// shrinks. It fails, too, if some phase was never reached.
func TestRandomHistories(t *testing.T) {
	var seen [safety.Tripped + 1]int
	rapid.Check(t, func(rt *rapid.T) {
		env := sim.Envelope()
		h := history{rt: rt, env: env, ref: safetytest.New(env), now: time.Second, seen: &seen, plans: plans(env)}
		h.board = protocol.Sample{Has: protocol.HasBus, Bus: 24, Slow: protocol.Slow{Seen: true, Inputs: 1, Boots: 1}}
		h.begin()
		for range rapid.IntRange(1, 40).Draw(rt, "events") {
			if rapid.IntRange(0, 3).Draw(rt, "on") > 0 {
				h.onward()
			} else {
				h.anything()
			}
			h.wait(time.Duration(rapid.SampledFrom([]int{0, 0, 10, 40, 160, 600, 2100, 3100}).Draw(rt, "wait")) * ms)
			if v := h.ref.Violations(); len(v) > 0 {
				rt.Fatal(v[0])
			}
		}
	})
	for p, n := range seen {
		if n == 0 {
			t.Errorf("%v was never reached", safety.Phase(p))
		}
	}
}

func plans(env safety.Envelope) (l []safety.Admitted) {
	for _, p := range []safety.Plan{
		{Name: "step", Segments: []safety.Segment{{Mode: safety.ModeVolts, From: 3, To: 3, Duration: 2 * time.Second}}},
		{Name: "silence", Check: safety.CheckSilence, SpeedMax: 50, SilenceAt: 100 * ms, Segments: []safety.Segment{{Mode: safety.ModeVolts, From: 2, To: 2, Duration: 2 * time.Second}}},
		{Name: "loop", Segments: []safety.Segment{{Mode: safety.ModeSpeed, From: 50, To: 60, Duration: 3 * time.Second}}},
		{Name: "relay", Segments: []safety.Segment{{Mode: safety.ModeVolts, From: 0, To: 6, Duration: 500 * ms},
			{Mode: safety.ModeVolts, From: 6, To: 6, Duration: 2 * time.Second, Pattern: safety.Pattern{Kind: safety.PatternRelay, Amplitude: 2, Middle: 50, Hysteresis: 3, Switchings: 40}}}},
	} {
		a, err := env.Admit(p)
		if err != nil {
			panic(err)
		}
		l = append(l, a)
	}
	return l
}

func (h *history) do(e safety.Event) {
	var out []safety.Effect
	h.s, out = h.env.Step(h.s, e)
	h.ref.Saw(e, out)
	h.seen[h.s.Phase]++
	for _, x := range out {
		switch x := x.(type) {
		case safety.SendStop:
			h.board.State = protocol.Off
		case safety.SendDrive:
			h.board.State, h.board.Volts = protocol.Driving, si.Volts(x.Value)
			if x.Mode == safety.ModeSpeed {
				h.board.State, h.board.Volts = protocol.Looping, 5
			}
		}
	}
}

// begin makes the checks, so that most histories have somewhere to go.
func (h *history) begin() {
	h.do(safety.Connected{At: h.now, Board: "b", BootCount: 1, Simulated: true, Patterns: true})
	h.wait(300 * ms)
	h.do(safety.LimitsHeld{At: h.now, OK: true})
	for _, c := range []safety.Check{safety.CheckStopKey, safety.CheckCount, safety.CheckSign, safety.CheckStop} {
		h.do(safety.CheckPassed{At: h.now, Check: c})
	}
}

// wait lets time pass with telemetry and frames, mostly.
func (h *history) wait(d time.Duration) {
	mute := d > 0 && d < time.Second && rapid.IntRange(0, 9).Draw(h.rt, "mute") == 0
	for end := h.now + d; h.now < end; {
		h.now += 20 * ms
		if !mute {
			h.sample()
			h.do(safety.Lease{At: h.now})
		}
		h.do(safety.Tick{At: h.now})
	}
}

func (h *history) sample() {
	h.board.BoardUS = uint64(max(0, h.now.Microseconds()))
	if !h.board.State.Moving() {
		h.board.Volts = 0
	}
	h.do(safety.Sample{At: h.now, Sample: h.board})
}

// onward is what would bring the session on from where it is.
func (h *history) onward() {
	switch h.s.Phase {
	case safety.Disarmed:
		plan := h.plans[1]
		if h.s.Checks.Has(safety.CheckSilence) {
			plan = h.plans[rapid.IntRange(0, len(h.plans)-1).Draw(h.rt, "plan")]
		}
		if !h.s.LimitsHeld {
			h.do(safety.LimitsHeld{At: h.now, OK: true})
		}
		h.do(safety.ArmRequest{At: h.now, Plan: plan, Stops: h.s.Stops})
	case safety.Arming:
		h.board.State = protocol.Armed
		h.do(safety.BoardArmed{At: h.now})
	case safety.Armed:
		h.wait(2100 * ms)
		h.do(safety.ClearArea{At: h.now})
		h.do(safety.Start{At: h.now})
	case safety.CountDown:
		h.wait(3100 * ms)
	case safety.Running:
		if h.s.Silent {
			h.board.State = protocol.Off
			h.do(safety.BoardTripped{At: h.now, Cause: protocol.CauseBeat})
			h.wait(60 * ms)
			h.do(safety.OutputOff{At: h.now, Cause: protocol.CauseBeat, SinceBeat: 250 * ms})
		}
	case safety.Stopping:
		h.board.State = protocol.Off
		h.do(safety.OutputOff{At: h.now})
	case safety.Tripped:
		h.do(safety.OutputOff{At: h.now})
		h.do(safety.Acknowledge{At: h.now})
		h.do(safety.Reset{At: h.now})
	}
}

// anything is one event of any kind.
func (h *history) anything() {
	at := h.now
	i := rapid.IntRange(0, 34).Draw(h.rt, "event")
	plan := h.plans[rapid.IntRange(0, len(h.plans)-1).Draw(h.rt, "any plan")]
	events := []safety.Event{
		safety.Key{At: at}, safety.Mark{At: at}, safety.Stop{At: at, Source: safety.ByStopKey}, safety.Stop{At: at, Source: safety.BySignal},
		safety.Start{At: at}, safety.ClearArea{At: at}, safety.Disarm{At: at}, safety.Acknowledge{At: at}, safety.Reset{At: at},
		safety.Paste{At: at}, safety.GainWrite{At: at}, safety.LimitWrite{At: at, Loosens: true}, safety.LimitWrite{At: at},
		safety.WriteDone{At: at, OK: true}, safety.LimitsHeld{At: at, OK: false}, safety.LimitsHeld{At: at, OK: true},
		safety.BoardArmed{At: at}, safety.BoardRefused{At: at}, safety.BoardTripped{At: at, Cause: protocol.CauseStall},
		safety.OutputOff{At: at}, safety.OutputOff{At: at, Cause: protocol.CauseBeat, SinceBeat: 100 * ms}, safety.Ramping{At: at},
		safety.ArmRequest{At: at, Plan: plan, Stops: h.s.Stops}, safety.ArmRequest{At: at, Stops: h.s.Stops},
		safety.ArmRequest{At: at, Plan: plan, Stops: h.s.Stops, Unattended: true},
		safety.LinkLost{At: at}, safety.Connected{At: at, Board: "b", BootCount: 1}, safety.BoardRestarted{At: at},
		safety.Wake{At: at}, safety.ClockJump{At: at}, safety.RigChanged{At: at}, safety.TapeFailed{At: at}, safety.TapeBack{At: at},
		safety.Enough{At: at}, safety.PatternRefused{At: at, Words: "code 8"},
	}
	h.do(events[i])
	if rapid.IntRange(0, 7).Draw(h.rt, "bend") == 0 {
		h.board.State = protocol.State(rapid.IntRange(0, 5).Draw(h.rt, "board"))
		h.board.Speed = si.RadPerSec(rapid.SampledFrom([]float64{0, 1, 50, 241, -300}).Draw(h.rt, "speed"))
		h.now += ms
		h.sample()
		h.board.Speed = 0
	}
}
