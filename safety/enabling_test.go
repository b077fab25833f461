package safety_test

import (
	"strings"
	"testing"

	"gainwright/protocol"
	"gainwright/safety"
)

// Bits of the enabled drill: 0 guard, 1 middle contact, 2 the contact that opens
// when the switch is pressed through.
const allHeld, letGoBits, throughBits, guardOpen = 0b111, 0b101, 0b001, 0b110

func enabled(t *testing.T) *drill {
	d := newDrill(t)
	d.env.Enabling = safety.Enabling{Listed: true, Name: "enabling switch", Bit: 1, Two: true, ThroughBit: 2}
	d.board.Slow.Inputs = allHeld
	return d.ready()
}

// IEC 60204-1, 9.2.3.9 (read in excerpts): released and pressed through are stop,
// the middle permits a start by another control.
func TestEnablingSwitchHasThreePositions(t *testing.T) {
	two := safety.Enabling{Listed: true, Bit: 1, Two: true, ThroughBit: 2}
	one := safety.Enabling{Listed: true, Bit: 1}
	for _, c := range []struct {
		e    safety.Enabling
		bits uint16
		want safety.Position
	}{
		{two, allHeld, safety.HeldMiddle}, {two, letGoBits, safety.Released}, {two, throughBits, safety.PressedThrough},
		{two, 0b011, safety.ContactsDisagree}, {one, 0b010, safety.HeldMiddle}, {one, 0b100, safety.NotHeld},
	} {
		s := protocol.Sample{Slow: protocol.Slow{Seen: true, Inputs: c.bits}}
		if got := c.e.Position(s); got != c.want {
			t.Errorf("%+v, inputs %03b: %v, want %v", c.e, c.bits, got, c.want)
		}
	}
	if got := two.Position(protocol.Sample{}); got != safety.PositionUnknown {
		t.Errorf("without a word of the board: %v", got)
	}
}

// S16: nothing arms unless the switch is held in the middle, and letting it go or
// pressing it through ends every phase disarmed, with no trip to acknowledge.
func TestEnablingSwitchStopsAndDisarms(t *testing.T) {
	for _, bits := range []uint16{letGoBits, throughBits} {
		d := enabled(t)
		d.board.Slow.Inputs = bits
		d.wait(100 * ms)
		d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops})
		if r := last[safety.ArmRefused](d.out); r.Cause.Code != safety.CodeEnabling {
			t.Errorf("inputs %03b: arm gives %v", bits, d.out)
		}
		for _, p := range []safety.Phase{safety.Armed, safety.CountDown, safety.Running} {
			d := enabled(t).get(p, stepPlan(t))
			d.board.Slow.Inputs = bits
			d.all = nil
			d.wait(10 * ms)
			if !has[safety.SendStop](d.all) || d.s.Phase != safety.Stopping {
				t.Errorf("inputs %03b in %v: %v, %v", bits, p, d.s.Phase, d.out)
			}
			d.wait(300 * ms)
			if e := last[safety.RunEnded](d.all); d.s.Phase != safety.Disarmed || e.Reason != safety.EndStopped || e.Cause.Code != safety.CodeEnabling {
				t.Errorf("inputs %03b in %v: %v, %+v", bits, p, d.s.Phase, e)
			}
		}
	}
}

// A board stops by the same switch and latches it; its word may come before it
// says which input it was.
func TestTheBoardsWordOnTheEnablingSwitch(t *testing.T) {
	for _, c := range []struct {
		name  string
		bits  uint16
		want  safety.Code
		phase safety.Phase
	}{
		{"let go", letGoBits, safety.CodeEnabling, safety.Disarmed},
		{"guard opened", guardOpen, safety.CodeInterlock, safety.Tripped},
		{"both", 0b100, safety.CodeInterlock, safety.Tripped},
		{"never said", allHeld, safety.CodeBoardTripped, safety.Tripped},
	} {
		d := enabled(t).get(safety.Running, stepPlan(t))
		d.all = nil
		d.board.State, d.board.TripHeld = protocol.Tripped, true
		d.do(safety.BoardTripped{At: d.now, Cause: protocol.CauseInterlock})
		if !has[safety.SendStop](d.out) || d.s.Phase != safety.Stopping {
			t.Fatalf("%s: %v, %v", c.name, d.s.Phase, d.out)
		}
		d.wait(200 * ms)
		if d.s.Phase != safety.Stopping {
			t.Errorf("%s: decided before the board said which input: %v", c.name, d.s.Phase)
		}
		d.board.Slow.Inputs = c.bits
		d.board.State = protocol.Tripped
		d.wait(700 * ms)
		if e := last[safety.RunEnded](d.all); d.s.Phase != c.phase || e.Cause.Code != c.want {
			t.Errorf("%s: %v, %+v", c.name, d.s.Phase, e)
		}
		if n := count[safety.RunEnded](d.all); n != 1 {
			t.Errorf("%s: reported %d times", c.name, n)
		}
		if c.phase == safety.Disarmed && !has[safety.SendReset](d.all) {
			t.Errorf("%s: the board is not asked to clear what it latched", c.name)
		}
		if c.phase == safety.Tripped && has[safety.SendReset](d.all) {
			t.Errorf("%s: the board is asked to clear a trip that nobody has acknowledged", c.name)
		}
	}
}

// S7: where the rig file has a checklist, nothing moves before it is ticked, the
// sign ramp not either.
func TestChecklistComesBeforeAnythingMoves(t *testing.T) {
	d := newDrill(t)
	d.env.ChecksAsked = safety.SetOf(safety.CheckTicked)
	d.connect()
	d.do(safety.LimitsHeld{At: d.now, OK: true})
	d.do(safety.CheckPassed{At: d.now, Check: safety.CheckStopKey})
	d.do(safety.CheckPassed{At: d.now, Check: safety.CheckCount})
	up := volts(0, 6, 1e9)
	up.Until = safety.Until{Kind: safety.UntilMotion, Counts: 10}
	sign := admit(t, d.env, safety.Plan{Check: safety.CheckSign, TurnsMax: 1, Segments: []safety.Segment{up}})
	d.do(safety.ArmRequest{At: d.now, Plan: sign, Stops: d.s.Stops})
	if r := last[safety.ArmRefused](d.out); r.Cause.Code != safety.CodeChecks || !strings.Contains(r.Cause.Words, "checklist") {
		t.Fatalf("armed without the checklist: %v", d.out)
	}
	d.do(safety.CheckPassed{At: d.now, Check: safety.CheckTicked})
	d.do(safety.ArmRequest{At: d.now, Plan: sign, Stops: d.s.Stops})
	if d.s.Phase != safety.Arming {
		t.Errorf("refused with the checklist ticked: %v", d.out)
	}
	d.do(safety.RigChanged{At: d.now})
	if d.s.Checks.Has(safety.CheckTicked) {
		t.Error("a rig file that changed keeps the ticks")
	}
}
