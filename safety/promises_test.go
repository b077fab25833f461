package safety_test

import (
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/sim"
)

// S1: from every phase a stop goes out at once, and again with every tick until
// the board says that its output is off.
func TestStopIsRepeatedUntilTheBoardSaysOff(t *testing.T) {
	for p := safety.Disarmed; p <= safety.Tripped; p++ {
		d := newDrill(t).ready().get(p, stepPlan(t))
		out := d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
		if !has[safety.SendStop](out) {
			t.Errorf("%v: no stop at once", p)
		}
		if p == safety.Disarmed {
			continue
		}
		d.mute = true
		for i := range 10 {
			d.now += 10 * ms
			if !has[safety.SendStop](d.do(safety.Tick{At: d.now})) {
				t.Errorf("%v: tick %d after the stop sent none", p, i)
			}
		}
		d.do(safety.OutputOff{At: d.now})
		if d.now += 10 * ms; has[safety.SendStop](d.do(safety.Tick{At: d.now})) {
			t.Errorf("%v: the board said off and stops go on", p)
		}
	}
}

// S1: telemetry that was taken before the stop confirms nothing.
func TestOldTelemetryDoesNotConfirmAStop(t *testing.T) {
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
	d.board.State = protocol.Off
	d.now += 5 * ms
	d.sample()
	if d.s.Phase != safety.Stopping {
		t.Errorf("%v after telemetry 5 ms younger than the stop", d.s.Phase)
	}
	d.now += 30 * ms
	d.sample()
	if d.s.Phase != safety.Disarmed {
		t.Errorf("%v after telemetry 35 ms younger than the stop", d.s.Phase)
	}
}

// S1: a board that does not confirm trips, and stops go on.
func TestABoardThatDoesNotConfirmTrips(t *testing.T) {
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
	for range 105 {
		d.now += 10 * ms
		d.board.State = protocol.Driving
		d.sample()
		if !has[safety.SendStop](d.do(safety.Tick{At: d.now})) {
			t.Fatal("a tick without a stop")
		}
	}
	if d.s.Phase != safety.Tripped || d.s.Trip.Cause.Code != safety.CodeNoStopAnswer {
		t.Errorf("%v %v", d.s.Phase, d.s.Trip.Cause)
	}
}

// S2: in count-down and in motion every key but the mark stops; a paste takes
// the arm away in every armed phase.
func TestEveryUnlistedKeyStops(t *testing.T) {
	keys := map[string]func(at time.Duration) safety.Event{
		"key":         func(at time.Duration) safety.Event { return safety.Key{At: at} },
		"clear":       func(at time.Duration) safety.Event { return safety.ClearArea{At: at} },
		"start":       func(at time.Duration) safety.Event { return safety.Start{At: at} },
		"disarm":      func(at time.Duration) safety.Event { return safety.Disarm{At: at} },
		"acknowledge": func(at time.Duration) safety.Event { return safety.Acknowledge{At: at} },
		"reset":       func(at time.Duration) safety.Event { return safety.Reset{At: at} },
		"arm":         func(at time.Duration) safety.Event { return safety.ArmRequest{At: at, Plan: stepPlan(t)} },
		"paste":       func(at time.Duration) safety.Event { return safety.Paste{At: at} },
	}
	for name, key := range keys {
		for _, p := range []safety.Phase{safety.CountDown, safety.Running} {
			d := newDrill(t).ready().get(p, stepPlan(t))
			if out := d.do(key(d.now)); !has[safety.SendStop](out) || d.s.Phase != safety.Stopping {
				t.Errorf("%s in %v: %v, %v", name, p, d.s.Phase, out)
			}
		}
	}
	for _, p := range moving {
		d := newDrill(t).ready().get(p, stepPlan(t))
		if d.do(safety.Paste{At: d.now}); d.s.Phase != safety.Stopping {
			t.Errorf("paste in %v: %v", p, d.s.Phase)
		}
	}
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	if d.do(safety.Mark{At: d.now}); d.s.Phase != safety.Running {
		t.Errorf("a mark in motion: %v", d.s.Phase)
	}
	d = newDrill(t).ready().get(safety.CountDown, stepPlan(t))
	if d.do(safety.Mark{At: d.now}); d.s.Phase != safety.Stopping {
		t.Errorf("a mark in the count-down: %v", d.s.Phase)
	}
}

// S2: a paste while armed executes nothing afterwards.
func TestPasteExecutesNothing(t *testing.T) {
	d := newDrill(t).ready().get(safety.Armed, stepPlan(t))
	d.wait(3 * time.Second)
	stops := d.s.Stops
	d.do(safety.Paste{At: d.now})
	d.all = nil
	for range 200 {
		d.do(safety.ClearArea{At: d.now})
		d.do(safety.Start{At: d.now})
		d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: stops})
	}
	d.wait(5 * time.Second)
	if has[safety.SendArm](d.all) || has[safety.SendDrive](d.all) || d.s.Phase != safety.Disarmed {
		t.Errorf("%v, arms %d", d.s.Phase, count[safety.SendArm](d.all))
	}
}

// S3: every stage of the way to motion is needed, and takes its time.
func TestNothingDrivesWithoutTheWholeWay(t *testing.T) {
	d := newDrill(t).ready()
	d.all = nil
	for _, e := range []safety.Event{safety.Start{At: d.now}, safety.ClearArea{At: d.now}, safety.BoardArmed{At: d.now},
		safety.ArmRequest{At: d.now, Stops: d.s.Stops}} {
		d.do(e)
	}
	d.wait(5 * time.Second)
	if has[safety.SendDrive](d.all) || has[safety.SendArm](d.all) {
		t.Error("something drives or arms without an admitted plan")
	}

	d = newDrill(t).ready().get(safety.Armed, stepPlan(t))
	d.do(safety.Start{At: d.now})
	if d.s.Phase != safety.Armed {
		t.Errorf("started without the clear-area answer: %v", d.s.Phase)
	}
	d.wait(safety.ClearWait - 20*ms)
	d.do(safety.ClearArea{At: d.now})
	d.do(safety.Start{At: d.now})
	if d.s.Phase != safety.Armed {
		t.Errorf("the clear-area answer was taken after %v", safety.ClearWait-20*ms)
	}
	d.wait(20 * ms) // the early answer must not have started the wait again
	d.do(safety.ClearArea{At: d.now})
	d.do(safety.Start{At: d.now})
	if d.s.Phase != safety.CountDown {
		t.Fatalf("no count-down: %v", d.s.Phase)
	}
	d.all = nil
	d.wait(d.env.CountDown - 20*ms)
	if has[safety.SendDrive](d.all) {
		t.Error("a drive value in the count-down")
	}
	d.wait(40 * ms)
	if !has[safety.SendDrive](d.all) {
		t.Error("no drive value after the count-down")
	}
}

// S5: a stop voids what was asked before it, also what the board was asked.
func TestAStopVoidsWhatWasAskedBefore(t *testing.T) {
	d := newDrill(t).ready()
	seen := d.s.Stops
	d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
	d.wait(time.Second)
	if out := d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: seen}); last[safety.ArmRefused](out).Cause.Code != safety.CodeVoided {
		t.Errorf("an old request: %v", out)
	}
	d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
	d.wait(safety.HoldOff - 20*ms)
	if out := d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops}); last[safety.ArmRefused](out).Cause.Code != safety.CodeHoldOff {
		t.Errorf("too soon after a stop: %v", out)
	}
	d.wait(40 * ms)
	d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops})
	d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
	out := d.do(safety.BoardArmed{At: d.now})
	if !has[safety.SendStop](out) || !has[safety.SendDisarm](out) || d.s.Phase != safety.Stopping {
		t.Errorf("the board's yes came after the stop: %v, %v", d.s.Phase, out)
	}
}

// S6: stale telemetry and a frozen screen stop, in every armed phase.
func TestNoMotionOnStaleTelemetryOrAFrozenScreen(t *testing.T) {
	for _, p := range moving {
		d := newDrill(t).ready().get(p, stepPlan(t))
		d.mute = true
		d.wait(d.env.TelemetryAgeMax + 10*ms)
		if d.s.Phase != safety.Tripped || d.s.Trip.Cause.Code != safety.CodeStale {
			t.Errorf("%v without telemetry: %v %v", p, d.s.Phase, d.s.Trip.Cause)
		}
		d = newDrill(t).ready().get(p, stepPlan(t))
		d.blind = true
		d.wait(d.env.LeaseMax + 20*ms)
		if want := safety.CodeLease; p != safety.Arming && (d.s.Phase != safety.Tripped || d.s.Trip.Cause.Code != want) {
			t.Errorf("%v without frames: %v %v", p, d.s.Phase, d.s.Trip.Cause)
		}
	}
}

// S6: samples that repeat, or that sat in a buffer, are not fresh.
func TestRepeatsAndBufferedTelemetryAreNotFresh(t *testing.T) {
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.mute = true
	frozen := d.board
	for range 20 {
		d.do(safety.Sample{At: d.now, Sample: frozen})
		d.wait(10 * ms)
	}
	if d.s.Trip.Cause.Code != safety.CodeStale {
		t.Errorf("repeats: %v %v", d.s.Phase, d.s.Trip.Cause)
	}

	d = newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.mute = true
	behind := time.Duration(0)
	for range 60 {
		behind += 5 * ms // every sample is 5 ms later than the one before
		d.now += 10 * ms
		d.board.BoardUS = uint64((d.now - behind).Microseconds())
		d.do(safety.Sample{At: d.now, Sample: d.board})
		d.do(safety.Lease{At: d.now})
		d.do(safety.Tick{At: d.now})
	}
	if d.s.Trip.Cause.Code != safety.CodeStale {
		t.Errorf("a buffer that fills: %v %v", d.s.Phase, d.s.Trip.Cause)
	}
}

// S6: only a simulated rig runs unattended.
func TestUnattendedIsForSimulatedRigsOnly(t *testing.T) {
	for _, simulated := range []bool{false, true} {
		d := newDrill(t).ready()
		d.do(safety.Connected{At: d.now, Board: "b", BootCount: 1, Simulated: simulated})
		d.wait(500 * ms)
		d.do(safety.LimitsHeld{At: d.now, OK: true})
		d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops, Unattended: true})
		if armed := d.s.Phase == safety.Arming; armed != simulated {
			t.Errorf("simulated %v: %v", simulated, d.s.Phase)
		}
	}
}

// S7: each run asks for the checks before it.
func TestChecksComeBeforeMotion(t *testing.T) {
	env := sim.Envelope()
	env.ChecksAsked = safety.SetOf(safety.CheckLimit)
	for _, c := range []struct {
		run  safety.Check
		want []safety.Check
	}{
		{safety.CheckSign, []safety.Check{safety.CheckStopKey}},
		{safety.CheckStop, []safety.Check{safety.CheckCount, safety.CheckSign, safety.CheckStopKey}},
		{safety.CheckSilence, []safety.Check{safety.CheckCount, safety.CheckSign, safety.CheckStopKey, safety.CheckStop}},
		{safety.CheckLimit, []safety.Check{safety.CheckCount, safety.CheckSign, safety.CheckStopKey, safety.CheckStop, safety.CheckSilence}},
		{safety.CheckNone, []safety.Check{safety.CheckCount, safety.CheckSign, safety.CheckStopKey, safety.CheckStop, safety.CheckSilence, safety.CheckLimit}},
	} {
		got := env.Missing(safety.State{}, safety.Plan{Check: c.run})
		if len(got) != len(c.want) {
			t.Fatalf("%v asks for %v, want %v", c.run, got, c.want)
		}
		for i := range got {
			if got[i] != c.want[i] {
				t.Errorf("%v asks for %v, want %v", c.run, got, c.want)
			}
		}
	}
	d := newDrill(t).ready()
	d.do(safety.CheckFailed{At: d.now, Check: safety.CheckSign})
	if out := d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops}); last[safety.ArmRefused](out).Cause.Code != safety.CodeChecks {
		t.Errorf("armed without the sign check: %v", out)
	}
}

// S7: the board's timeout is judged on the board's clock; a board that fails is
// look-only, and nobody can say it passed.
func TestSilenceCheckIsJudgedHere(t *testing.T) {
	for _, c := range []struct {
		took time.Duration
		pass bool
	}{{199 * ms, false}, {200 * ms, true}, {251 * ms, true}, {270 * ms, true}, {271 * ms, false}} {
		d := newDrill(t)
		d.connect()
		d.do(safety.LimitsHeld{At: d.now, OK: true})
		for _, c := range []safety.Check{safety.CheckStopKey, safety.CheckCount, safety.CheckSign, safety.CheckStop} {
			d.do(safety.CheckPassed{At: d.now, Check: c})
		}
		d.do(safety.CheckPassed{At: d.now, Check: safety.CheckSilence})
		if d.s.Checks.Has(safety.CheckSilence) {
			t.Fatal("the silence check passed by word of mouth")
		}
		d.silence(c.took)
		if got := d.s.Checks.Has(safety.CheckSilence); got != c.pass || d.s.LookOnly == c.pass {
			t.Errorf("%v: passed %v, look-only %v", c.took, got, d.s.LookOnly)
		}
		if end := last[safety.RunEnded](d.all); end.Reason != safety.EndSilence {
			t.Errorf("%v: the run ended %v", c.took, end.Reason)
		}
		if !has[safety.SendReset](d.all) {
			t.Errorf("%v: the board was left tripped", c.took)
		}
	}
}

// S7: no heartbeat and no drive value goes out in the silence, and a board that
// does not stop by itself is stopped and look-only.
func TestSilenceIsSilentAndBounded(t *testing.T) {
	d := newDrill(t)
	d.connect()
	d.do(safety.LimitsHeld{At: d.now, OK: true})
	for _, c := range []safety.Check{safety.CheckStopKey, safety.CheckCount, safety.CheckSign, safety.CheckStop} {
		d.do(safety.CheckPassed{At: d.now, Check: c})
	}
	d.run(silencePlan(d.env))
	d.wait(time.Second)
	d.all = nil
	d.wait(300 * ms)
	if has[safety.SendHeartbeat](d.all) || has[safety.SendDrive](d.all) || has[safety.SendStop](d.all) {
		t.Errorf("not silent: %v", d.all)
	}
	d.wait(400 * ms)
	if d.s.Trip.Cause.Code != safety.CodeBoardNoTime || !d.s.LookOnly {
		t.Errorf("%v %v, look-only %v", d.s.Phase, d.s.Trip.Cause, d.s.LookOnly)
	}
}

// S8: whatever happens to board, link or laptop ends the arm for good.
func TestEverythingEndsDisarmed(t *testing.T) {
	news := map[string]func(at time.Duration) safety.Event{
		"connect":    func(at time.Duration) safety.Event { return safety.Connected{At: at, Board: "b", BootCount: 1} },
		"link lost":  func(at time.Duration) safety.Event { return safety.LinkLost{At: at} },
		"restart":    func(at time.Duration) safety.Event { return safety.BoardRestarted{At: at} },
		"wake":       func(at time.Duration) safety.Event { return safety.Wake{At: at} },
		"clock":      func(at time.Duration) safety.Event { return safety.ClockJump{At: at} },
		"clock back": func(at time.Duration) safety.Event { return safety.Tick{At: at - time.Second} },
		"late":       func(at time.Duration) safety.Event { return safety.Tick{At: at + time.Second} },
		"port":       func(at time.Duration) safety.Event { return safety.PortStalled{At: at} },
		"tape":       func(at time.Duration) safety.Event { return safety.TapeFailed{At: at, Why: "no space left"} },
		"rig file":   func(at time.Duration) safety.Event { return safety.RigChanged{At: at} },
		"panic":      func(at time.Duration) safety.Event { return safety.Panicked{At: at, Why: "test"} },
		"limits":     func(at time.Duration) safety.Event { return safety.LimitsHeld{At: at, OK: false} },
	}
	for name, e := range news {
		for _, p := range moving {
			d := newDrill(t).ready().get(p, stepPlan(t))
			d.all = nil
			d.do(e(d.now))
			if !has[safety.SendStop](d.out) || d.s.Phase != safety.Tripped {
				t.Errorf("%s in %v: %v, %v", name, p, d.s.Phase, d.out)
			}
			if count[safety.RunEnded](d.all) != 1 {
				t.Errorf("%s in %v: %d ends reported", name, p, count[safety.RunEnded](d.all))
			}
			d.all = nil
			d.now += time.Second
			d.wait(5 * time.Second)
			d.do(safety.Acknowledge{At: d.now})
			d.do(safety.Reset{At: d.now})
			d.wait(5 * time.Second)
			if has[safety.SendDrive](d.all) || has[safety.SendArm](d.all) {
				t.Errorf("%s in %v: the run was resumed", name, p)
			}
		}
	}
}

// S8: a restart shows in the boot counter of the telemetry, and an interlock
// that opens and closes again leaves the board disarmed.
func TestRestartAndInterlockAreSeenInTelemetry(t *testing.T) {
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.board.Slow.Boots = 2
	d.now += 10 * ms
	d.sample()
	if d.s.Trip.Cause.Code != safety.CodeRestarted || d.s.Checks != 0 || d.s.LimitsHeld {
		t.Errorf("%v, checks %v", d.s.Trip.Cause, d.s.Checks.List())
	}
	for _, p := range moving {
		d = newDrill(t).ready().get(p, stepPlan(t))
		d.board.Slow.Inputs = 0
		d.now += 10 * ms
		d.sample()
		d.board.Slow.Inputs = 1
		d.wait(time.Second)
		if d.s.Phase != safety.Tripped || d.s.Trip.Cause.Code != safety.CodeInterlock {
			t.Errorf("%v: %v %v", p, d.s.Phase, d.s.Trip.Cause)
		}
	}
	d = newDrill(t).ready()
	d.board.Slow.Inputs = 0
	d.wait(100 * ms)
	if out := d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops}); last[safety.ArmRefused](out).Cause.Code != safety.CodeInterlock {
		t.Errorf("armed with the guard open: %v", out)
	}
}

// S8: the arm lapses, and a board that gives up its arm is not armed.
func TestTheArmLapses(t *testing.T) {
	d := newDrill(t).ready().get(safety.Armed, stepPlan(t))
	d.wait(d.env.ArmLapse - time.Second)
	if d.s.Phase != safety.Armed {
		t.Fatalf("lapsed too early: %v", d.s.Phase)
	}
	d.wait(1100 * ms)
	if d.s.Phase != safety.Disarmed || last[safety.RunEnded](d.all).Cause.Code != safety.CodeLapsed {
		t.Errorf("%v, %v", d.s.Phase, last[safety.RunEnded](d.all))
	}
	d = newDrill(t).ready().get(safety.Armed, stepPlan(t))
	d.board.State = protocol.Off
	d.wait(100 * ms)
	if d.s.Phase != safety.Disarmed {
		t.Errorf("the board gave up its arm: %v", d.s.Phase)
	}
}

// S8: a board that drives, or is armed, and was not asked is stopped.
func TestABoardThatDrivesUnaskedIsStopped(t *testing.T) {
	for state, want := range map[protocol.State]safety.Phase{protocol.Driving: safety.Tripped, protocol.Armed: safety.Stopping} {
		d := newDrill(t).ready()
		d.wait(time.Second)
		d.board.State = state
		d.now += 10 * ms
		if out := d.sample(); !has[safety.SendStop](out) || d.s.Phase != want {
			t.Errorf("board %v: %v, %v", state, d.s.Phase, out)
		}
	}
}

// S9: gains are written at standstill, disarmed; limits have to be read back
// equal before arming.
func TestWritesOnlyAtStandstillDisarmed(t *testing.T) {
	for p := safety.Disarmed; p <= safety.Tripped; p++ {
		d := newDrill(t).ready().get(p, stepPlan(t))
		if got := has[safety.WriteAllowed](d.do(safety.GainWrite{At: d.now})); got != (p == safety.Disarmed) {
			t.Errorf("%v: allowed %v", p, got)
		}
	}
	d := newDrill(t).ready()
	d.board.Speed = 5
	d.now += 10 * ms
	d.sample()
	if has[safety.WriteAllowed](d.do(safety.GainWrite{At: d.now})) {
		t.Error("allowed while the shaft turns")
	}
	d = newDrill(t).ready()
	d.mute = true
	d.wait(200 * ms)
	if has[safety.WriteAllowed](d.do(safety.GainWrite{At: d.now})) {
		t.Error("allowed on stale telemetry")
	}
	d = newDrill(t).ready()
	d.do(safety.GainWrite{At: d.now})
	if out := d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops}); last[safety.ArmRefused](out).Cause.Code != safety.CodeWriting {
		t.Errorf("armed in the middle of a write: %v", out)
	}
}

// S9: limits are held by the board and read back equal before arming.
func TestLimitsAreHeldBeforeArming(t *testing.T) {
	d := newDrill(t).ready()
	d.do(safety.LimitWrite{At: d.now})
	d.do(safety.WriteDone{At: d.now, OK: true})
	if out := d.do(safety.ArmRequest{At: d.now, Plan: stepPlan(t), Stops: d.s.Stops}); last[safety.ArmRefused](out).Cause.Code != safety.CodeLimits {
		t.Errorf("armed before the limits were read back: %v", out)
	}
	d.do(safety.LimitsHeld{At: d.now, OK: true})
	d.arm(stepPlan(t))
}

// S10: the first cause stays, acknowledging changes nothing in the drive, and a
// reset before it is refused.
func TestATripKeepsItsFirstCause(t *testing.T) {
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.board.Bus = 9
	d.now += 10 * ms
	d.sample()
	d.now += 10 * ms
	d.do(safety.TapeFailed{At: d.now, Why: "no space left"})
	d.do(safety.Stop{At: d.now, Source: safety.ByStopKey})
	d.do(safety.LinkLost{At: d.now})
	if d.s.Trip.Cause.Code != safety.CodeBusLow || d.s.Trip.Later != 2 {
		t.Errorf("%v, %d later", d.s.Trip.Cause, d.s.Trip.Later)
	}
	if count[safety.RunEnded](d.all) != 2 || count[safety.TripLatched](d.all) != 1 { // the silence check's and this one's
		t.Errorf("%d ends, %d trips", count[safety.RunEnded](d.all), count[safety.TripLatched](d.all))
	}
	d.do(safety.OutputOff{At: d.now})
	d.do(safety.Reset{At: d.now})
	if d.s.Phase != safety.Tripped {
		t.Error("reset without acknowledgement")
	}
	if d.do(safety.Acknowledge{At: d.now}); d.s.Trip.Acked {
		t.Error("acknowledged before anybody can have read it")
	}
	d.now += safety.AckWait
	before := d.s.Phase
	for _, x := range d.do(safety.Acknowledge{At: d.now}) {
		if _, log := x.(safety.Log); !log {
			t.Errorf("acknowledging put out %T", x)
		}
	}
	if d.s.Phase != before || !d.s.Trip.Acked {
		t.Errorf("after acknowledging: %v", d.s.Phase)
	}
	if d.do(safety.Reset{At: d.now}); d.s.Phase != safety.Disarmed {
		t.Errorf("after reset: %v", d.s.Phase)
	}
}

// S10: a trip is not reset while the board has not said off.
func TestNoResetBeforeTheBoardSaysOff(t *testing.T) {
	d := newDrill(t).ready().get(safety.Running, stepPlan(t))
	d.mute = true
	d.do(safety.Wake{At: d.now})
	d.now += safety.AckWait
	d.do(safety.Acknowledge{At: d.now})
	if d.do(safety.Reset{At: d.now}); d.s.Phase != safety.Tripped {
		t.Errorf("%v", d.s.Phase)
	}
}

// S11: limits are loosened only with a typed reason, which is kept.
func TestLooseningNeedsAReason(t *testing.T) {
	d := newDrill(t).ready()
	if out := d.do(safety.LimitWrite{At: d.now, Loosens: true, Reason: "  "}); last[safety.WriteRefused](out).Cause.Code != safety.CodeNoReason {
		t.Errorf("%v", out)
	}
	out := d.do(safety.LimitWrite{At: d.now, Loosens: true, Reason: "gear checked for 3500"})
	if !has[safety.WriteAllowed](out) || words(out) != "limits loosened: gear checked for 3500" {
		t.Errorf("%v", out)
	}
}

// S12: zero values allow nothing.
func TestZeroValuesAreHarmless(t *testing.T) {
	var env safety.Envelope
	if _, err := env.Admit(safety.Plan{Segments: []safety.Segment{volts(0, 0, 1)}}); err == nil {
		t.Error("a zero envelope admits")
	}
	if (safety.Admitted{}).Valid() {
		t.Error("a zero plan is admitted")
	}
	var s safety.State
	var all []safety.Effect
	for i, e := range []safety.Event{safety.Tick{}, safety.Connected{}, safety.Lease{}, safety.LimitsHeld{OK: true},
		safety.Sample{}, safety.ArmRequest{}, safety.BoardArmed{}, safety.ClearArea{}, safety.Start{}, safety.Tick{At: time.Second}} {
		var out []safety.Effect
		if s, out = env.Step(s, e); s.Phase != safety.Disarmed && s.Phase != safety.Stopping {
			t.Errorf("event %d: %v", i, s.Phase)
		}
		all = append(all, out...)
	}
	if has[safety.SendArm](all) || has[safety.SendDrive](all) || has[safety.WriteAllowed](all) {
		t.Errorf("%v", all)
	}
}
