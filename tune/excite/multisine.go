package excite

import (
	"math"
	"time"

	"gainwright/safety"
)

// sineLines are the multiples of the lowest frequency that a multisine has: the
// first few, then about every fifth of a decade, odd ones so that what an even
// distortion makes falls between them.
var sineLines = []int{1, 2, 3, 5, 7, 9, 13, 17, 23, 31, 39, 51, 67, 85, 109, 137}

// SineLines lists the lines up to the given one.
func SineLines(highest int) []int {
	var out []int
	for _, l := range sineLines {
		if l <= highest {
			out = append(out, l)
		}
	}
	return out
}

// multisine is one period of equal cosines at the lines, n values, scaled to peaks
// of ±1. The phases −πk(k−1)/N keep the crest factor low: M. R. Schroeder, IEEE Trans.
// Inf. Theory 16 (1970) 85 (*from memory*).
func multisine(lines []int, n int) []float64 {
	out := make([]float64, n)
	top := 0.0
	for i := range out {
		for k, l := range lines {
			phase := -math.Pi * float64((k+1)*k) / float64(len(lines))
			out[i] += math.Cos(2*math.Pi*float64(l*i%n)/float64(n) + phase)
		}
		top = math.Max(top, math.Abs(out[i]))
	}
	for i := range out {
		out[i] /= top
	}
	return out
}

// SineClock is how often the drive of a multisine changes.
const SineClock = 20 * time.Millisecond

// Multisine makes periods of a sum of sines of peak amplitude about bias, each n
// changes of the drive long. lead is when the first of them begins.
func Multisine(k Known, bias, amplitude float64, highest, n, periods int) (p safety.Plan, lead time.Duration) {
	b := volts(k.Env)
	ramp, settle := leadIn(k)
	b.ramp(bias, seconds(ramp), safety.Until{}, "to the middle")
	b.hold(bias, seconds(settle), "settle")
	for _, s := range b.segs {
		lead += s.Duration
	}
	wave := multisine(SineLines(highest), n)
	for range periods {
		for _, x := range wave {
			// A change of level, held: the limiter takes it at its own slope.
			v := bias + amplitude*x
			b.segs = append(b.segs, safety.Segment{Mode: b.mode, From: v, To: v, Duration: SineClock, Note: "sines"})
			b.at = v
		}
	}
	b.end(k, b.at)
	return safety.Plan{Name: "multisine", Purpose: "frequency response about one operating point", Segments: b.segs}, lead
}
