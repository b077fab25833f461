package safety

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
)

// PatternKind says what the board's own loop makes of a segment.
type PatternKind uint8

// The kinds, as SPEC.md P13 has them.
const (
	PatternNone     PatternKind = iota
	PatternRelay                // with hysteresis, about a speed
	PatternSequence             // binary sequence of maximal length
	PatternSquare               // up and down in turn
)

// String returns the kind in a word or two.
func (k PatternKind) String() string {
	return [...]string{"none", "relay", "binary sequence", "square wave"}[min(k, PatternSquare)]
}

// Pattern is what the board's loop adds to the volts of a segment and takes from
// them, at its own period. The console goes on renewing the volts, so that every
// limit, the heartbeat and the stop are those of any run.
type Pattern struct {
	Kind      PatternKind
	Amplitude float64 // V either way about the segment's volts

	// Of a relay: up once the speed is at Middle − Hysteresis or below, down once it
	// is at Middle + Hysteresis or above, over with the last of the switchings.
	Middle     float64 `json:",omitempty"` // rad/s
	Hysteresis float64 `json:",omitempty"` // rad/s
	Switchings int     `json:",omitempty"`

	Loops  int    `json:",omitempty"` // loop periods of one bit or one step
	Stages int    `json:",omitempty"` // of the register of a sequence
	Seed   uint16 `json:",omitempty"` // of that register
	Steps  int    `json:",omitempty"` // of a square wave, either way
}

// reach is the largest drive of a segment, in V or rad/s, its pattern included.
func (s Segment) reach() float64 {
	return math.Max(math.Abs(s.From), math.Abs(s.To)) + s.Pattern.Amplitude
}

// HasPattern reports whether the board's loop has a part in the plan.
func (p Plan) HasPattern() bool {
	n := len(p.Segments)
	return n > 0 && p.Segments[n-1].Pattern.Kind != PatternNone
}

// admitPattern holds a pattern to a drive that does not move and to the end of its
// plan: nothing that comes after it can be driven with the board still adding to it.
// The reach is judged with the segment's volts.
func (env Envelope) admitPattern(p Plan, i int, s Segment) error {
	n, x := i+1, s.Pattern
	if x.Kind == PatternNone {
		if x != (Pattern{}) {
			return refused(n, "it has the numbers of a pattern and no pattern", "leave them out")
		}
		return nil
	}
	ranges := map[PatternKind][]struct {
		name     string
		v        float64
		min, max float64
	}{
		PatternRelay: {{"middle, rad/s", x.Middle, -1e5, 1e5}, {"hysteresis, rad/s", x.Hysteresis, 1e-3, 1e5}, {"number of switchings", float64(x.Switchings), 1, 10_000}},
		PatternSequence: {{"number of stages", float64(x.Stages), 3, 16}, {"loops of a bit", float64(x.Loops), 1, 10_000},
			{"seed", float64(x.Seed), 1, math.Exp2(float64(x.Stages)) - 1}},
		PatternSquare: {{"loops of a step", float64(x.Loops), 1, 10_000}, {"number of steps", float64(x.Steps), 1, 10_000}},
	}[x.Kind]
	switch {
	case ranges == nil:
		return refused(n, "its pattern is of no known kind", "use a relay, a binary sequence or a square wave")
	case s.Mode != ModeVolts || s.From != s.To:
		return refused(n, "its pattern is about a drive that moves", "put it about steady volts")
	case i != len(p.Segments)-1:
		return refused(n, "something comes after its pattern", "make it the last segment")
	case p.Check != CheckNone || p.Inch || p.Locked:
		return refused(n, "it has a pattern and is a check, an inch or made with the shaft held", "leave the pattern out")
	case !(x.Amplitude >= 1e-3 && x.Amplitude <= 100):
		return refused(n, "the amplitude of its pattern is not between 1 mV and 100 V", "give one")
	case !env.Reverse && s.From < x.Amplitude:
		return refused(n, "its pattern drives backwards and the drive turns one way only", "make it smaller, or its middle larger")
	}
	for _, r := range ranges {
		if !(r.v >= r.min && r.v <= r.max) {
			return refused(n, fmt.Sprintf("the %s of its pattern is %.6g, not from %.6g to %.6g", r.name, r.v, r.min, r.max), "give one in that range")
		}
	}
	return nil
}

// askPattern has the board's loop begin once the segment's own volts are out.
func (m *machine) askPattern(value float64) {
	s := m.Plan.plan.Segments[m.Segment]
	if s.Pattern.Kind == PatternNone || m.patterned || math.Abs(value-s.From) >= 1e-3 {
		return
	}
	m.patterned = true
	m.do(SendPattern{Volts: value, Pattern: s.Pattern})
}

// pattern is the amplitude that the board's loop may be adding now, in V.
func (m *machine) pattern() float64 {
	if !m.patterned || m.Phase != Running {
		return 0
	}
	return m.Plan.plan.Segments[m.Segment].Pattern.Amplitude
}

// volts is what is applied, or may be a moment from now by the pattern, whichever
// is the larger.
func (m *machine) volts(applied float64) float64 {
	if more := m.pattern(); more > 0 {
		if most := math.Abs(m.Value) + more; most > math.Abs(applied) {
			return math.Copysign(most, m.Value)
		}
	}
	return applied
}

// patternRefused ends a run whose pattern the board did not begin. One that comes
// after the run is nothing.
func (m *machine) patternRefused(words string) {
	if m.Phase == Running && m.patterned {
		m.stopping(EndStopped, cause(CodeNoPattern, words))
	}
}

// Levels are the bits of a sequence or the steps of a square wave in order, true is
// up; nil for a relay, whose course the motor decides.
func (x Pattern) Levels() []bool {
	switch x.Kind {
	case PatternSequence:
		return protocol.Sequence(x.Stages, x.Seed)
	case PatternSquare:
		l := make([]bool, x.Steps)
		for i := range l {
			l[i] = i%2 == 0
		}
		return l
	}
	return nil
}

// Lasts is how long a pattern lasts at a loop period, 0 where that is not
// known beforehand.
func (x Pattern) Lasts(loop time.Duration) time.Duration {
	switch x.Kind {
	case PatternSequence:
		return time.Duration(x.Loops*(1<<x.Stages-1)) * loop
	case PatternSquare:
		return time.Duration(x.Loops*x.Steps) * loop
	}
	return 0
}
