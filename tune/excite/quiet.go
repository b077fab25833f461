package excite

import (
	"fmt"
	"math"
	"time"

	"gainwright/safety"
)

// Levels of a locked-rotor test as shares of the breakaway volts, and how long
// each lasts. Below breakaway the shaft's own friction holds it; a clamp does no
// harm (our choice).
const (
	lockedLow, lockedHigh = 0.45, 0.78
	lockedDwell           = 0.4 // s, or a fifth of the time that the envelope allows
)

// LockedDwell is how long each level of a locked-rotor test lasts, in s.
func LockedDwell(k Known) float64 { return math.Min(lockedDwell, k.Env.LockedMax.Seconds()/5) }

// LockedRotor makes two levels of each sign with the shaft at rest. Where the drive
// goes one way only, so do the levels.
func LockedRotor(k Known) safety.Plan {
	b := volts(k.Env)
	dwell := LockedDwell(k)
	for _, dir := range k.ways() {
		start := k.StartForward
		if dir < 0 {
			start = k.StartReverse
		}
		for _, share := range []float64{lockedLow, lockedHigh} {
			b.hold(dir*share*start, seconds(dwell), fmt.Sprintf("%.0f %% of breakaway, %s", share*100, way(dir)))
		}
	}
	b.hold(0, 20*time.Millisecond, "off")
	return safety.Plan{Name: "locked rotor", Purpose: "resistance of the winding with leads and driver", Segments: b.segs, Locked: true}
}

// Reversal makes pairs of slow ramps, two each way in turn: the first of a pair
// sets out against the one before, the second does not.
func Reversal(k Known, pairs int) safety.Plan {
	b := volts(k.Env)
	until := safety.Until{Kind: safety.UntilMotion, Counts: motionCounts}
	for i := range pairs {
		dir, start := 1.0, k.StartForward
		if i%2 == 1 {
			dir, start = -1, k.StartReverse
		}
		for range 2 {
			b.ramp(dir*0.5*start, 100*time.Millisecond, until, "up "+way(dir))
			end := math.Min(1.8*start, 0.95*float64(k.Env.VoltsMax))
			b.ramp(dir*end, seconds((end-0.5*start)/math.Max(rampRate*start, 0.02)), until, "ramp "+way(dir))
			b.off("rest")
		}
	}
	return safety.Plan{Name: "reversal", Purpose: "lost motion: what the motor turns before the encoder sees it, after turning round",
		Segments: b.segs, SpeedMax: float64(k.Env.SpeedMax) / 2}
}

// WarmUp makes one long steady run.
func WarmUp(k Known, drive float64, length time.Duration) safety.Plan {
	b := volts(k.Env)
	ramp, _ := leadIn(k)
	b.ramp(drive, seconds(ramp), safety.Until{}, "up")
	b.hold(drive, length, "warm up")
	b.end(k, drive)
	return safety.Plan{Name: "warm-up", Purpose: "run until repeats agree", Segments: b.segs}
}
