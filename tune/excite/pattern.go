package excite

import (
	"math"
	"time"

	"gainwright/safety"
)

// patterns reports whether the board's loop is to make a pattern: not where the
// drive has to fall slowly or by way of zero, which only the console does.
func (k Known) patterns() bool {
	return k.Patterns && k.Loop > 0 && k.FallSlope == 0 && !k.Dips
}

// loopsMost is the most loop periods of a bit or step (SPEC.md P13).
const loopsMost = 10_000

// loops is a time in loop periods of the board.
func (k Known) loops(d time.Duration) int {
	return min(max(1, int(math.Round(d.Seconds()/k.Loop))), loopsMost)
}

// patternLate is how late the board may begin a pattern: the request waits for its
// turn on the line.
const patternLate = 100 * time.Millisecond

// pattern ends the plan with a pattern about the present drive and a time after it.
func (b *builder) pattern(k Known, x safety.Pattern, after time.Duration, note string) []safety.Segment {
	lasts := x.Lasts(seconds(k.Loop)) + patternLate + after
	b.segs = append(b.segs, safety.Segment{Mode: b.mode, From: b.at, To: b.at, Duration: lasts, Note: note, Pattern: x})
	return b.segs
}

// relayOnBoard makes the relay run of r in the board's loop. High and low of the
// relay lie about their mean, its two thresholds about theirs.
func (b *builder) relayOnBoard(k Known, r RelaySpec) safety.Plan {
	mean, hysteresis := (r.High+r.Low)/2, (r.Upper-r.Lower)/2
	if mean != b.at {
		b.hold(mean, 20*time.Millisecond, "to the mean of high and low")
	}
	x := safety.Pattern{Kind: safety.PatternRelay, Amplitude: (r.High - r.Low) / 2, Middle: (r.Upper + r.Lower) / 2, Hysteresis: hysteresis, Switchings: 2 * r.Cycles}
	// A cycle is twice the way between the thresholds and twice the delays, at the
	// slope with which the speed leaves the middle. Twice that is what is allowed.
	slope := k.Gain * x.Amplitude / math.Max(k.Tau, k.Loop)
	cycle := 2 * (2*hysteresis/slope + 4*k.Loop)
	b.pattern(k, x, seconds(2*cycle*float64(r.Cycles)), "relay in the board's loop")
	return safety.Plan{Name: "relay", Purpose: "limit cycle under a relay: gain and phase where a loop would cross over", Segments: b.segs}
}
