// Package safetytest judges the console limiter from outside. Its Referee
// restates the promises of SAFETY.md from events, effects and the simulated
// shaft; it never sees a safety.State and shares no code with Step.
package safetytest

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

// Violation is a promise that was not kept.
type Violation struct {
	Promise string // S-number of SAFETY.md
	At      time.Duration
	Words   string
}

// String returns one line.
func (v Violation) String() string { return fmt.Sprintf("%s at %v: %s", v.Promise, v.At, v.Words) }

// stage is how far a run has come on the way that every run has to go.
type stage int

const (
	idle    stage = iota
	armSent       // the board was asked
	armed         // the board has said yes
	clear         // nobody is near
	going         // start key pressed: count-down, then motion
)

// Referee watches one history. Make it with New; call Saw after every Step and
// Shaft as often as the simulated shaft is known.
type Referee struct {
	env  safety.Envelope
	list []Violation

	now      time.Duration
	stage    stage
	plan     safety.Plan
	lone     bool // the run was asked for unattended
	armedAt  time.Duration
	startAt  time.Duration
	drives   bool // a drive value was sent in this run
	driveAt  time.Duration
	asked0   float64 // newest drive value
	patterns int     // asked for in this run
	counts0  int64
	counted  bool
	endedAt  time.Duration // on the world's clock
	world    time.Duration // of the last look at the shaft

	stopDue bool
	stopAt  time.Duration
	ramping bool
	rampAt  time.Duration
	offAt   time.Duration
	saysOff bool // the board's newest word on its output

	asked      bool // the next event was composed at askedAt
	askedAt    time.Duration
	lastStop   time.Duration // of a Stop event
	stopSeen   bool
	tripped    bool
	trippedAt  time.Duration
	acked      bool
	connected  bool
	lookOnly   bool
	simulated  bool
	board      string
	boot       uint16
	held       bool
	checks     map[safety.Check]bool
	silentRun  bool // a silence run has ended and was not judged
	recordBad  bool
	heard      bool
	heardAt    time.Duration
	takenAt    time.Duration
	boardUS    uint64
	last       protocol.Sample
	leased     bool
	leasedAt   time.Duration
	knownTaken bool
}

// New returns a referee for sessions under env.
func New(env safety.Envelope) *Referee {
	return &Referee{env: env, checks: map[safety.Check]bool{}}
}

// Under puts another envelope in force, as a rig file read in a session does.
func (r *Referee) Under(env safety.Envelope) { r.env = env }

// Violations lists what was not kept, oldest first, at most 100.
func (r *Referee) Violations() []Violation { return r.list }

// Asked says when the next event was composed by the person who asks it: what
// they had seen of stops was as of then.
func (r *Referee) Asked(at time.Duration) { r.asked, r.askedAt = true, at }

// Taken says when the next sample was really taken, on the console's clock.
func (r *Referee) Taken(at time.Duration) { r.knownTaken, r.takenAt = true, at }

func (r *Referee) blame(promise, format string, args ...any) {
	if len(r.list) < 100 {
		r.list = append(r.list, Violation{promise, r.now, fmt.Sprintf(format, args...)})
	}
}

// Saw judges one event and the effects that came out of it.
func (r *Referee) Saw(e safety.Event, out []safety.Effect) {
	stageWas := r.stage
	must, promise := r.event(e)
	if r.stage > idle || stageWas > idle {
		if why := r.overdue(); why != "" {
			must, promise = true, why
		}
	}
	did := r.effects(e, out)
	if _, ack := e.(safety.Acknowledge); ack && stageWas == idle && !must && did.other && !did.latched {
		r.blame("S10", "an acknowledgement put out more than a line for the record")
	}
	if must && !did.stop && !(did.ramp && r.mayRamp(e)) {
		r.blame(promise, "%T was not followed by a stop", e)
	}
	if must || did.stop && stageWas > idle || did.ended {
		r.end(did.ramp && !did.stop)
		// A run that anything but the board's own word ended was no silence check,
		// whatever the board's log says of it later; it has to be made again.
		switch e.(type) {
		case safety.Sample, safety.BoardTripped, safety.OutputOff:
			r.silentRun = r.silentRun && (!did.ended || did.silence)
		default:
			r.silentRun = r.silentRun && stageWas == idle && (!did.ended || did.silence)
		}
	}
	if _, tick := e.(safety.Tick); tick && r.stopDue && !did.stop && !r.mayStillRamp() {
		r.blame("S1", "the board has not said off and no stop was sent")
	}
	r.asked, r.knownTaken = false, false
}

// end puts the permission to drive away.
func (r *Referee) end(ramp bool) {
	if r.stage > idle {
		r.endedAt = r.world
		r.stopDue, r.stopAt = true, r.now
		r.ramping, r.rampAt = ramp, r.now
		r.silentRun = r.drives && r.plan.Check == safety.CheckSilence
	}
	r.stage = idle
}

func (r *Referee) mayRamp(e safety.Event) bool {
	s, ok := e.(safety.Stop)
	return ok && s.Source == safety.ByStopKey && r.env.Stop == safety.StopRamp && r.drives &&
		r.plan.Check == safety.CheckNone && r.plan.Segments[0].Mode == safety.ModeSpeed
}

func (r *Referee) mayStillRamp() bool {
	return r.ramping && r.now-r.rampAt <= safety.RampMax && r.world-r.endedAt <= safety.RampMax+shaftSlack
}

// event notes what happened and says whether it calls for a stop at once, and by
// which promise.
func (r *Referee) event(e safety.Event) (must bool, promise string) {
	if at := e.When(); at < r.now-safety.LateEvent {
		r.now, r.heard, r.leased = at, false, false
		r.lastStop, r.stopAt, r.rampAt, r.trippedAt = at, at, at, at
		must, promise = true, "S8"
	} else {
		r.now = max(r.now, at)
	}
	armedNow := r.stage > idle
	switch e := e.(type) {
	case safety.Stop:
		r.lastStop, r.stopSeen = r.now, true
		return true, "S1"
	case safety.Key:
		return must || r.stage == going, "S2"
	case safety.Mark:
		return must || r.stage == going && r.now-r.startAt < r.env.CountDown, "S2"
	case safety.Paste:
		return must || armedNow, "S2"
	case safety.Disarm:
		return must || armedNow, "S2"
	case safety.ArmRequest:
		return must || r.stage == going, "S2"
	case safety.Acknowledge:
		r.acked = r.acked || r.tripped && r.now-r.trippedAt >= 300*time.Millisecond
		return must || r.stage == going, "S2"
	case safety.Reset:
		if r.acked {
			r.tripped, r.acked = false, false
		}
		return must || r.stage == going, "S2"
	case safety.BoardArmed:
		if r.stage == armSent {
			r.stage, r.armedAt = armed, r.now
		}
	case safety.ClearArea:
		if r.stage == going {
			return true, "S2"
		}
		if r.stage == armed && r.now-r.armedAt >= 2*time.Second {
			r.stage = clear
		}
	case safety.Start:
		if r.betweenInches() {
			r.drives = false // the next inch is counted anew
			return must, promise
		}
		if r.stage == going {
			return true, "S2"
		}
		if r.stage == clear {
			r.stage, r.startAt, r.drives = going, r.now, false
		}
	case safety.Lease:
		r.leased, r.leasedAt = true, e.At
	case safety.Sample:
		if why := r.sample(e); why != "" && armedNow {
			return true, why
		}
	default:
		if r.news(e) && armedNow {
			return true, "S8"
		}
	}
	return must, promise
}

// news notes what board, laptop and job report and says whether nothing may stay
// armed through it.
func (r *Referee) news(e safety.Event) bool {
	switch e := e.(type) {
	case safety.Connected:
		if e.Board != r.board || e.BootCount != r.boot {
			clearMap(r.checks)
		}
		r.board, r.boot = e.Board, e.BootCount
		r.connected, r.lookOnly, r.simulated = true, e.LookOnly, e.Simulated
		r.held, r.heard, r.silentRun = false, false, false
		return true
	case safety.LinkLost, safety.PortStalled:
		r.connected, r.held, r.heard = false, false, false
		return true
	case safety.BoardRestarted:
		clearMap(r.checks)
		r.held = false
		return true
	case safety.Wake, safety.ClockJump:
		r.held, r.heard, r.leased = false, false, false
		return true
	case safety.RigChanged:
		r.held = false
		for c := range r.checks {
			if c != safety.CheckStopKey {
				delete(r.checks, c)
			}
		}
		return true
	case safety.TapeFailed:
		r.recordBad = true
		return true
	case safety.TapeBack:
		r.recordBad = false
	case safety.Panicked:
		return true
	case safety.LimitsHeld:
		r.held = e.OK && (r.held || r.stage == idle)
		return !e.OK
	case safety.CheckPassed:
		if e.Check != safety.CheckSilence {
			r.checks[e.Check] = true
		}
	case safety.CheckFailed:
		delete(r.checks, e.Check)
	case safety.BoardTripped:
		return !(r.silentNow() && e.Cause == protocol.CauseBeat)
	case safety.OutputOff:
		if e.At >= r.stopAt {
			r.off()
		}
		if e.SinceBeat > 0 && r.silentRun {
			t := r.env.BoardTimeout
			ok := e.Cause == protocol.CauseBeat && e.SinceBeat*10 >= t*8 && e.SinceBeat <= t+20*time.Millisecond
			r.silentRun = false
			r.checks[safety.CheckSilence] = ok
			r.lookOnly = r.lookOnly || !ok
		}
	}
	return false
}

func (r *Referee) off() { r.stopDue, r.ramping, r.offAt, r.saysOff = false, false, r.now, true }

func (r *Referee) silentNow() bool {
	return r.drives && r.plan.SilenceAt > 0 && r.now-r.driveAt >= r.plan.SilenceAt-20*time.Millisecond
}

// overdue names the promise behind a deadline that has passed while armed.
func (r *Referee) overdue() string {
	switch {
	case !r.heard || r.now-r.heardAt > r.env.TelemetryAgeMax:
		return "S6"
	case !(r.lone && r.simulated) && (!r.leased || r.now-r.leasedAt > r.env.LeaseMax):
		return "S6"
	case (r.stage == armed || r.stage == clear) && r.now-r.armedAt > r.env.ArmLapse:
		return "S8"
	case r.plan.Inch && r.stage == going && r.now-r.armedAt > r.env.ArmLapse+r.env.CountDown+r.plan.Duration():
		return "S8"
	case r.stage == going && r.drives && !r.plan.Inch && r.now-r.driveAt > r.env.RunTimeMax:
		return "S4"
	}
	return ""
}

// betweenInches says that an inch has had its time and that no drive is asked for.
func (r *Referee) betweenInches() bool {
	return r.stage == going && r.plan.Inch && r.drives && r.asked0 == 0
}

func clearMap(m map[safety.Check]bool) {
	for k := range m {
		delete(m, k)
	}
}

// Shaft judges the simulated rig itself. powered is whether the board puts volts
// on the motor; obeys says that the board keeps its timeout, truthful that its
// encoder tells what the shaft does. at is on the world's own clock, which no
// jump of the laptop's clock moves.
func (r *Referee) Shaft(at time.Duration, speed float64, powered, obeys, truthful bool) {
	r.world = at
	late := at - r.endedAt - r.env.BoardTimeout - shaftSlack
	if obeys && powered && r.stage != going && late > 0 && !r.mayStillRamp() {
		r.list = append(r.list, Violation{"S1", at, fmt.Sprintf("the motor is under power %v after the permission ended", at-r.endedAt)})
	}
	if truthful && math.Abs(speed) > overshoot*float64(r.env.SpeedMax) {
		r.list = append(r.list, Violation{"S4", at, fmt.Sprintf("the shaft turns at %.4g rad/s, ceiling %.4g", speed, float64(r.env.SpeedMax))})
	}
}

const (
	// shaftSlack is for the wire there and for the board to look at its clock.
	shaftSlack = 150 * time.Millisecond
	// overshoot is what the shaft may be over the ceiling at, while a stop that has
	// been decided is on its way.
	overshoot = 1.1
)
