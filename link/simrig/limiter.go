package simrig

import (
	"math"

	"gainwright/protocol"
)

// The slots of the limits, in the order of the identity.
const (
	limVolts = iota
	limSpeed
	limCurrent
	limBusMax
	limBusMin
	limAccel
	limTurns
	limStall
	limWrong
	limNoCount
	limBreak
	limHeat
	limRun
	limBeat
	limSlew
)

var limitNames = []string{protocol.LimVolts, protocol.LimSpeed, protocol.LimCurrent, protocol.LimBusMax,
	protocol.LimBusMin, protocol.LimAccel, protocol.LimTurns, protocol.LimStall, protocol.LimWrong,
	protocol.LimNoCount, protocol.LimBreak, protocol.LimHeat, protocol.LimRun, protocol.LimBeat, protocol.LimSlew}

// heatTau is the time in s in which two thirds of the i²t budget cool off.
const heatTau = 60.0

// accelSpan is the shortest span over which acceleration is judged; over a
// single loop period it would be the noise of one count.
const accelSpan = int64(20e6)

// judge is the memory of the checks that need time.
type judge struct {
	fromT  int64 // span of the acceleration
	fromW  float32
	spans  bool
	still  int64 // ns since which the shaft is driven without a count
	counts int64
	driven bool
	ever   bool    // counts have come in this run
	ratio  float64 // highest amps per volt of this run: about 1/R at rest
	wrong  int64   // ns since which the speed is against the drive
	wrongW float32 // and how fast it was then
}

// judge trips on the first limit that is passed.
func (r *Rig) judge() {
	if c := r.firstCause(); c != protocol.CauseNone {
		r.halt(c, r.now)
		return
	}
	b := &r.board
	if b.state != protocol.Off && r.now-b.arm.driveAt > lapse {
		r.halt(protocol.CauseDisarmed, r.now)
	}
}

func (r *Rig) firstCause() protocol.Cause {
	b := &r.board
	l := &b.limits
	if c := r.interlock(); c != protocol.CauseNone {
		return c
	}
	if !r.wrong[FaultNoTimeout] && r.now-b.arm.beatAt > int64(float64(l.value(limBeat))*1e9) {
		return protocol.CauseBeat
	}
	if !b.state.Moving() || r.wrong[FaultUnjudged] {
		return protocol.CauseNone
	}
	over := func(x float64, slot int) bool {
		m := float64(l.value(slot))
		return m > 0 && x > m
	}
	if r.cfg.Sensors.Current {
		b.heat += b.amps * b.amps * float64(r.loop) * 1e-9
	}
	b.heat *= 1 - float64(r.loop)*1e-9/heatTau
	switch {
	case over(math.Abs(float64(b.speed)), limSpeed):
		return protocol.CauseSpeed
	case r.cfg.Sensors.Current && over(math.Abs(b.amps), limCurrent):
		return protocol.CauseCurrent
	case r.cfg.Sensors.Bus && over(b.busV, limBusMax):
		return protocol.CauseBusHigh
	case r.cfg.Sensors.Bus && b.busV < float64(l.value(limBusMin)):
		return protocol.CauseBusLow
	case over(math.Abs(float64(b.counts-b.run.counts))/r.enc.perRad/(2*math.Pi), limTurns):
		return protocol.CauseTurns
	case over(b.heat, limHeat):
		return protocol.CauseHeat
	case r.cfg.Sensors.Temperature && r.plant.winding.celsius > r.cfg.Motor.CelsMax:
		return protocol.CauseTemp
	case over(float64(r.now-b.run.from)*1e-9, limRun):
		return protocol.CauseRunTime
	case r.tooFast(over):
		return protocol.CauseAccel
	}
	if c := r.motionless(); c != protocol.CauseNone {
		return c
	}
	return r.wrongWay()
}

// interlock judges the input bits, also while armed and still.
func (r *Rig) interlock() protocol.Cause {
	if r.wrong[FaultIgnoresInputs] {
		return protocol.CauseNone
	}
	for i, name := range r.cfg.Board.Inputs {
		if r.inputs>>i&1 == 1 {
			continue
		}
		if name == "estop" {
			return protocol.CauseEStop
		}
		return protocol.CauseInterlock
	}
	return protocol.CauseNone
}

// tooFast judges the acceleration over a span of loop periods.
func (r *Rig) tooFast(over func(float64, int) bool) bool {
	b := &r.board
	j := &b.run.judge
	dt := r.now - j.fromT
	if j.spans && dt < max(accelSpan, 2*int64(r.cfg.Board.Window)*r.loop) {
		return false
	}
	bad := j.spans && over(math.Abs(float64(b.speed-j.fromW))/(float64(dt)*1e-9), limAccel)
	j.spans, j.fromT, j.fromW = true, r.now, b.speed
	return bad
}

// motionless judges drive without counts. With current measured a stalled shaft
// is told from one that turns unseen by the current: at rest it is V/R, and the
// highest current per volt of this run says what 1/R is.
func (r *Rig) motionless() protocol.Cause {
	b := &r.board
	j := &b.run.judge
	v := math.Abs(float64(b.pins.volts))
	if r.cfg.Sensors.Current && v > 0.1 {
		j.ratio = max(j.ratio, math.Abs(b.amps)/v)
	}
	if d := b.counts - j.counts; d >= 2 || d <= -2 {
		j.counts, j.still = b.counts, r.now
		j.ever = true
	}
	limit := float64(b.limits.value(limBreak))
	if limit == 0 || v < limit {
		j.driven = false
		return protocol.CauseNone
	}
	if !j.driven {
		j.driven, j.still = true, r.now
	}
	t := float64(r.now-j.still) * 1e-9
	stalled := j.ever
	if r.cfg.Sensors.Current {
		stalled = math.Abs(b.amps)/v > 0.6*j.ratio
	}
	switch {
	case stalled && t > float64(b.limits.value(limStall)):
		return protocol.CauseStall
	case !stalled && t > float64(b.limits.value(limNoCount)):
		return protocol.CauseNoCounts
	}
	return protocol.CauseNone
}

// wrongWay judges speed against the drive. A shaft that is being braked turns
// against the drive too, but slows down while it does.
func (r *Rig) wrongWay() protocol.Cause {
	b := &r.board
	j := &b.run.judge
	w := b.speed
	if float64(w)*float64(b.pins.volts) >= 0 || math.Abs(float64(w)) < 2*r.speedStep {
		j.wrong = 0
		return protocol.CauseNone
	}
	size := float32(math.Abs(float64(w)))
	if j.wrong == 0 || size < 0.9*j.wrongW-2*float32(r.speedStep) {
		j.wrong, j.wrongW = r.now, size
		return protocol.CauseNone
	}
	if float64(r.now-j.wrong)*1e-9 > float64(b.limits.value(limWrong)) {
		return protocol.CauseWrongWay
	}
	return protocol.CauseNone
}
