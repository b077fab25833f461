package safety_test

import (
	"errors"
	"math"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

func relayPlan() safety.Plan {
	on := volts(6, 6, 2*time.Second)
	on.Pattern = safety.Pattern{Kind: safety.PatternRelay, Amplitude: 2, Middle: 50, Hysteresis: 3, Switchings: 40}
	return safety.Plan{Name: "relay", Segments: []safety.Segment{volts(0, 0, 500*ms), on}}
}

// S4: what the board's loop may add is judged with the volts that it is added to.
func TestAPatternIsAdmittedWithItsReach(t *testing.T) {
	env := newDrill(t).env
	admit(t, env, relayPlan())
	type bend func(*safety.Plan, *safety.Envelope)
	pattern := func(f func(*safety.Pattern)) bend {
		return func(p *safety.Plan, _ *safety.Envelope) { f(&p.Segments[1].Pattern) }
	}
	for name, bend := range map[string]bend{
		"over the envelope": func(p *safety.Plan, e *safety.Envelope) {
			e.VoltsMax = 7.9
		},
		"over its own volts":        func(p *safety.Plan, _ *safety.Envelope) { p.VoltsMax = 7.9 },
		"backwards on one quadrant": func(p *safety.Plan, e *safety.Envelope) { e.Reverse = false; p.Segments[1].Pattern.Amplitude = 6.1 },
		"about a ramp":              func(p *safety.Plan, _ *safety.Envelope) { p.Segments[1].To = 6.5 },
		"about a setpoint": func(p *safety.Plan, _ *safety.Envelope) {
			p.Segments[0].Mode, p.Segments[1].Mode = safety.ModeSpeed, safety.ModeSpeed
		},
		"not the last":     func(p *safety.Plan, _ *safety.Envelope) { p.Segments = append(p.Segments, volts(6, 0, time.Second)) },
		"in a check":       func(p *safety.Plan, _ *safety.Envelope) { p.Check = safety.CheckLimit },
		"shaft held":       func(p *safety.Plan, e *safety.Envelope) { p.Locked = true; e.LockedMax = time.Minute },
		"of no kind":       pattern(func(x *safety.Pattern) { x.Kind = 9 }),
		"numbers, no kind": pattern(func(x *safety.Pattern) { x.Kind = safety.PatternNone }),
		"no amplitude":     pattern(func(x *safety.Pattern) { x.Amplitude = 0 }),
		"below its lowest": pattern(func(x *safety.Pattern) { x.Amplitude = -2 }),
		"not a number":     pattern(func(x *safety.Pattern) { x.Amplitude = math.NaN() }),
		"no hysteresis":    pattern(func(x *safety.Pattern) { x.Hysteresis = 0 }),
		"middle infinite":  pattern(func(x *safety.Pattern) { x.Middle = math.Inf(1) }),
		"no switchings":    pattern(func(x *safety.Pattern) { x.Switchings = 0 }),
		"register too long": pattern(func(x *safety.Pattern) {
			*x = safety.Pattern{Kind: safety.PatternSequence, Amplitude: 2, Stages: 17, Loops: 1, Seed: 1}
		}),
		"seed too large": pattern(func(x *safety.Pattern) {
			*x = safety.Pattern{Kind: safety.PatternSequence, Amplitude: 2, Stages: 3, Loops: 1, Seed: 8}
		}),
		"no steps": pattern(func(x *safety.Pattern) { *x = safety.Pattern{Kind: safety.PatternSquare, Amplitude: 2, Loops: 3} }),
	} {
		p, e := relayPlan(), env
		bend(&p, &e)
		var l *safety.LimitError
		if _, err := e.Admit(p); !errors.As(err, &l) || l.Segment != 2 || l.Remedy == "" {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// S3, S4: the board is asked once, after the segment's own volts and never before,
// only where it says that it runs patterns, and its refusal or silence ends the run.
func TestAPatternIsAskedForOnce(t *testing.T) {
	d := newDrill(t).ready()
	d.s.Patterns = false
	d.do(safety.ArmRequest{At: d.now, Plan: admit(t, d.env, relayPlan()), Stops: d.s.Stops})
	if r := last[safety.ArmRefused](d.all); d.s.Phase != safety.Disarmed || r.Cause.Code != safety.CodePatternHere {
		t.Fatalf("armed for a board without patterns: %v, %v", d.s.Phase, r.Cause)
	}
	running := func() *drill {
		d := newDrill(t)
		d.env.StallVolts, d.env.SlewMax = 20, 100 // the drill's shaft stands still
		d.ready()
		d.s.Patterns = true
		d.run(admit(t, d.env, relayPlan()))
		d.all = nil
		return d
	}
	d = running()
	d.wait(480 * ms)
	if has[safety.SendPattern](d.all) {
		t.Fatal("asked for on the way to its volts")
	}
	d.wait(300 * ms)
	asked := 0.0
	for _, e := range d.all {
		if v, ok := e.(safety.SendDrive); ok {
			asked = v.Value
		}
		if _, ok := e.(safety.SendPattern); ok && asked != 6 {
			t.Errorf("asked for at %g V", asked)
		}
	}
	x := last[safety.SendPattern](d.all)
	if count[safety.SendPattern](d.all) != 1 || x.Volts != 6 || x.Pattern.Amplitude != 2 {
		t.Fatalf("%d times, %+v", count[safety.SendPattern](d.all), x)
	}
	if v := last[safety.SendDrive](d.all).Value; v != 6 || !safety.Before(safety.SendDrive{}, safety.SendPattern{}) || !safety.Before(safety.SendStop{}, safety.SendPattern{}) {
		t.Errorf("%g V go on beside it", v)
	}
	d.do(safety.PatternRefused{At: d.now, Words: "no 8"})
	if d.s.Phase != safety.Stopping {
		t.Errorf("refused: %v", d.s.Phase)
	}
	d.wait(300 * ms)
	if e := last[safety.RunEnded](d.all); e.Reason != safety.EndStopped || e.Cause.Code != safety.CodeNoPattern {
		t.Errorf("%+v", e)
	}
	d.do(safety.PatternRefused{At: d.now})
	if d.s.Phase != safety.Disarmed {
		t.Errorf("a late refusal: %v", d.s.Phase)
	}
	d = running()
	d.wait(2600 * ms)
	if e := last[safety.RunEnded](d.all); e.Reason != safety.EndDone || d.s.Phase != safety.Disarmed {
		t.Errorf("its end: %+v, %v", e, d.s.Phase)
	}
}

// S4: what the pattern may add a moment from now is looked ahead to.
func TestAPatternIsLookedAheadTo(t *testing.T) {
	for _, amplitude := range []float64{0.5, 2} {
		d := newDrill(t)
		d.ready()
		d.env.Look = safety.LookAhead{Gain: float64(d.env.SpeedMax) / 7, Tau: 20 * ms}
		d.env.StallVolts, d.env.AccelMax = 20, 1e6
		d.s.Patterns = true
		p := relayPlan()
		p.Segments[1].Pattern.Amplitude = amplitude
		d.run(admit(t, d.env, p))
		d.board.Volts = 5
		d.board.Has &^= protocol.HasCurrent | protocol.HasCounts
		d.wait(600 * ms)
		d.board.Speed = 0.8 * d.env.SpeedMax
		d.wait(20 * ms)
		want := safety.Running
		if amplitude == 2 {
			want = safety.Tripped
		}
		if d.s.Phase != want || want == safety.Tripped && d.s.Trip.Cause.Code != safety.CodeSpeedAhead {
			t.Errorf("±%g V at 80 %% of the ceiling: %v, %v", amplitude, d.s.Phase, d.s.Trip.Cause)
		}
	}
}

// A register of n stages shows every n bits but all zeros once in a period: that is
// what maximal length means (Golomb, Shift Register Sequences, 1967).
func TestSequencesAreOfMaximalLength(t *testing.T) {
	for n := 3; n <= 16; n++ {
		for _, seed := range []uint16{1, 1<<n - 1} {
			l := protocol.Sequence(n, seed)
			seen := make([]bool, 1<<n)
			for i := range l {
				w := 0
				for j := range n {
					w *= 2
					if l[(i+j)%len(l)] {
						w++
					}
				}
				if w == 0 || seen[w] {
					t.Fatalf("%d stages from %d: bits %b again after %d", n, seed, w, i)
				}
				seen[w] = true
			}
			for i := range n {
				if l[i] != (seed>>i&1 == 1) {
					t.Errorf("%d stages: bit %d is not that of the seed", n, i)
				}
			}
		}
	}
	x := safety.Pattern{Kind: safety.PatternSquare, Steps: 5, Loops: 20}
	if l := x.Levels(); len(l) != 5 || !l[0] || l[1] || x.Lasts(ms) != 100*ms {
		t.Errorf("%v, %v", l, x.Lasts(ms))
	}
}
