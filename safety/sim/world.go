// Package sim is a whole session in one goroutine: the console limiter, a wire
// with delay, a board with a motor, a laptop and a person, all driven by one
// seed. The same seed gives the same history, event for event. A referee from
// safetytest judges it.
package sim

import (
	"fmt"
	"math"
	"math/rand/v2"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/safetytest"
)

const (
	ms         = time.Millisecond
	boardStep  = 10 * ms
	tickStep   = 10 * ms
	sampleStep = 20 * ms
	frameStep  = 200 * ms
	looseTau   = 0.02
	heldTau    = 0.15
)

// Envelope is that of the simulated rig.
func Envelope() safety.Envelope {
	return safety.Envelope{
		VoltsMax: 24, SpeedMax: 240, CurrentMax: 60, BusMax: 30, BusMin: 15, TempMax: 80,
		AccelMax: 20000, SlewMax: 4800, TurnsMax: 5000, CurrentContinuous: 20, HeatTau: 30 * time.Second,
		StallVolts: 4, StallTime: 300 * ms, WrongWayTime: 150 * ms, RestSpeed: 2, CreepMax: 80,
		SignVolts: 8, SignTurns: 2, LockedMax: 2 * time.Second, InchTurns: 0.3, InchTime: time.Second,
		RunTimeMax: 20 * time.Second, TelemetryAgeMax: 150 * ms, LeaseMax: time.Second, ArmLapse: 60 * time.Second,
		CountDown: 3 * time.Second, Heartbeat: 50 * ms, BoardTimeout: 250 * ms,
		Resistance: 1, Ke: 1 / 12.0, RadPerCount: 2 * math.Pi / countsPerTurn,
		Look:    safety.LookAhead{Gain: 12, Tau: time.Duration(heldTau * 1e9), DeadTime: 10 * ms},
		Reverse: true, Brake: true, VoltageDrive: true, Stop: safety.StopRamp,
		Inputs: []safety.Input{{Bit: 0, Name: "guard"}},
	}
}

// Result is what one world saw.
type Result struct {
	Seed       uint64
	Violations []safetytest.Violation
	Active     time.Duration // in Armed, Count-down, Running or Stopping
	Cover      [safety.Tripped + 1][FaultEnd]int
	Ends       [safety.EndRefused + 1]int
	Codes      map[safety.Code]int
	Digest     uint64
}

// World is one session. Make it with New, then Run.
type World struct {
	rng   *rand.Rand
	now   time.Duration
	env   safety.Envelope
	step  func(safety.State, safety.Event) (safety.State, []safety.Effect)
	s     safety.State
	ref   *safetytest.Referee
	b     board
	plans []safety.Admitted
	seq   uint64
	queue heap
	skew  time.Duration // console clock ahead of the world
	dozes bool          // the laptop sleeps: nothing of the console runs

	fault     Fault
	target    safety.Phase // the fault begins when this phase is reached
	next      Fault
	faultEnds time.Duration
	faultFrom time.Duration
	lastPhase safety.Phase

	toBoard   time.Duration // arrival of the newest line, each way: a wire keeps order
	toConsole time.Duration
	plugged   bool
	armID     int
	k         int
	person    person
	res       Result
	Trace     func(string) // if set, is told every event and effect
}

// New makes a world from a seed. Step is the limiter under test; nil is
// Envelope().Advance.
func New(seed uint64, step func(safety.State, safety.Event) (safety.State, []safety.Effect)) *World {
	env := Envelope()
	w := &World{rng: rand.New(rand.NewPCG(seed, 0x9e3779b97f4a7c15)), env: env, step: step, ref: safetytest.New(env)}
	w.b = board{motor: motor{gain: 12, tau: heldTau, coast: 0.3, deadBand: 0.5, r: 1, ke: 1 / 12.0}, timeout: 248 * ms, boots: 1}
	w.plans = plans(env)
	w.res.Seed = seed
	w.res.Codes = map[safety.Code]int{}
	w.pickFault()
	w.at(0, item{kind: itBoard})
	w.at(ms, item{kind: itTick})
	w.at(2*ms, item{kind: itSample})
	w.at(3*ms, item{kind: itFrame})
	w.at(50*ms, item{kind: itPerson})
	w.at(10*ms, item{kind: itPlug})
	return w
}

// Run lets the world go on until its clock shows d, or a promise is broken.
func (w *World) Run(d time.Duration) Result {
	for len(w.queue) > 0 && w.now < d && len(w.ref.Violations()) == 0 {
		it := w.queue.pop()
		w.now = it.at
		w.happens(it)
	}
	w.res.Violations = w.ref.Violations()
	return w.res
}

func (w *World) at(t time.Duration, it item) {
	w.seq++
	it.at, it.seq = t, w.seq
	w.queue.push(it)
}

func (w *World) clock() time.Duration { return w.now + w.skew }

func (w *World) happens(it item) {
	switch it.kind {
	case itBoard:
		w.b.advance(w.now, w.fault)
		w.ref.Shaft(w.now, w.b.speed, w.b.powered(), w.fault.obeys(), w.calm(w.fault.truthful()))
		w.at(w.now+boardStep, item{kind: itBoard})
		w.faults()
	case itTick:
		w.at(w.now+tickStep+time.Duration(w.rng.IntN(2))*ms, item{kind: itTick})
		if !w.dozes {
			w.deliver(safety.Tick{At: w.clock()})
		}
	case itSample:
		w.at(w.now+sampleStep, item{kind: itSample})
		w.b.advance(w.now, w.fault)
		smp := w.b.sample(w.now, w.fault)
		w.toLaptop(item{kind: itArrive, event: safety.Sample{Sample: smp}, taken: w.now})
	case itFrame:
		w.at(w.now+frameStep, item{kind: itFrame})
		if w.fault != FrozenUI && !w.dozes {
			w.deliver(safety.Lease{At: w.clock()})
		}
	case itPerson:
		w.at(w.now+time.Duration(20+w.rng.IntN(120))*ms, item{kind: itPerson})
		if !w.dozes {
			w.acts()
		}
	case itPlug:
		w.plug()
	case itHear:
		w.b.advance(w.now, w.fault)
		if w.fault == Deaf || w.fault == NoTimeout {
			return
		}
		if a := w.b.receive(w.now, it.msg, w.fault); a != nil {
			w.toLaptop(item{kind: itArrive, event: a})
		}
	case itArrive:
		if !w.dozes {
			w.arrive(it)
		}
	case itIntent:
		if it.event == nil || w.dozes {
			return
		}
		w.ref.Asked(it.taken + w.skew)
		w.deliver(stamp(it.event, w.clock()))
	}
}

// calm holds the referee's ceiling back for a moment after a fault that may
// have left the shaft too fast has gone.
func (w *World) calm(truthful bool) bool { return truthful && w.now-w.faultFrom > 2*time.Second }

func (w *World) arrive(it item) {
	if !w.plugged {
		return
	}
	if it.taken > 0 {
		w.ref.Taken(it.taken + w.skew)
	}
	w.deliver(stamp(it.event, w.clock()))
}

// deliver is one step of the limiter, judged and carried out.
func (w *World) deliver(e safety.Event) {
	var out []safety.Effect
	if w.step != nil {
		w.s, out = w.step(w.s, e)
	} else {
		out = w.env.Advance(&w.s, e)
	}
	w.ref.Saw(e, out)
	w.hash(e, out)
	if w.Trace != nil {
		w.Trace(fmt.Sprintf("%v %-10v fault=%v %T%+v -> %+v", w.clock(), w.s.Phase, w.fault, e, e, out))
	}
	for _, x := range out {
		w.carry(x)
	}
}

// carry puts one effect on the wire or hands it to the job.
func (w *World) carry(x safety.Effect) {
	switch x := x.(type) {
	case safety.SendStop:
		w.toTheBoard(message{kind: msgCut})
	case safety.SendRampStop:
		w.toTheBoard(message{kind: msgRamp})
	case safety.SendDisarm:
		w.toTheBoard(message{kind: msgDisarm})
	case safety.SendArm:
		w.armID++
		w.k = 0
		w.toTheBoard(message{kind: msgArm, id: w.armID})
	case safety.SendDrive:
		w.k++
		w.toTheBoard(message{kind: msgDrive, id: w.armID, k: w.k, mode: x.Mode, value: x.Value})
	case safety.SendHeartbeat:
		w.k++
		w.toTheBoard(message{kind: msgBeat, id: w.armID, k: w.k})
	case safety.SendPattern:
		w.toTheBoard(message{kind: msgPattern, id: w.armID, value: x.Pattern.Amplitude, relay: x.Pattern.Middle})
	case safety.SendReset:
		w.toTheBoard(message{kind: msgReset})
	case safety.RunEnded:
		w.res.Ends[x.Reason]++
		if x.Reason == safety.EndSilence {
			w.at(w.now+30*ms, item{kind: itIntent, event: safety.OutputOff{Cause: w.b.offCause(), SinceBeat: w.b.since}, taken: w.now})
		}
	case safety.TripLatched:
		w.res.Codes[x.Cause.Code]++
	case safety.WriteAllowed:
		w.at(w.now+100*ms, item{kind: itIntent, event: safety.WriteDone{OK: true}, taken: w.now})
		if x.Limits {
			w.at(w.now+150*ms, item{kind: itIntent, event: safety.LimitsHeld{OK: true}, taken: w.now})
		}
	}
}

func (b *board) offCause() protocol.Cause {
	if b.trip != 0 {
		return b.trip
	}
	return b.offWhy
}

// lineDelay is how long a line takes; wires keep order, so none overtakes.
func (w *World) lineDelay(last *time.Duration) time.Duration {
	d := ms + time.Duration(w.rng.IntN(3))*ms
	if w.fault == Delay {
		d += time.Duration(w.rng.IntN(400)) * ms
	}
	*last = max(*last, w.now+d)
	return *last
}

func (w *World) lost() bool {
	if !w.plugged || w.fault == PortStall {
		return true
	}
	p := 0.002
	if w.fault == Loss {
		p = 0.7
	}
	return w.rng.Float64() < p
}

func (w *World) toTheBoard(m message) {
	if w.lost() {
		return
	}
	at := w.lineDelay(&w.toBoard)
	w.at(at, item{kind: itHear, msg: m})
	if w.fault == Repeat {
		w.at(at+ms, item{kind: itHear, msg: m})
	}
}

func (w *World) toLaptop(it item) {
	if w.lost() || w.fault == Mute {
		return
	}
	at := w.lineDelay(&w.toConsole)
	w.at(at, it)
	if w.fault == Repeat {
		w.at(at+ms, it)
	}
}

// plug connects, and does for the session what the job does first.
func (w *World) plug() {
	w.plugged = true
	w.deliver(safety.Connected{At: w.clock(), Board: "7A31", BootCount: w.b.boots, Simulated: true, Patterns: true})
}

func (w *World) hash(e safety.Event, out []safety.Effect) {
	mix := func(x uint64) { w.res.Digest = (w.res.Digest ^ x) * 0x100000001b3 }
	mix(uint64(e.When()))
	if s, ok := e.(safety.Sample); ok {
		mix(math.Float64bits(float64(s.Speed)))
	}
	for _, x := range out {
		switch x := x.(type) {
		case safety.SendDrive:
			mix(math.Float64bits(x.Value))
		case safety.SendStop:
			mix(1)
		case safety.SendHeartbeat:
			mix(2)
		case safety.Log:
			mix(uint64(len(x.Words)))
		default:
			mix(3)
		}
	}
	mix(uint64(w.s.Phase))
}

// plans are the runs that the person chooses from; the first is the silence
// check.
func plans(env safety.Envelope) []safety.Admitted {
	sec := time.Second
	volts := func(from, to float64, d time.Duration) safety.Segment {
		return safety.Segment{Mode: safety.ModeVolts, From: from, To: to, Duration: d}
	}
	speed := func(from, to float64, d time.Duration) safety.Segment {
		return safety.Segment{Mode: safety.ModeSpeed, From: from, To: to, Duration: d}
	}
	motion := volts(0, 7, 3*sec)
	motion.Until = safety.Until{Kind: safety.UntilMotion, Counts: 20}
	back := volts(0, -7, 3*sec)
	back.Until = motion.Until
	inch := volts(0, 7, 900*ms)
	inch.Until = safety.Until{Kind: safety.UntilMotion, Counts: 20}
	relay := volts(8, 8, 3*sec)
	relay.Pattern = safety.Pattern{Kind: safety.PatternRelay, Amplitude: 2, Middle: 60, Hysteresis: 2, Switchings: 200}
	rest := volts(0, 0, sec)
	rest.Until.Kind = safety.UntilRest
	var l []safety.Admitted
	for _, p := range []safety.Plan{
		{Name: "silence", Check: safety.CheckSilence, SpeedMax: 80, SilenceAt: sec, Segments: []safety.Segment{volts(0, 4, 500*ms), volts(4, 4, 3*sec)}},
		{Name: "step", Segments: []safety.Segment{volts(0, 0, 200*ms), volts(12, 12, 2*sec), volts(6, 6, sec)}},
		{Name: "staircase", Segments: []safety.Segment{volts(3, 3, sec), volts(6, 6, sec), volts(9, 9, sec), volts(-9, -9, 2*sec)}},
		{Name: "too fast", Segments: []safety.Segment{volts(0, 24, 3*sec), volts(24, 24, sec)}},
		{Name: "loop", SpeedMax: 200, Segments: []safety.Segment{speed(0, 100, sec), speed(150, 150, 2*sec), speed(50, 50, sec)}},
		{Name: "sign", Check: safety.CheckSign, TurnsMax: 2, Segments: []safety.Segment{motion, rest, back}},
		{Name: "creep", Check: safety.CheckStop, SpeedMax: 80, Segments: []safety.Segment{volts(0, 5, sec), volts(5, 5, 2*sec)}},
		{Name: "short", TurnsMax: 0.5, Segments: []safety.Segment{volts(3, 3, 2*sec)}},
		{Name: "relay", Segments: []safety.Segment{volts(0, 8, sec), relay}},
		{Name: "inch", Inch: true, SpeedMax: 80, TurnsMax: 0.6, Segments: []safety.Segment{inch, volts(0, 0, 300*ms)}},
	} {
		a, err := env.Admit(p)
		if err != nil {
			panic("sim: " + p.Name + ": " + err.Error())
		}
		l = append(l, a)
	}
	return l
}
