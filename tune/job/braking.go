package job

import (
	"math"

	"gainwright/safety"
	"gainwright/tune/design"
	"gainwright/tune/excite"
	"gainwright/tune/forecast"
)

// Braking gives energy back. A supply that takes none lets the bus rise, and a
// shorted winding draws what back-EMF over resistance gives.

const (
	busShare    = 0.6  // of the room between nominal and highest bus that a plan may use
	busLag      = 0.3  // of a step's size over its volts
	unseenShare = 0.01 // of the nominal bus, where the bus is not measured
	dipTau      = 0.06 // s
	tightShare  = 0.88 // of the current limit
	slopeShare  = 0.7  // of the steepest fall that the forecast allows
	dipCurrent  = 0.85 // of the current limit
	guessedOhms = 0.45 // of rated volts over the current limit, where no resistance is known: rather too low (our choice)
)

// lowOhms is the resistance, or where it is not known one that is rather too low,
// so that current and energy come out rather too high.
func (j *Job) lowOhms() float64 {
	if r := j.ohms(); r > 0 {
		return r
	}
	if j.Env.CurrentMax <= 0 {
		return 0
	}
	return guessedOhms * j.Rig.Motor.VoltageRated / float64(j.Env.CurrentMax)
}

// deadBand is the part of the sliding friction in volts that draws no current,
// forward: the driver's loss. Without a measured current half is taken for it.
func (j *Job) deadBand() float64 {
	all := j.slidingVolts()
	if e := j.electric; e != nil && e.Ke > 0 {
		return math.Max(0, all-e.R*e.Coulomb/e.Ke)
	}
	return all / 2
}

// busRoom is how many volts the bus may rise in a plan; +Inf where the supply
// takes energy back or the drive cannot brake. unseen makes it small for a record
// to be fitted whose bus is not measured.
func (j *Job) busRoom(unseen bool) float64 {
	if j.Rig.Drive.SupplySinks || !j.Env.Brake || j.Env.BusMax <= 0 {
		return math.Inf(1)
	}
	room := busShare * (float64(j.Env.BusMax) - j.Rig.Drive.BusNominal)
	if unseen && !j.ID.BusMeasured {
		// The board then works out its duty from the nominal bus: what the bus rises
		// by, the drive is wrong by.
		room = math.Min(room, unseenShare*j.Rig.Drive.BusNominal)
	}
	return room
}

// brakeVolts is the back-EMF up to which a shorted winding keeps the current.
func (j *Job) brakeVolts() float64 {
	return currentShare * float64(j.Env.CurrentMax) * j.lowOhms()
}

// braked makes a plan whose drive falls no faster than the forecast of the bus
// allows.
func (j *Job) braked(of func(excite.Known) safety.Plan) (excite.Known, safety.Plan) {
	k := j.sizing()
	k.BrakeVolts = j.brakeVolts()
	plan, room := of(k), j.busRoom(true)
	if loop := j.ID.Loop.Seconds(); j.ID.BusMeasured && loop > 0 && j.Tau > 0 && j.capture(plan) != nil {
		// The duty is worked out from the bus of the loop before. While the bus moves,
		// the volts are off by a loop's worth of its change, against a step that acts
		// for a time constant. Telemetry does not resolve that; there a quick fall is
		// worth more.
		room = math.Min(room, unseenShare*j.Rig.Drive.BusNominal*math.Max(1, busLag*j.Tau/loop))
	}
	if math.IsInf(room, 1) {
		return k, plan
	}
	known := j.known()
	known.Resistance, known.DeadBand = j.lowOhms(), j.deadBand()
	over := func(p safety.Plan) bool {
		f, err := forecast.Of(p, known)
		return err == nil && (f.BusRise.Known() && float64(f.BusRise) > room || k.Dips && f.PeakCurrent.Known() && float64(f.PeakCurrent) > dipCurrent*float64(j.Env.CurrentMax))
	}
	if !over(plan) {
		return k, plan
	}
	// A dip needs a few values of the console, and a winding that may be shorted.
	if j.Tau >= dipTau && j.Bias+j.Amplitude <= k.BrakeVolts {
		k.Dips = true
		if plan = of(k); !over(plan) {
			return k, plan
		}
		k.Dips = false
	}
	for slope := float64(j.Env.VoltsMax) / 0.02; ; slope /= 1.6 {
		k.FallSlope = slope
		if plan = of(k); !over(plan) || slope < 1e-3 {
			// What comes back grows quickly with the slope, and friction is known to
			// some tens of percent.
			k.FallSlope = slopeShare * slope
			return k, of(k)
		}
	}
}

// tight reports whether the forecast of a plan comes nearer to the current limit
// than the model is good for.
func (j *Job) tight(p safety.Plan) bool {
	f, err := forecast.Of(p, j.known())
	return err == nil && f.PeakCurrent.Known() && float64(f.PeakCurrent) > tightShare*float64(j.Env.CurrentMax)
}

// loopBus is the rise of the bus in a forecast of the closed loop, in V.
func (j *Job) loopBus(r design.Run) float64 {
	ohms, ke, farads := j.lowOhms(), j.backEMF(), j.Rig.Drive.BusCapacitance*1e-6
	if ohms <= 0 || farads <= 0 {
		return 0
	}
	bank, most, dead := 0.0, 0.0, j.deadBand()
	for i, u := range r.Drive {
		winding := math.Copysign(math.Max(0, math.Abs(u)-dead), u)
		bank = math.Max(0, bank-u*(winding-ke*r.Speed[i])/ohms*r.Period)
		most = math.Max(most, bank)
	}
	v := j.Rig.Drive.BusNominal
	return math.Sqrt(v*v+2*most/farads) - v
}
