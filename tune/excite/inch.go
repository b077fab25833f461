package excite

import (
	"math"
	"time"

	"gainwright/safety"
)

// inchTau stands for the time constant where it is not known yet, s.
const inchTau = 0.2

// Inch makes the plan of one bounded inch each press, way +1 or -1: a kick that
// ends with the first counts, creep until the angle, then no drive long enough for
// the board to have heard of it.
func Inch(k Known, way float64) safety.Plan {
	start := k.StartForward
	if way < 0 {
		start = k.StartReverse
	}
	// Slow enough for the way that it runs on under no drive, ω·τ, to stay within
	// half an inch; the kick is given up with the first counts.
	tau := k.Tau
	if tau <= 0 {
		tau = inchTau
	}
	slow := math.Min(0.5*float64(k.Env.CreepMax), math.Pi*k.Env.InchTurns/tau)
	creep := math.Min(0.85*start+slow/k.Gain, 0.9*float64(k.Env.VoltsMax))
	top := math.Min(math.Max(1.15*start, creep), 0.9*float64(k.Env.VoltsMax))
	counts := int64(math.Max(1, math.Floor(k.Env.InchTurns*2*math.Pi/k.Env.RadPerCount)))
	first := max(1, min(motionCounts, counts/4))
	third := k.Env.InchTime / 3
	segs := []safety.Segment{
		{Mode: safety.ModeVolts, From: 0, To: way * top, Duration: third, Until: safety.Until{Kind: safety.UntilMotion, Counts: first}, Note: "start"},
		{Mode: safety.ModeVolts, From: way * creep, To: way * creep, Duration: k.Env.InchTime - third, Until: safety.Until{Kind: safety.UntilMotion, Counts: max(1, counts-first)}, Note: "to the angle"},
		{Mode: safety.ModeVolts, Duration: safety.InchRest + 100*time.Millisecond, Note: "no drive"},
	}
	return safety.Plan{Name: "inch " + sense(way), Inch: true, Purpose: "each press of g moves one bounded inch; any other key disarms", Segments: segs,
		SpeedMax: float64(k.Env.CreepMax), TurnsMax: 2 * k.Env.InchTurns}
}

func sense(way float64) string {
	if way < 0 {
		return "negative"
	}
	return "positive"
}
