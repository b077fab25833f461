package safety_test

import (
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/sim"
)

const ms = time.Millisecond

// drill plays a session by hand: a limiter, and a board that agrees to
// everything and stands still unless the test says otherwise.
type drill struct {
	t     *testing.T
	env   safety.Envelope
	s     safety.State
	now   time.Duration
	board protocol.Sample
	out   []safety.Effect // of the last step
	all   []safety.Effect
	mute  bool // no telemetry
	blind bool // no frames
}

func newDrill(t *testing.T) *drill {
	d := &drill{t: t, env: sim.Envelope(), now: time.Second}
	d.board = protocol.Sample{Has: protocol.HasBus | protocol.HasCurrent | protocol.HasCounts, Bus: 24,
		Slow: protocol.Slow{Seen: true, Inputs: 1, Boots: 1}}
	return d
}

// do hands over one event, stamped now.
func (d *drill) do(e safety.Event) []safety.Effect {
	d.s, d.out = d.env.Step(d.s, e)
	d.all = append(d.all, d.out...)
	for _, x := range d.out {
		switch x := x.(type) {
		case safety.SendStop:
			d.board.State = protocol.Off
		case safety.SendDrive:
			d.board.State = protocol.Driving
			if x.Mode == safety.ModeSpeed {
				d.board.State = protocol.Looping
			}
		}
	}
	return d.out
}

// wait lets time pass in ticks of 10 ms, with telemetry and frames.
func (d *drill) wait(t time.Duration) {
	for end := d.now + t; d.now < end; {
		d.now += 10 * ms
		if !d.mute {
			d.sample()
		}
		if !d.blind {
			d.do(safety.Lease{At: d.now})
		}
		d.do(safety.Tick{At: d.now})
	}
}

func (d *drill) sample() []safety.Effect {
	d.board.BoardUS = uint64(d.now.Microseconds())
	return d.do(safety.Sample{At: d.now, Sample: d.board})
}

// ready connects and makes every check, the silence check among them.
func (d *drill) ready() *drill {
	d.connect()
	d.do(safety.LimitsHeld{At: d.now, OK: true})
	for _, c := range []safety.Check{safety.CheckStopKey, safety.CheckCount, safety.CheckSign, safety.CheckStop} {
		d.do(safety.CheckPassed{At: d.now, Check: c})
	}
	d.silence(250 * ms)
	return d
}

func (d *drill) connect() {
	d.do(safety.Connected{At: d.now, Board: "b", BootCount: 1})
	d.wait(500 * ms)
}

// silence runs the silence check with a board that takes so long to switch off.
func (d *drill) silence(took time.Duration) {
	d.t.Helper()
	d.run(silencePlan(d.env))
	d.wait(1500 * ms)
	if !d.s.Silent {
		d.t.Fatalf("no silence in the silence check: %v", d.s.Phase)
	}
	d.board.State, d.board.TripHeld = protocol.Tripped, true
	d.do(safety.BoardTripped{At: d.now, Cause: protocol.CauseBeat})
	d.wait(50 * ms)
	d.do(safety.OutputOff{At: d.now, Cause: protocol.CauseBeat, SinceBeat: took})
	d.wait(300 * ms)
	d.board.State, d.board.TripHeld = protocol.Off, false
	d.wait(300 * ms)
}

// arm gets the board armed for the plan.
func (d *drill) arm(a safety.Admitted) {
	d.t.Helper()
	d.do(safety.ArmRequest{At: d.now, Plan: a, Stops: d.s.Stops})
	if d.s.Phase != safety.Arming {
		d.t.Fatalf("not arming: %v %v", d.s.Phase, d.out)
	}
	d.board.State = protocol.Armed
	d.do(safety.BoardArmed{At: d.now})
	if d.s.Phase != safety.Armed {
		d.t.Fatalf("not armed: %v", d.s.Phase)
	}
}

func (d *drill) countDown(a safety.Admitted) {
	d.t.Helper()
	d.arm(a)
	d.wait(safety.ClearWait)
	d.do(safety.ClearArea{At: d.now})
	d.do(safety.Start{At: d.now})
	if d.s.Phase != safety.CountDown {
		d.t.Fatalf("no count-down: %v", d.s.Phase)
	}
}

// run gets the plan running and its first drive value out.
func (d *drill) run(a safety.Admitted) {
	d.t.Helper()
	d.countDown(a)
	d.wait(d.env.CountDown + 10*ms)
	if d.s.Phase != safety.Running {
		d.t.Fatalf("not running: %v, %v", d.s.Phase, d.s.Trip.Cause)
	}
}

// get brings a ready drill into a phase.
func (d *drill) get(p safety.Phase, a safety.Admitted) *drill {
	d.t.Helper()
	switch p {
	case safety.Arming:
		d.do(safety.ArmRequest{At: d.now, Plan: a, Stops: d.s.Stops})
	case safety.Armed:
		d.arm(a)
	case safety.CountDown:
		d.countDown(a)
	case safety.Running, safety.Stopping, safety.Tripped:
		d.run(a)
		if p == safety.Stopping {
			d.do(safety.Stop{At: d.now, Source: safety.BySignal})
		}
		if p == safety.Tripped {
			d.do(safety.Wake{At: d.now})
		}
	}
	if d.s.Phase != p {
		d.t.Fatalf("wanted %v, got %v", p, d.s.Phase)
	}
	return d
}

func has[T safety.Effect](out []safety.Effect) bool { return count[T](out) > 0 }

func count[T safety.Effect](out []safety.Effect) (n int) {
	for _, x := range out {
		if _, ok := x.(T); ok {
			n++
		}
	}
	return n
}

func last[T safety.Effect](out []safety.Effect) (t T) {
	for _, x := range out {
		if x, ok := x.(T); ok {
			t = x
		}
	}
	return t
}

func volts(from, to float64, d time.Duration) safety.Segment {
	return safety.Segment{Mode: safety.ModeVolts, From: from, To: to, Duration: d}
}

func admit(t interface{ Fatal(...any) }, env safety.Envelope, p safety.Plan) safety.Admitted {
	a, err := env.Admit(p)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func stepPlan(t *testing.T) safety.Admitted {
	return admit(t, sim.Envelope(), safety.Plan{Name: "step", Segments: []safety.Segment{volts(3, 3, 5*time.Second)}})
}

func loopPlan(t *testing.T) safety.Admitted {
	return admit(t, sim.Envelope(), safety.Plan{Name: "loop", Segments: []safety.Segment{
		{Mode: safety.ModeSpeed, From: 50, To: 50, Duration: 5 * time.Second}}})
}

func silencePlan(env safety.Envelope) safety.Admitted {
	a, err := env.Admit(safety.Plan{Name: "silence", Check: safety.CheckSilence, SpeedMax: 50, SilenceAt: time.Second,
		Segments: []safety.Segment{volts(3, 3, 4*time.Second)}})
	if err != nil {
		panic(err)
	}
	return a
}

// moving are the phases with an armed board, and every other one.
var moving = []safety.Phase{safety.Arming, safety.Armed, safety.CountDown, safety.Running}

func words(out []safety.Effect) string {
	var l []string
	for _, x := range out {
		if x, ok := x.(safety.Log); ok {
			l = append(l, x.Words)
		}
	}
	return strings.Join(l, "; ")
}
