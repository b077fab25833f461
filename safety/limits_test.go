package safety_test

import (
	"errors"
	"math"
	"testing"
	"time"

	"pgregory.net/rapid"

	"gainwright/protocol"
	"gainwright/protocol/si"
	"gainwright/safety"
	"gainwright/safety/sim"
)

// S4: every limit trips with its own cause, at the limit and not before.
func TestEveryLimitTrips(t *testing.T) {
	const r, ke = 1, 1 / 12.0
	for _, c := range []struct {
		name string
		plan safety.Plan
		code safety.Code
		by   time.Duration // it has to have tripped by then
		set  func(d *drill, in time.Duration)
		ok   func(d *drill, in time.Duration) // the same just inside: must not trip
	}{
		{"speed", safety.Plan{}, safety.CodeSpeed, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Speed = 241 }, nil},
		{"speed backwards", safety.Plan{}, safety.CodeSpeed, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Speed = -241 }, nil},
		{"speed of the plan", safety.Plan{SpeedMax: 20}, safety.CodeSpeed, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Speed = 21 }, nil},
		{"speed ahead", safety.Plan{SpeedMax: 100}, safety.CodeSpeedAhead, 200 * ms,
			func(d *drill, in time.Duration) {
				d.board.Speed, d.board.Volts = si.RadPerSec(math.Min(80, 500*in.Seconds())), 20
				d.board.Current = si.Amps((20 - ke*float64(d.board.Speed)) / r)
			},
			func(d *drill, in time.Duration) {
				d.board.Speed, d.board.Volts = si.RadPerSec(math.Min(80, 500*in.Seconds())), 7
			}},
		{"volts", safety.Plan{VoltsMax: 4}, safety.CodeVolts, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Volts = 4.3 },
			func(d *drill, in time.Duration) { d.board.Volts = 4.05; d.board.Counts++ }},
		{"current", safety.Plan{}, safety.CodeCurrent, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Current = -61 }, nil},
		{"bus high", safety.Plan{}, safety.CodeBusHigh, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Bus = 30.1 },
			func(d *drill, in time.Duration) { d.board.Bus = 29.9 }},
		{"bus low", safety.Plan{}, safety.CodeBusLow, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Bus = 14.9 },
			func(d *drill, in time.Duration) { d.board.Bus = 15.1 }},
		{"temperature", safety.Plan{}, safety.CodeTemp, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Slow.Temp, d.board.Slow.HasTmp = 80.5, true },
			func(d *drill, in time.Duration) { d.board.Slow.Temp, d.board.Slow.HasTmp = 79.5, true }},
		{"acceleration", safety.Plan{}, safety.CodeAccel, 100 * ms,
			func(d *drill, in time.Duration) {
				d.board.Speed = si.RadPerSec(10000 * math.Min(in.Seconds(), 0.015))
			}, nil},
		{"turns", safety.Plan{TurnsMax: 0.5}, safety.CodeTurns, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Counts = -1020 },
			func(d *drill, in time.Duration) { d.board.Counts = -980 }},
		{"stalled", safety.Plan{}, safety.CodeStalled, 350 * ms,
			func(d *drill, in time.Duration) { d.board.Volts, d.board.Current = 6, 6/r }, nil},
		{"turning unseen", safety.Plan{}, safety.CodeNoCounts, 350 * ms,
			func(d *drill, in time.Duration) { d.board.Volts, d.board.Current = 6, 0.5 }, nil},
		{"no counts, current between", safety.Plan{}, safety.CodeStallOrDead, 350 * ms,
			func(d *drill, in time.Duration) { d.board.Volts, d.board.Current = 6, 2.2 },
			func(d *drill, in time.Duration) { d.board.Volts, d.board.Current = 3.9, 3.9 }},
		{"wrong way", safety.Plan{}, safety.CodeWrongWay, 300 * ms,
			func(d *drill, in time.Duration) {
				d.board.Volts, d.board.Speed = 3, si.RadPerSec(-100*in.Seconds())
				d.board.Current = si.Amps((3 - ke*float64(d.board.Speed)) / r)
				d.board.Counts--
			},
			func(d *drill, in time.Duration) { // a reversal: opposite, and it slows down
				d.board.Volts, d.board.Speed = -6, si.RadPerSec(70-100*in.Seconds())
				d.board.Current = si.Amps((-6 - ke*float64(d.board.Speed)) / r)
				d.board.Counts += 2
			}},
		{"slip", safety.Plan{}, safety.CodeSlip, 400 * ms,
			func(d *drill, in time.Duration) {
				d.board.Volts, d.board.Current, d.board.Speed = 9, 0.5, 50
				d.board.Counts += 2
			},
			func(d *drill, in time.Duration) {
				d.board.Volts, d.board.Current, d.board.Speed = 9, 0.5, 85
				d.board.Counts += 2
			}},
		{"runaway unseen", safety.Plan{}, safety.CodeSlip, 100 * ms, // the loop sees no speed, volts and current say 102 rad/s
			func(d *drill, in time.Duration) {
				d.board.Volts, d.board.Current, d.board.Speed = 9, 0.5, 1
				d.board.Counts++
			},
			func(d *drill, in time.Duration) { // volts far over the speed with the current of a start
				d.board.Volts, d.board.Speed = 9, 1
				d.board.Current = si.Amps((9 - ke*float64(d.board.Speed)) / r)
				d.board.Counts++
			}},
		{"heat", safety.Plan{}, safety.CodeHeat, 6 * time.Second, // 20² · 30 A²s at 55 A: 4.3 s with the cooling
			func(d *drill, in time.Duration) {
				d.board.Current, d.board.Volts, d.board.Counts = 55, 3, d.board.Counts+1
			},
			func(d *drill, in time.Duration) {
				d.board.Current, d.board.Volts, d.board.Counts = 20, 3, d.board.Counts+1
			}},
		{"not held", safety.Plan{Locked: true}, safety.CodeNotHeld, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Counts = 21 },
			func(d *drill, in time.Duration) { d.board.Counts, d.board.Volts, d.board.Current = 19, 6, 6 }},
		{"not a number", safety.Plan{}, safety.CodeNotNumber, 20 * ms,
			func(d *drill, in time.Duration) { d.board.Speed = si.RadPerSec(math.NaN()) }, nil},
		{"loose", safety.Plan{}, safety.CodeLoose, 300 * ms,
			func(d *drill, in time.Duration) { // a fifteenth of the inertia is left
				d.board.Volts, d.board.Speed, d.board.Current = 3, si.RadPerSec(36*(1-math.Exp(-in.Seconds()/0.01))), 0
				d.board.Counts++
			},
			func(d *drill, in time.Duration) { // one wild sample
				d.board.Volts, d.board.Speed, d.board.Current = 3, si.RadPerSec(36*(1-math.Exp(-in.Seconds()/0.15))), 0
				if in > 140*ms && in < 155*ms {
					d.board.Speed += 25
				}
				d.board.Counts++
			}},
		{"pushed", safety.Plan{}, safety.CodePushed, 300 * ms,
			func(d *drill, in time.Duration) {
				d.board.Volts, d.board.Speed, d.board.Current = 2, si.RadPerSec(1000*math.Min(in.Seconds(), 0.15)), 0
				d.board.Counts++
			},
			func(d *drill, in time.Duration) { // the model's own answer to the 3 V that are asked for
				d.board.Volts, d.board.Speed, d.board.Current = 3, si.RadPerSec(36*(1-math.Exp(-in.Seconds()/0.15))), 0
				d.board.Counts++
			}},
	} {
		t.Run(c.name, func(t *testing.T) {
			long := c.by > time.Second
			plan := c.plan
			plan.Name = c.name
			for i := range 2 {
				set := c.set
				if i == 1 {
					set = c.ok
				}
				if set == nil {
					continue
				}
				plan.Segments = []safety.Segment{volts(3, 3, 1900*ms)}
				if long {
					plan.Segments[0].Duration = 8 * time.Second
				}
				d := newDrill(t).ready()
				switch c.name {
				case "wrong way", "slip", "runaway unseen":
					d.env.Look = safety.LookAhead{} // made-up speeds jump
				case "acceleration":
					d.env.AccelMax = 4000
				case "heat":
					d.env.Ke = 0 // the made-up current fits no speed
				}
				if c.name == "acceleration" {
					d.env.Look = safety.LookAhead{} // its own limit, without a model
				}
				if c.name == "loose" || c.name == "pushed" || c.name == "wrong way" || c.name == "slip" {
					d.env.StallTime = 3 * time.Second
				}
				d.get(safety.Running, admit(t, d.env, plan))
				d.board.Volts = 0
				start := d.now
				for d.now-start < c.by && d.s.Phase == safety.Running {
					set(d, d.now-start+10*ms)
					d.wait(10 * ms)
				}
				tripped := d.s.Phase == safety.Tripped
				if i == 0 && (!tripped || d.s.Trip.Cause.Code != c.code) {
					t.Errorf("after %v: %v, %v", d.now-start, d.s.Phase, d.s.Trip.Cause)
				}
				if i == 1 && tripped {
					t.Errorf("inside the limit, after %v: %v", d.now-start, d.s.Trip.Cause)
				}
			}
		})
	}
}

// S4: the heat budget is the closed form of a first-order thermal model: from
// cold, current I reaches the trip of I_c²·τ at t = −τ·ln(1 − (I_c/I)²), the
// characteristic of IEC 60255-149 for a thermal relay without preload (formula
// from memory; checked here against the integral itself).
func TestHeatFollowsTheThermalRelayCurve(t *testing.T) {
	env := sim.Envelope()
	for _, amps := range []float64{25, 30, 40, 55} {
		var s safety.State
		ic, tau := float64(env.CurrentContinuous), env.HeatTau.Seconds()
		want := -tau * math.Log(1-(ic/amps)*(ic/amps))
		at := 0.0
		for us := uint64(1); us < 300e6; us += 10000 {
			s, _ = env.Step(s, safety.Sample{At: time.Duration(us) * time.Microsecond, Sample: protocol.Sample{
				BoardUS: us, Has: protocol.HasCurrent, Current: si.Amps(amps)}})
			if at = float64(us) / 1e6; env.HeatShare(s) >= 1 {
				break
			}
		}
		if math.Abs(at-want) > 0.01*want {
			t.Errorf("%v A trips after %.2f s, the curve says %.2f s", amps, at, want)
		}
	}
}

// S4: run time is over although the plan is not.
func TestRunTimeTrips(t *testing.T) {
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.env.RunTimeMax = 2 * time.Second
	d.wait(2100 * ms)
	if d.s.Trip.Cause.Code != safety.CodeRunTime {
		t.Errorf("%v %v", d.s.Phase, d.s.Trip.Cause)
	}
}

// S4: a shaft that turns before anything drives it trips.
func TestAShaftThatTurnsUndrivenTrips(t *testing.T) {
	for _, p := range []safety.Phase{safety.Armed, safety.CountDown} {
		d := newDrill(t).ready().get(p, stepPlan(t))
		d.board.Speed = 81
		d.wait(20 * ms)
		if d.s.Trip.Cause.Code != safety.CodeUndriven {
			t.Errorf("%v: %v %v", p, d.s.Phase, d.s.Trip.Cause)
		}
	}
}

// S4: whatever plan is asked for, no drive value outside the envelope, the plan
// or the slew limit goes out.
func TestDriveStaysInsideTheEnvelope(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		env := sim.Envelope()
		env.Reverse = rapid.Bool().Draw(rt, "reverse")
		value := rapid.OneOf(rapid.Float64Range(-30, 30), rapid.SampledFrom([]float64{-24, 24, 24.0001, math.Inf(1), math.NaN(), 0}))
		p := safety.Plan{Name: "any", VoltsMax: rapid.SampledFrom([]float64{0, 5, 24, 100}).Draw(rt, "own limit")}
		for range rapid.IntRange(1, 4).Draw(rt, "segments") {
			p.Segments = append(p.Segments, volts(value.Draw(rt, "from"), value.Draw(rt, "to"),
				time.Duration(rapid.IntRange(1, 500).Draw(rt, "ms"))*ms))
		}
		a, err := env.Admit(p)
		top := 24.0
		if p.VoltsMax > 0 && p.VoltsMax < top {
			top = p.VoltsMax
		}
		inside := true
		for _, s := range p.Segments {
			for _, v := range []float64{s.From, s.To} {
				inside = inside && math.Abs(v) <= top && (env.Reverse || v >= 0)
			}
			inside = inside && math.Abs(s.To-s.From)/s.Duration.Seconds() <= env.SlewMax
		}
		if inside != (err == nil) {
			rt.Fatalf("admitted: %v, inside: %v", err, inside)
		}
		if err != nil {
			var le *safety.LimitError
			if !errors.As(err, &le) {
				rt.Fatalf("error %T", err)
			}
			return
		}
		d := newDrill(t)
		d.env = env
		d.ready().countDown(a)
		d.all = nil
		d.wait(env.CountDown + p.Duration() + 80*ms)
		for _, x := range d.all {
			if x, ok := x.(safety.SendDrive); ok {
				if math.Abs(x.Value) > top || !env.Reverse && x.Value < 0 {
					rt.Fatalf("drive %v, limit %v", x.Value, top)
				}
			}
		}
		if d.s.Phase != safety.Disarmed {
			rt.Fatalf("not over: %v %v", d.s.Phase, d.s.Trip.Cause)
		}
	})
}

// S4: the drive moves no faster than the slew limit, also across segments.
func TestDriveKeepsTheSlewLimit(t *testing.T) {
	d := newDrill(t).ready()
	d.env.SlewMax = 50
	d.countDown(admit(t, d.env, safety.Plan{Segments: []safety.Segment{volts(3, 3, time.Second), volts(-3, -3, time.Second)}}))
	was, at, seen := 0.0, time.Duration(0), 0
	for range 500 {
		d.wait(10 * ms)
		for _, x := range d.out {
			if x, ok := x.(safety.SendDrive); ok {
				if at > 0 && math.Abs(x.Value-was) > 50*(d.now-at).Seconds()+1e-9 {
					t.Fatalf("from %v to %v V in %v", was, x.Value, d.now-at)
				}
				was, at = x.Value, d.now
				seen++
			}
		}
	}
	if seen < 40 {
		t.Errorf("only %d drive values", seen)
	}
}

// A segment ends on its condition: motion, or rest.
func TestSegmentsEndOnTheirCondition(t *testing.T) {
	d := newDrill(t).ready()
	up := volts(0, 7, 3*time.Second)
	up.Until = safety.Until{Kind: safety.UntilMotion, Counts: 20}
	rest := volts(0, 0, 3*time.Second)
	rest.Until.Kind = safety.UntilRest
	d.run(admit(t, d.env, safety.Plan{Segments: []safety.Segment{up, rest, volts(1, 1, 3*time.Second)}}))
	d.wait(500 * ms)
	d.board.Counts, d.board.Speed = 19, 10
	d.wait(20 * ms)
	if d.s.Segment != 0 {
		t.Fatal("ended before the counts came")
	}
	d.board.Counts = 20
	d.wait(20 * ms)
	if d.s.Segment != 1 {
		t.Fatal("did not end with the counts")
	}
	d.wait(300 * ms)
	if d.s.Segment != 1 {
		t.Fatal("at rest while it turned")
	}
	d.board.Speed = 0
	d.wait(safety.RestHold + 50*ms)
	if d.s.Segment != 2 {
		t.Fatal("did not see rest")
	}
}

// S13: a ramp is asked for once, and becomes a cut when the board does not
// answer, when the speed does not fall, on a second press and on any trip.
func TestARampBecomesACut(t *testing.T) {
	begin := func() *drill {
		d := newDrill(t).ready().get(safety.Running, loopPlan(t))
		d.board.Speed, d.board.Counts = 60, 1
		d.wait(20 * ms)
		d.all = nil
		out := d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
		if !has[safety.SendRampStop](out) || has[safety.SendStop](out) {
			t.Fatalf("no ramp: %v", out)
		}
		return d
	}
	d := begin()
	d.wait(60 * ms)
	if !has[safety.SendStop](d.all) {
		t.Error("no answer in 50 ms and no cut")
	}
	d = begin()
	d.do(safety.Ramping{At: d.now})
	d.board.State = protocol.Ramping
	d.wait(260 * ms)
	if !has[safety.SendStop](d.all) {
		t.Error("the speed does not fall and no cut")
	}
	d = begin()
	d.do(safety.Ramping{At: d.now})
	d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
	if !has[safety.SendStop](d.all) {
		t.Error("second press and no cut")
	}
	d = begin()
	d.do(safety.Ramping{At: d.now})
	d.board.State = protocol.Ramping
	for d.board.Speed > 0 {
		d.board.Speed = max(0, d.board.Speed-4)
		d.wait(20 * ms)
	}
	if has[safety.SendStop](d.all) || count[safety.SendRampStop](d.all) != 1 || !has[safety.SendHeartbeat](d.all) {
		t.Errorf("a ramp that goes well: %d cuts, %d ramps", count[safety.SendStop](d.all), count[safety.SendRampStop](d.all))
	}
	d.board.State = protocol.Off
	d.wait(100 * ms)
	if d.s.Phase != safety.Disarmed {
		t.Errorf("after the ramp: %v", d.s.Phase)
	}
	d = begin()
	d.do(safety.Ramping{At: d.now})
	d.do(safety.BoardArmed{At: d.now}) // a late answer out of nowhere: a cut, and it is a level
	d.all = nil
	d.now += 10 * ms
	d.do(safety.Tick{At: d.now})
	if !has[safety.SendStop](d.all) {
		t.Error("a cut in the ramp is not repeated")
	}
	d = begin()
	d.do(safety.Wake{At: d.now})
	if !has[safety.SendStop](d.out) || d.s.Phase != safety.Tripped {
		t.Errorf("a trip in the ramp: %v", d.s.Phase)
	}
	d = newDrill(t).ready().get(safety.Running, stepPlan(t))
	if out := d.do(safety.Stop{At: d.now, Source: safety.ByStopKey}); has[safety.SendRampStop](out) {
		t.Error("a ramp in open loop")
	}
}
