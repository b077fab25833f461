package sim

import (
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

// person is whoever sits in front of the console, and the job that works for
// them.
type person struct {
	since time.Duration // in the phase
}

// acts does what a person would do next in the phase shown, and sometimes what
// nobody should.
func (w *World) acts() {
	p := &w.person
	if w.fault == Hostile || w.rng.IntN(400) == 0 {
		w.anything()
		return
	}
	in := w.now - p.since
	switch w.s.Phase {
	case safety.Disarmed:
		w.prepares()
	case safety.Armed:
		switch {
		case w.rng.IntN(60) == 0:
			w.asks(safety.Disarm{})
		case !w.s.Clear && (in > 2100*ms || w.rng.IntN(10) == 0):
			w.asks(safety.ClearArea{})
		case w.s.Clear && w.rng.IntN(3) == 0:
			w.asks(safety.Start{})
		}
	case safety.CountDown:
		if w.rng.IntN(120) == 0 {
			w.asks(safety.Key{})
		}
	case safety.Running:
		switch w.rng.IntN(100) {
		case 0:
			w.asks(safety.Stop{Source: safety.ByStopKey})
		case 1:
			w.asks(safety.Mark{})
		case 2:
			w.asks(safety.Enough{})
		}
	case safety.Tripped:
		if !w.s.Trip.Acked {
			w.asks(safety.Acknowledge{})
		} else {
			w.asks(safety.Reset{})
		}
	}
}

// prepares brings the session to where a run may be armed, and arms one.
func (w *World) prepares() {
	s := &w.s
	switch {
	case !s.Connected:
		if !w.plugged {
			w.plug()
		} else if w.fault != PortStall && w.fault != Unplug {
			w.plug()
		}
	case s.RecordBad:
		if w.fault != DiskFull {
			w.asks(safety.TapeBack{})
		}
	case s.LookOnly:
		w.plug()
	case !s.LimitsHeld && !s.Writing:
		w.asks(safety.LimitWrite{Loosens: w.rng.IntN(4) == 0, Reason: []string{"", "other gear fitted"}[w.rng.IntN(2)]})
	case !s.Checks.Has(safety.CheckStop):
		for _, c := range []safety.Check{safety.CheckStopKey, safety.CheckCount, safety.CheckSign, safety.CheckStop} {
			w.asks(safety.CheckPassed{Check: c})
		}
	case w.rng.IntN(20) == 0:
		w.asks(safety.GainWrite{})
	case w.b.state == protocol.Tripped && w.rng.IntN(10) == 0:
		w.asks(safety.Stop{Source: safety.ByStopKey})
	default:
		plan := w.plans[0]
		if s.Checks.Has(safety.CheckSilence) {
			plan = w.plans[w.rng.IntN(len(w.plans))]
		}
		w.asks(safety.ArmRequest{Plan: plan, Stops: s.Stops, Unattended: w.rng.IntN(8) == 0})
	}
}

// anything is any event that a person or a bad day can bring, whatever the phase.
func (w *World) anything() {
	for range 1 + w.rng.IntN(2) {
		w.asks(w.any())
	}
}

func (w *World) any() safety.Event {
	switch w.rng.IntN(22) {
	case 0:
		return safety.Key{}
	case 1:
		return safety.Mark{}
	case 2:
		return safety.Stop{Source: safety.ByStopKey}
	case 3:
		return safety.Start{}
	case 4:
		return safety.ClearArea{}
	case 5:
		return safety.Disarm{}
	case 6:
		return safety.Acknowledge{}
	case 7:
		return safety.Reset{}
	case 8:
		return safety.Paste{}
	case 9:
		return safety.GainWrite{}
	case 10:
		return safety.LimitWrite{Loosens: true}
	case 11:
		return safety.BoardArmed{}
	case 12:
		return safety.Enough{}
	case 13:
		return safety.Stop{Source: safety.BySignal}
	case 14:
		return safety.CheckPassed{Check: safety.CheckSilence}
	case 15:
		return safety.ArmRequest{Plan: w.plans[w.rng.IntN(len(w.plans))], Stops: uint(w.rng.IntN(int(w.s.Stops) + 2))}
	case 16:
		return safety.ArmRequest{Stops: w.s.Stops}
	case 17:
		return safety.CheckFailed{Check: safety.CheckStop}
	}
	return safety.ArmRequest{Plan: w.plans[w.rng.IntN(len(w.plans))], Stops: w.s.Stops}
}

// asks sends an intent on its way from the keyboard: it arrives a little later,
// and a stop may come in between. On a laptop that is held up it arrives much
// later.
func (w *World) asks(e safety.Event) {
	late := time.Duration(1+w.rng.IntN(30)) * ms
	if w.rng.IntN(25) == 0 {
		late += time.Duration(w.rng.IntN(1500)) * ms
	}
	w.at(w.now+late, item{kind: itIntent, event: e, taken: w.now})
}

// pickFault chooses a pair of a phase and a fault. Tripped is chosen while it is
// there: to wait for it would be to wait for a trip with nothing going wrong.
func (w *World) pickFault() {
	w.next = 1 + Fault(w.rng.IntN(int(FaultEnd)-1))
	w.target = safety.Phase(w.rng.IntN(int(safety.Tripped)))
	if w.s.Phase == safety.Tripped && w.rng.IntN(2) == 0 {
		w.target = safety.Tripped
	}
}

// faults begins and ends faults, and counts what was covered.
func (w *World) faults() {
	if w.s.Phase != w.lastPhase {
		w.lastPhase, w.person.since = w.s.Phase, w.now
	}
	if w.s.Phase >= safety.Armed && w.s.Phase <= safety.Stopping {
		w.res.Active += boardStep
	}
	if w.fault != NoFault {
		if w.now >= w.faultEnds {
			w.endFault()
		}
		return
	}
	if w.s.Phase != w.target || w.now < w.faultEnds+quiet || w.rng.IntN(40) != 0 && w.s.Phase != safety.Stopping && w.s.Phase != safety.Arming {
		if w.now > w.faultEnds+patience {
			w.faultEnds = w.now - patience/2
			w.pickFault() // that phase does not come
		}
		return
	}
	w.res.Cover[w.s.Phase][w.next]++
	w.beginFault(w.next)
}

const (
	quiet    = 300 * ms         // nothing is made to go wrong for so long
	patience = 60 * time.Second // for a phase to come, then the next pair's turn
)

func (w *World) beginFault(f Fault) {
	w.fault, w.faultFrom = f, w.now
	w.faultEnds = w.now + time.Duration(50+w.rng.IntN(700))*ms
	switch f {
	case Unplug:
		w.plugged = false
		w.deliver(safety.LinkLost{At: w.clock()})
	case Restart:
		w.b.restart(w.now)
		if w.rng.IntN(2) == 0 {
			w.toLaptop(item{kind: itArrive, event: safety.BoardRestarted{}})
		}
	case DiskFull:
		w.deliver(safety.TapeFailed{At: w.clock(), Why: "no space left"})
	case ClockBack:
		w.skew -= time.Duration(100+w.rng.IntN(5000)) * ms
	case ClockOn:
		w.skew += time.Duration(300+w.rng.IntN(5000)) * ms
		if w.rng.IntN(2) == 0 {
			w.deliver(safety.ClockJump{At: w.clock()})
		}
	case Sleep:
		w.dozes = true
	case PortStall:
		w.deliver(safety.PortStalled{At: w.clock()})
	case RigEdit:
		w.deliver(safety.RigChanged{At: w.clock()})
	case PasteText:
		w.deliver(safety.Paste{At: w.clock()})
		for range 200 {
			w.asks(w.any())
		}
	}
}

func (w *World) endFault() {
	if w.fault == Sleep {
		w.dozes = false
		w.deliver(safety.Wake{At: w.clock()})
	}
	w.fault = NoFault
	w.faultFrom = w.now
	w.pickFault()
}

// stamp gives an event the time at which it is handed over.
func stamp(e safety.Event, at time.Duration) safety.Event {
	switch e := e.(type) {
	case safety.Sample:
		e.At = at
		return e
	case safety.OutputOff:
		e.At = at
		return e
	case safety.BoardRefused:
		e.At = at
		return e
	case safety.PatternRefused:
		e.At = at
		return e
	case safety.BoardArmed:
		return safety.BoardArmed{At: at}
	case safety.BoardRestarted:
		return safety.BoardRestarted{At: at}
	case safety.Ramping:
		return safety.Ramping{At: at}
	case safety.ArmRequest:
		e.At = at
		return e
	case safety.Stop:
		e.At = at
		return e
	case safety.LimitWrite:
		e.At = at
		return e
	case safety.LimitsHeld:
		e.At = at
		return e
	case safety.WriteDone:
		e.At = at
		return e
	case safety.CheckPassed:
		e.At = at
		return e
	case safety.CheckFailed:
		e.At = at
		return e
	case safety.Key:
		return safety.Key{At: at}
	case safety.Mark:
		return safety.Mark{At: at}
	case safety.Start:
		return safety.Start{At: at}
	case safety.ClearArea:
		return safety.ClearArea{At: at}
	case safety.Disarm:
		return safety.Disarm{At: at}
	case safety.Acknowledge:
		return safety.Acknowledge{At: at}
	case safety.Reset:
		return safety.Reset{At: at}
	case safety.Paste:
		return safety.Paste{At: at}
	case safety.GainWrite:
		return safety.GainWrite{At: at}
	case safety.Enough:
		return safety.Enough{At: at}
	case safety.TapeBack:
		return safety.TapeBack{At: at}
	}
	panic("sim: no stamp for this event")
}
