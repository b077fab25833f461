package safety_test

import (
	"errors"
	"reflect"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/sim"
)

// S7: the runs that may come before the checks keep to narrower bounds.
func TestBoundedRunsAreHeldToTheirBounds(t *testing.T) {
	env := sim.Envelope()
	sign := func(change func(*safety.Plan)) safety.Plan {
		s := volts(0, 8, 2*time.Second)
		s.Until = safety.Until{Kind: safety.UntilMotion, Counts: 20}
		p := safety.Plan{Check: safety.CheckSign, TurnsMax: 2, Segments: []safety.Segment{s}}
		change(&p)
		return p
	}
	quiet := func(change func(*safety.Plan)) safety.Plan {
		p := silencePlan(env).Plan()
		change(&p)
		return p
	}
	for _, c := range []struct {
		name string
		plan safety.Plan
		ok   bool
	}{
		{"sign", sign(func(*safety.Plan) {}), true},
		{"sign, 21 counts", sign(func(p *safety.Plan) { p.Segments[0].Until.Counts = 21 }), false},
		{"sign, no end", sign(func(p *safety.Plan) { p.Segments[0].Until = safety.Until{} }), false},
		{"sign, too many volts", sign(func(p *safety.Plan) { p.Segments[0].To = -8.1 }), false},
		{"sign, too many turns", sign(func(p *safety.Plan) { p.TurnsMax = 2.1 }), false},
		{"sign, turns open", sign(func(p *safety.Plan) { p.TurnsMax = 0 }), false},
		{"sign, closed loop", sign(func(p *safety.Plan) { p.Segments[0].Mode = safety.ModeSpeed }), false},
		{"silence", quiet(func(*safety.Plan) {}), true},
		{"silence, too fast", quiet(func(p *safety.Plan) { p.SpeedMax = 81 }), false},
		{"silence, speed open", quiet(func(p *safety.Plan) { p.SpeedMax = 0 }), false},
		{"silence, never", quiet(func(p *safety.Plan) { p.SilenceAt = 0 }), false},
		{"silence, after the end", quiet(func(p *safety.Plan) { p.SilenceAt = 4 * time.Second }), false},
		{"silence in another run", quiet(func(p *safety.Plan) { p.Check = safety.CheckNone }), false},
		{"stop check, speed open", safety.Plan{Check: safety.CheckStop, Segments: []safety.Segment{volts(1, 1, 1e9)}}, false},
		{"count check", safety.Plan{Check: safety.CheckCount, Segments: []safety.Segment{volts(1, 1, 1e9)}}, false},
		{"held too long", safety.Plan{Locked: true, Segments: []safety.Segment{volts(1, 1, 2001*ms)}}, false},
		{"both modes", safety.Plan{Segments: []safety.Segment{volts(1, 1, 1e9), {Mode: safety.ModeSpeed, From: 1, To: 1, Duration: 1e9}}}, false},
		{"no mode", safety.Plan{Segments: []safety.Segment{{From: 1, To: 1, Duration: 1e9}}}, false},
		{"nothing", safety.Plan{}, false},
		{"no time", safety.Plan{Segments: []safety.Segment{volts(1, 1, 0)}}, false},
		{"too long", safety.Plan{Segments: []safety.Segment{volts(1, 1, 15*time.Second), volts(1, 1, 6*time.Second)}}, false},
		{"overflowing time", safety.Plan{Segments: []safety.Segment{volts(1, 1, 1<<62), volts(1, 1, 1<<62), volts(1, 1, 1<<62)}}, false},
	} {
		_, err := env.Admit(c.plan)
		if (err == nil) != c.ok {
			t.Errorf("%s: %v", c.name, err)
		}
	}
}

// S12: an envelope with a limit left out admits nothing.
func TestEnvelopeWithAHoleAdmitsNothing(t *testing.T) {
	p := safety.Plan{Segments: []safety.Segment{volts(0, 0, time.Millisecond)}}
	mayBeZero := map[string]bool{"BusMax": true, "BusMin": true, "TempMax": true, "SignVolts": true, "SignTurns": true, "LockedMax": true,
		"Resistance": true, "Ke": true, "RadPerCount": true, "Look": true, "Reverse": true, "Brake": true, "GravityLoad": true,
		"BrakeListed": true, "Stop": true, "Inputs": true, "Enabling": true, "InchTurns": true, "InchTime": true, "ChecksAsked": true, "Hash": true, "Loosened": true}
	typ := reflect.TypeFor[safety.Envelope]()
	for i := range typ.NumField() {
		env := sim.Envelope()
		reflect.ValueOf(&env).Elem().Field(i).SetZero()
		_, err := env.Admit(p)
		if name := typ.Field(i).Name; (err == nil) != mayBeZero[name] {
			t.Errorf("without %s: %v", name, err)
		}
	}
	for name, bend := range map[string]func(*safety.Envelope){
		"gravity":       func(e *safety.Envelope) { e.GravityLoad = true },
		"current mode":  func(e *safety.Envelope) { e.VoltageDrive = false },
		"short timeout": func(e *safety.Envelope) { e.BoardTimeout = 119 * ms },
	} {
		env := sim.Envelope()
		bend(&env)
		if _, err := env.Admit(p); !errors.Is(err, safety.ErrRefused) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// A drive that cannot brake is not planned to.
func TestDrivesThatCannotBrakeAreNotPlannedTo(t *testing.T) {
	env := sim.Envelope()
	env.Brake, env.Reverse = false, false
	loop := func(v ...float64) safety.Plan {
		var p safety.Plan
		for i := 1; i < len(v); i++ {
			p.Segments = append(p.Segments, safety.Segment{Mode: safety.ModeSpeed, From: v[i-1], To: v[i], Duration: time.Second})
		}
		return p
	}
	if _, err := env.Admit(loop(0, 50, 50, 80)); err != nil {
		t.Error(err)
	}
	if _, err := env.Admit(loop(0, 50, 40)); !errors.Is(err, safety.ErrRefused) {
		t.Errorf("a setpoint that falls: %v", err)
	}
}

// The error names segment, quantity, value, limit and unit.
func TestLimitErrorsHaveTheirPlace(t *testing.T) {
	_, err := sim.Envelope().Admit(safety.Plan{Segments: []safety.Segment{volts(0, 1, 1e9), volts(1, 25, 1e9)}})
	const want = "segment 2: drive 25 V is over the limit 24 V: make it smaller"
	var le *safety.LimitError
	if err == nil || err.Error() != want || !errors.As(err, &le) || le.Segment != 2 || le.Got != 25 || le.Limit != 24 {
		t.Errorf("got %v, want %s", err, want)
	}
}

// A plan that was admitted cannot be changed afterwards.
func TestAdmittedPlansCannotBeChanged(t *testing.T) {
	p := safety.Plan{Segments: []safety.Segment{volts(1, 1, 1e9)}}
	a := admit(t, sim.Envelope(), p)
	p.Segments[0].To = 99
	a.Plan().Segments[0].To = 99
	if got := a.Plan().Segments[0].To; got != 1 {
		t.Errorf("changed to %v", got)
	}
}

// S3: a plan admitted by a wider envelope does not arm under a narrower one.
func TestTheEnvelopeIsAskedAgainAtArming(t *testing.T) {
	d := newDrill(t).ready()
	d.env.VoltsMax = 2
	out := d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops})
	if last[safety.ArmRefused](out).Cause.Code != safety.CodeOverEnvelope {
		t.Errorf("%v", out)
	}
}

// S1: in one call a stop stands before everything else.
func TestAStopComesFirst(t *testing.T) {
	for p := safety.Arming; p <= safety.Tripped; p++ {
		d := newDrill(t).ready().get(p, stepPlan(t))
		out := d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
		if _, first := out[0].(safety.SendStop); !first {
			t.Errorf("%v: %T comes first", p, out[0])
		}
	}
	// An arm that is taken back, and an arm that lapses, put out more than a stop.
	d := newDrill(t).ready().get(safety.Stopping, stepPlan(t))
	d.board.State = protocol.Armed
	out := d.do(safety.BoardArmed{At: d.now})
	if _, first := out[0].(safety.SendStop); !first {
		t.Errorf("%T comes first", out[0])
	}
	for _, x := range []safety.Effect{safety.SendArm{}, safety.SendDrive{}, safety.SendHeartbeat{}, safety.SendReset{}, safety.Log{}} {
		if !safety.Before(safety.SendStop{}, x) {
			t.Errorf("%T may come before a stop", x)
		}
	}
}

// S8: a gap in which this program was held up ends the arm.
func TestTheProgramWasHeldUp(t *testing.T) {
	for _, p := range moving {
		d := newDrill(t).ready()
		d.env.TelemetryAgeMax = time.Minute
		d.get(p, stepPlan(t))
		d.now += safety.TickMax + 10*ms
		d.do(safety.Tick{At: d.now})
		if d.s.Trip.Cause.Code != safety.CodeLate {
			t.Errorf("%v: %v %v", p, d.s.Phase, d.s.Trip.Cause)
		}
	}
}

// Every cause has words and, unless it was asked for, something to do.
func TestEveryCauseHasWordsAndARemedy(t *testing.T) {
	seen := map[string]safety.Code{}
	for code, c := range safety.Codes() {
		if c.Words == "" || c.Do == "" && code/100 != 4 {
			t.Errorf("%d: %q, %q", code, c.Words, c.Do)
		}
		if other, twice := seen[c.Words]; twice {
			t.Errorf("%d and %d have the same words", code, other)
		}
		seen[c.Words] = code
	}
}
