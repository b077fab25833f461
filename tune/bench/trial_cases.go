package bench

import (
	"bytes"
	"math/rand/v2"
	"time"

	"gainwright/link/simrig"
	"gainwright/protocol"
	"gainwright/safety"
)

// Groups of causes that mean the same to a person.
var (
	linkCauses  = []safety.Code{safety.CodeStale, safety.CodeLinkLost, safety.CodeBoardTripped, safety.CodeBoardOff}
	stillCauses = []safety.Code{safety.CodeStalled, safety.CodeNoCounts, safety.CodeStallOrDead, safety.CodeBoardTripped, safety.CodeSlip}
)

// faultCases is the table of faults.
func faultCases() []faultCase {
	inject := func(kind string, value float64) func(*trial, *Virtual) {
		return func(_ *trial, v *Virtual) { v.rig.Inject(kind, value) }
	}
	event := func(e func(now time.Duration) safety.Event) func(*trial, *Virtual) {
		return func(_ *trial, v *Virtual) { v.s.core.Do(e(v.s.now)) }
	}
	stop := func(source safety.StopSource) func(*trial, *Virtual) {
		return func(_ *trial, v *Virtual) { v.s.core.Stop(v.s.now, source) }
	}
	rx := func(f func(b []byte) []byte) func(*trial, *Virtual) { return func(t *trial, _ *Virtual) { t.rx = f } }
	gone := func(t *trial, _ *Virtual) { t.dead = true }
	only := func(c ...safety.Code) []safety.Code { return c }
	asked, otherKey, paste := only(safety.CodeAsked), only(safety.CodeOtherKey), only(safety.CodePaste)

	list := []faultCase{
		// Rig.
		{name: "shaft jams", where: "rig", when: inVolts, do: inject(simrig.FaultStalled, 0), want: stillCauses},
		{name: "shaft jams", where: "rig", when: inLoop, do: inject(simrig.FaultStalled, 0), want: append(only(safety.CodeCurrent, safety.CodeAccel), stillCauses...)},
		{name: "encoder dies", where: "rig", when: inVolts, do: inject(simrig.FaultDeadEncoder, 0), want: stillCauses},
		{name: "encoder dies", where: "rig", when: inLoop, do: inject(simrig.FaultDeadEncoder, 0), want: stillCauses},
		{name: "encoder channels swap", where: "rig", when: inVolts, do: inject(simrig.FaultReversed, 0), want: only(safety.CodeWrongWay, safety.CodeBoardTripped, safety.CodeAccel)},
		{name: "encoder channels swap", where: "rig", when: inLoop, do: inject(simrig.FaultReversed, 0), want: only(safety.CodeWrongWay, safety.CodeBoardTripped, safety.CodeAccel)},
		{name: "encoder coupling slips by 60 %", where: "rig", when: inLoop, do: inject(simrig.FaultSlip, 0.6), want: only(safety.CodeSlip, safety.CodeBoardTripped, safety.CodeSpeed, safety.CodeSpeedAhead)},
		{name: "load comes off", where: "rig", when: inLoop, do: inject(simrig.FaultLoose, 0.2), want: only(safety.CodeLoose, safety.CodeAccel, safety.CodeCurrent, safety.CodeBoardTripped, safety.CodeForecast)},
		{name: "supply folds back at 0.3 A", where: "rig", when: inVolts, do: inject(simrig.FaultSupplyFolds, 0.3), want: only(safety.CodeBusLow, safety.CodeBoardTripped)},
		{name: "supply folds back at 0.3 A", where: "rig", when: inLoop, do: inject(simrig.FaultSupplyFolds, 0.3), want: only(safety.CodeBusLow, safety.CodeBoardTripped)},
		{name: "interlock opens", where: "rig", when: inVolts, do: func(_ *trial, v *Virtual) { v.rig.SetInput("estop", false) }, want: only(safety.CodeBoardTripped, safety.CodeInterlock)},
		{name: "interlock opens", where: "rig", when: armed, do: func(_ *trial, v *Virtual) { v.rig.SetInput("estop", false) }, want: only(safety.CodeBoardTripped, safety.CodeInterlock, safety.CodeBoardOff)},
		// Board.
		{name: "board restarts", where: "board", when: inVolts, do: inject(simrig.FaultRestarts, 0), want: append(only(safety.CodeRestarted), linkCauses...)},
		{name: "board restarts", where: "board", when: inLoop, do: inject(simrig.FaultRestarts, 0), want: append(only(safety.CodeRestarted), linkCauses...)},
		{name: "board restarts", where: "board", when: armed, do: inject(simrig.FaultRestarts, 0), want: append(only(safety.CodeRestarted), linkCauses...)},
		{name: "board restarts", where: "board", when: atRest, do: inject(simrig.FaultRestarts, 0)},
		{name: "board hangs: says and hears nothing", where: "board", when: inVolts, do: func(t *trial, v *Virtual) {
			v.rig.Inject(simrig.FaultMute, 0)
			v.rig.Inject(simrig.FaultDeaf, 0)
		}, want: linkCauses},
		{name: "board ignores the cut, stop key", where: "board", when: inVolts, do: func(t *trial, v *Virtual) {
			v.rig.Inject(simrig.FaultIgnoresCut, 0)
			t.uncut = true
			v.s.core.Stop(v.s.now, safety.ByStopKey)
		}, want: append(only(safety.CodeNoStopAnswer, safety.CodeBoardTripped), asked...)},
		{name: "telemetry repeats its number", where: "board", when: inVolts, do: inject(simrig.FaultStaleSequence, 0), want: linkCauses},
		{name: "every check code wrong", where: "board", when: inVolts, do: inject(simrig.FaultWrongCRC, 0), want: linkCauses},
		// Wire.
		{name: "cable pulled", where: "wire", when: inVolts, do: func(t *trial, _ *Virtual) { t.rx, t.tx = nothing, nothing }, want: linkCauses},
		{name: "cable pulled", where: "wire", when: inLoop, do: func(t *trial, _ *Virtual) { t.rx, t.tx = nothing, nothing }, want: linkCauses},
		{name: "cable pulled", where: "wire", when: counting, do: func(t *trial, _ *Virtual) { t.rx, t.tx = nothing, nothing }, want: linkCauses},
		{name: "cable pulled", where: "wire", when: atRest, do: func(t *trial, _ *Virtual) { t.rx, t.tx = nothing, nothing }},
		{name: "cable pulled just before the stop key", where: "wire", when: inVolts, do: func(t *trial, v *Virtual) {
			t.rx, t.tx = nothing, nothing
			v.s.core.Stop(v.s.now, safety.ByStopKey)
		}, want: append(only(safety.CodeNoStopAnswer), append(asked, linkCauses...)...)},
		{name: "line from the board broken", where: "wire", when: inVolts, do: rx(nothing), want: linkCauses},
		{name: "line to the board broken", where: "wire", when: inVolts, do: func(t *trial, _ *Virtual) { t.tx = nothing }, want: linkCauses},
		{name: "line to the board broken", where: "wire", when: inLoop, do: func(t *trial, _ *Virtual) { t.tx = nothing }, want: linkCauses},
		{name: "half of the bytes to the board lost", where: "wire", when: inVolts, do: func(t *trial, _ *Virtual) { t.tx = losing(0.5) }, want: linkCauses},
		{name: "one byte in 200 flipped, both ways", where: "wire", when: inVolts, do: func(t *trial, _ *Virtual) { t.rx, t.tx = flipping(0.005), flipping(0.005) }, goesOn: true},
		{name: "every line twice", where: "wire", when: inVolts, do: func(t *trial, _ *Virtual) { t.rx, t.tx = twice(), twice() }, goesOn: true},
		{name: "every line cut in half", where: "wire", when: inVolts, do: rx(halves), want: linkCauses},
		{name: "a line that never ends", where: "wire", when: inVolts, do: rx(endless), want: linkCauses},
		{name: "8-bit garbage", where: "wire", when: inVolts, do: rx(garbage(1)), want: linkCauses},
		{name: "8-bit garbage at ten times the rate", where: "wire", when: inVolts, do: rx(garbage(10)), want: linkCauses},
		{name: "8-bit garbage", where: "wire", when: atRest, do: rx(garbage(1))},
		{name: "old telemetry over and over, ten times the rate", where: "wire", when: inVolts, do: rx(flood()), want: linkCauses},
		{name: "wrong line rate from now on", where: "wire", when: inVolts, do: func(t *trial, _ *Virtual) { t.rx, t.tx = garbage(1), nothing }, want: linkCauses},
		{name: "telemetry arrives 400 ms late", where: "wire", when: inVolts, do: func(t *trial, v *Virtual) { t.rx = t.late(v, 400*time.Millisecond) }, want: linkCauses},
		// Laptop.
		{name: "program killed", where: "laptop", when: inVolts, do: gone},
		{name: "program killed", where: "laptop", when: inLoop, do: gone},
		{name: "program killed", where: "laptop", when: counting, do: gone},
		{name: "program held up for 1 s", where: "laptop", when: inVolts, do: func(t *trial, v *Virtual) { t.stuck = v.s.now + time.Second }, want: append(only(safety.CodeLate), linkCauses...)},
		{name: "laptop slept", where: "laptop", when: inVolts, do: event(func(at time.Duration) safety.Event { return safety.Wake{At: at} }), want: only(safety.CodeWake)},
		{name: "laptop slept", where: "laptop", when: armed, do: event(func(at time.Duration) safety.Event { return safety.Wake{At: at} }), want: only(safety.CodeWake)},
		{name: "clock steps back", where: "laptop", when: inVolts, do: event(func(at time.Duration) safety.Event { return safety.ClockJump{At: at} }), want: only(safety.CodeClock)},
		{name: "disk full: the tape cannot be written", where: "laptop", when: inVolts, do: event(func(at time.Duration) safety.Event {
			return safety.TapeFailed{At: at, Why: "no space left on device"}
		}), want: only(safety.CodeTape)},
		{name: "a write to the port hangs", where: "laptop", when: inVolts, do: func(t *trial, v *Virtual) {
			t.rx, t.tx = nothing, nothing
			v.s.core.Do(safety.PortStalled{At: v.s.now})
		}, want: append(only(safety.CodePort), linkCauses...)},
		// Console.
		{name: "screen frozen", where: "console", when: inVolts, do: func(t *trial, _ *Virtual) { t.frozen = true }, want: only(safety.CodeLease)},
		{name: "screen frozen", where: "console", when: inLoop, do: func(t *trial, _ *Virtual) { t.frozen = true }, want: only(safety.CodeLease)},
		{name: "screen frozen", where: "console", when: armed, do: func(t *trial, _ *Virtual) { t.frozen = true }, want: only(safety.CodeLease)},
		{name: "a goroutine panics", where: "console", when: inVolts, do: func(t *trial, v *Virtual) {
			v.rig.Receive([]byte{protocol.Cut}) // the panic hook's stop, ahead of everything
			t.cutAt, t.dead = v.s.now, true
		}},
		{name: "rig file changed", where: "console", when: inVolts, do: event(func(at time.Duration) safety.Event { return safety.RigChanged{At: at} }), want: only(safety.CodeRigFile)},
		// Operator.
		{name: "stop key", where: "operator", when: inVolts, do: stop(safety.ByStopKey), want: asked},
		{name: "stop key", where: "operator", when: inLoop, do: stop(safety.ByStopKey), want: asked},
		{name: "stop key, ramp and cut", where: "operator", when: inLoop, do: stop(safety.ByStopKey), want: asked, style: safety.StopRamp},
		{name: "stop key, ramp and cut, cable pulled", where: "operator", when: inLoop, do: func(t *trial, v *Virtual) {
			v.s.core.Stop(v.s.now, safety.ByStopKey)
			t.rx, t.tx = nothing, nothing
		}, want: append(asked, linkCauses...), style: safety.StopRamp},
		{name: "stop key", where: "operator", when: counting, do: stop(safety.ByStopKey), want: asked},
		{name: "stop key", where: "operator", when: armed, do: stop(safety.ByStopKey), want: asked},
		{name: "another key", where: "operator", when: inVolts, do: event(func(at time.Duration) safety.Event { return safety.Key{At: at} }), want: otherKey},
		{name: "another key", where: "operator", when: counting, do: event(func(at time.Duration) safety.Event { return safety.Key{At: at} }), want: otherKey},
		{name: "200 characters pasted", where: "operator", when: armed, do: event(func(at time.Duration) safety.Event { return safety.Paste{At: at} }), want: paste},
		{name: "200 characters pasted", where: "operator", when: inVolts, do: event(func(at time.Duration) safety.Event { return safety.Paste{At: at} }), want: append(otherKey, paste...)},
		{name: "disarms", where: "operator", when: armed, do: event(func(at time.Duration) safety.Event { return safety.Disarm{At: at} }), want: only(safety.CodeDisarmed)},
		{name: "arms and goes away", where: "operator", when: armed, want: only(safety.CodeLapsed)},
		{name: "leaves the program", where: "operator", when: inVolts, do: stop(safety.ByQuit), want: asked},
		{name: "hang-up or terminal closed", where: "operator", when: inVolts, do: stop(safety.BySignal), want: asked},
	}
	return list
}

func nothing([]byte) []byte { return nil }

// twice repeats every whole line. The cut byte is no line.
func twice() func([]byte) []byte {
	var line []byte
	return func(b []byte) []byte {
		var out []byte
		for _, c := range b {
			out, line = append(out, c), append(line, c)
			if c == protocol.Cut {
				line = nil
			} else if c == '\n' {
				out, line = append(out, line...), nil
			}
		}
		return out
	}
}

// losing drops a share of the bytes.
func losing(share float64) func([]byte) []byte {
	rng := rand.New(rand.NewPCG(3, 1))
	return func(b []byte) []byte {
		var out []byte
		for _, c := range b {
			if rng.Float64() >= share {
				out = append(out, c)
			}
		}
		return out
	}
}

// flipping turns one bit of a share of the bytes.
func flipping(share float64) func([]byte) []byte {
	rng := rand.New(rand.NewPCG(3, 2))
	return func(b []byte) []byte {
		out := bytes.Clone(b)
		for i := range out {
			if rng.Float64() < share {
				out[i] ^= 1 << rng.IntN(8)
			}
		}
		return out
	}
}

// halves leaves out the second half of every line, its end included.
func halves(b []byte) []byte {
	var out []byte
	for _, l := range bytes.SplitAfter(b, []byte{'\n'}) {
		out = append(out, l[:len(l)/2]...)
	}
	return append(out, '\n')
}

func endless(b []byte) []byte { return bytes.ReplaceAll(b, []byte{'\n'}, []byte{'x'}) }

// garbage replaces what comes by times as many bytes of noise.
func garbage(times int) func([]byte) []byte {
	rng := rand.New(rand.NewPCG(3, 3))
	return func(b []byte) []byte {
		out := make([]byte, len(b)*times)
		for i := range out {
			out[i] = byte(rng.Uint32())
		}
		return out
	}
}

// flood keeps the first 2000 bytes that come and then says nothing else, ten
// times as much as came.
func flood() func([]byte) []byte {
	var kept []byte
	return func(b []byte) []byte {
		if len(kept) < 2000 {
			kept = append(kept, b...)
			return b
		}
		if len(b) == 0 {
			return nil
		}
		return bytes.Repeat(kept, 1+10*len(b)/len(kept))
	}
}

// late delays what comes.
func (t *trial) late(v *Virtual, by time.Duration) func([]byte) []byte {
	return func(b []byte) []byte {
		if len(b) > 0 {
			t.delayed = append(t.delayed, delayed{v.s.now + by, bytes.Clone(b)})
		}
		var out []byte
		for len(t.delayed) > 0 && t.delayed[0].due <= v.s.now {
			out = append(out, t.delayed[0].data...)
			t.delayed = t.delayed[1:]
		}
		return out
	}
}
