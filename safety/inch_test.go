package safety_test

import (
	"math"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

func inching(t *testing.T) (*drill, safety.Plan) {
	d := newDrill(t)
	d.env.InchTurns, d.env.InchTime = 0.1, time.Second
	n := int64(0.1 * 2 * math.Pi / d.env.RadPerCount)
	up, on := volts(0, 3, 300*ms), volts(3, 3, 600*ms)
	up.Until = safety.Until{Kind: safety.UntilMotion, Counts: n / 4}
	on.Until = safety.Until{Kind: safety.UntilMotion, Counts: n - n/4}
	return d.ready(), safety.Plan{Name: "inch", Inch: true, SpeedMax: float64(d.env.CreepMax), TurnsMax: 0.2,
		Segments: []safety.Segment{up, on, volts(0, 0, safety.InchRest)}}
}

// S16: one press moves one inch, bounded by time where the shaft does not turn,
// and the next press needs no count-down; the arm lapses all the same.
func TestAPressMovesOneInch(t *testing.T) {
	d, p := inching(t)
	d.env.StallVolts = 10 // the drill's shaft stands still
	d.run(admit(t, d.env, p))
	d.wait(900*ms + safety.InchRest + 20*ms)
	if d.s.Phase != safety.Armed || d.s.Inches != 1 || d.s.Value != 0 {
		t.Fatalf("after one inch: %v, %d, %v V", d.s.Phase, d.s.Inches, d.s.Value)
	}
	d.all = nil
	d.board.State = protocol.Driving
	d.wait(2 * time.Second)
	if has[safety.SendDrive](d.all) || !has[safety.SendHeartbeat](d.all) || d.s.Phase != safety.Armed {
		t.Errorf("between two presses: %v, %s", d.s.Phase, words(d.all))
	}
	d.do(safety.Start{At: d.now})
	if d.s.Phase != safety.Running || d.s.Inches != 2 {
		t.Fatalf("a second press: %v", d.s.Phase)
	}
	d.do(safety.Start{At: d.now}) // a key that is held down repeats
	if d.s.Phase != safety.Stopping {
		t.Errorf("a press in motion does not stop: %v", d.s.Phase)
	}
	d.wait(300 * ms)
	if e := last[safety.RunEnded](d.all); d.s.Phase != safety.Disarmed || !e.Started || e.Reason != safety.EndStopped {
		t.Errorf("%v, %+v", d.s.Phase, e)
	}

	d, p = inching(t)
	d.env.StallVolts = 10
	d.run(admit(t, d.env, p))
	armed := d.s.ArmedAt
	d.wait(900*ms + safety.InchRest + 20*ms)
	d.board.State = protocol.Driving
	d.wait(armed + d.env.ArmLapse - d.now - 30*ms)
	if d.s.Phase != safety.Armed {
		t.Fatalf("lapsed too soon: %v", d.s.Phase)
	}
	d.wait(300 * ms)
	if e := last[safety.RunEnded](d.all); d.s.Phase != safety.Disarmed || e.Cause.Code != safety.CodeLapsed || !e.Started {
		t.Errorf("the arm of an inch does not lapse: %v, %+v", d.s.Phase, e)
	}
}

// S16: the angle ends an inch, and drive between two inches is a trip.
func TestAnInchEndsAtItsAngle(t *testing.T) {
	d, p := inching(t)
	d.run(admit(t, d.env, p))
	d.wait(100 * ms)
	for range 2 {
		d.board.Counts += int64(0.08 * 2 * math.Pi / d.env.RadPerCount)
		d.wait(10 * ms)
	}
	d.wait(safety.InchRest + 30*ms)
	if d.s.Phase != safety.Armed {
		t.Fatalf("goes on after its angle: %v, %v", d.s.Phase, d.s.Trip.Cause)
	}
	d.board.State, d.board.Volts = protocol.Driving, 3
	d.wait(300 * ms)
	if d.s.Phase != safety.Tripped || d.s.Trip.Cause.Code != safety.CodeUndriven {
		t.Errorf("a board that drives between two inches: %v %v", d.s.Phase, d.s.Trip.Cause)
	}
}

func TestAnInchTurnsNoFartherThanItsLimit(t *testing.T) {
	d, p := inching(t)
	d.run(admit(t, d.env, p))
	d.wait(50 * ms)
	d.board.Counts += int64(0.21 * 2 * math.Pi / d.env.RadPerCount)
	d.wait(10 * ms)
	if d.s.Phase != safety.Tripped || d.s.Trip.Cause.Code != safety.CodeTurns {
		t.Errorf("%v %v", d.s.Phase, d.s.Trip.Cause)
	}
}

// Every bound of an inch is a bound of Admit.
func TestInchIsAdmittedInsideItsBounds(t *testing.T) {
	d, good := inching(t)
	for name, bend := range map[string]func(*safety.Plan, *safety.Envelope){
		"too long":           func(p *safety.Plan, _ *safety.Envelope) { p.Segments[1].Duration = 900 * ms },
		"no end by angle":    func(p *safety.Plan, _ *safety.Envelope) { p.Segments[1].Until = safety.Until{} },
		"angle too large":    func(p *safety.Plan, _ *safety.Envelope) { p.Segments[1].Until.Counts *= 3 },
		"turns too large":    func(p *safety.Plan, _ *safety.Envelope) { p.TurnsMax = 0.3 },
		"above creep":        func(p *safety.Plan, e *safety.Envelope) { p.SpeedMax = float64(e.CreepMax) * 1.1 },
		"ends under drive":   func(p *safety.Plan, _ *safety.Envelope) { p.Segments = p.Segments[:2] },
		"rest too short":     func(p *safety.Plan, _ *safety.Envelope) { p.Segments[2].Duration = 100 * ms },
		"is a check":         func(p *safety.Plan, _ *safety.Envelope) { p.Check = safety.CheckLimit },
		"no size in the rig": func(_ *safety.Plan, e *safety.Envelope) { e.InchTurns = 0 },
		"closed loop": func(p *safety.Plan, _ *safety.Envelope) {
			for i := range p.Segments {
				p.Segments[i].Mode = safety.ModeSpeed
			}
		},
	} {
		p, env := good, d.env
		p.Segments = append([]safety.Segment(nil), good.Segments...)
		bend(&p, &env)
		if _, err := env.Admit(p); err == nil {
			t.Errorf("%s: admitted", name)
		} else if !strings.Contains(err.Error(), "inch") && !strings.Contains(err.Error(), "angle") && !strings.Contains(err.Error(), "volts") {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := d.env.Admit(good); err != nil {
		t.Error(err)
	}
}
