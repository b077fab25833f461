package safety

import "time"

// Mode says what a segment's values mean to the board.
type Mode uint8

// The modes. A run is all volts or all speed: boards ignore a switch (P6.5).
const (
	ModeNone  Mode = iota // no mode: never admitted
	ModeVolts             // open loop, values in V
	ModeSpeed             // closed loop on the board, values in rad/s at the motor shaft
)

// String returns the mode in a word or two.
func (m Mode) String() string {
	switch m {
	case ModeVolts:
		return "volts"
	case ModeSpeed:
		return "closed loop"
	}
	return "no mode"
}

// Check names something that has to be seen working in each session.
type Check uint8

// The checks. CheckStopKey is made disarmed and still, with the key alone, and
// comes before anything moves; CheckStop is the same at creep speed.
const (
	CheckNone      Check = iota
	CheckCount           // counts per turn, by hand
	CheckSign            // bounded ramp each way until the first counts
	CheckStopKey         // key → wire → board's answer, at rest
	CheckStop            // the same at creep speed
	CheckSilence         // the board's own timeout, at creep speed
	CheckLimit           // a board limit set low and provoked
	CheckInterlock       // every input seen in both states
	CheckTicked          // every line of the rig file's checklist ticked at the keyboard
	checkEnd
)

var checkWords = [...]string{"none", "count check", "sign check", "stop-key check", "stop check at creep",
	"silence check", "limit check", "interlock check", "checklist"}

// String returns the check's name.
func (c Check) String() string {
	if c < checkEnd {
		return checkWords[c]
	}
	return "unknown check"
}

// Checks is a set of checks.
type Checks uint16

// With returns the set with c in it.
func (s Checks) With(c Check) Checks { return s | 1<<c }

// Without returns the set without c.
func (s Checks) Without(c Check) Checks { return s &^ (1 << c) }

// Has reports whether c is in the set.
func (s Checks) Has(c Check) bool { return s&(1<<c) != 0 }

// List returns the checks of the set in order.
func (s Checks) List() []Check {
	var l []Check
	for c := CheckCount; c < checkEnd; c++ {
		if s.Has(c) {
			l = append(l, c)
		}
	}
	return l
}

// SetOf returns the set of the checks given.
func SetOf(cs ...Check) (s Checks) {
	for _, c := range cs {
		s = s.With(c)
	}
	return s
}

// UntilKind says what may end a segment before its time is over.
type UntilKind uint8

// The conditions.
const (
	UntilTime   UntilKind = iota // nothing but its duration
	UntilMotion                  // the shaft has moved by Until.Counts, either way
	UntilRest                    // the shaft has stood still for RestHold
	UntilAbove                   // the speed has come to Until.Speed or above
	UntilBelow                   // the speed has come to Until.Speed or below
)

// Until is a condition that ends a segment early. Its duration always ends it.
type Until struct {
	Kind   UntilKind
	Counts int64   // for UntilMotion, > 0
	Speed  float64 `json:",omitempty"` // for UntilAbove and UntilBelow, rad/s with its sign
}

// RestHold is how long the shaft must show no speed to count as at rest.
const RestHold = 200 * time.Millisecond

// Segment is one piece of a plan: the value goes in a straight line from From to
// To in Duration.
type Segment struct {
	Mode     Mode
	From, To float64 // V, or rad/s at the motor shaft
	Duration time.Duration
	Until    Until
	Note     string
	Pattern  Pattern `json:",omitzero"` // run by the board's own loop
}

// Plan is a list of segments with an end. Limits given here only tighten the
// envelope's; 0 takes the envelope's.
type Plan struct {
	Name     string
	Purpose  string
	Segments []Segment
	Check    Check // the session check that this run is, or CheckNone

	VoltsMax   float64 // V
	SpeedMax   float64 // rad/s
	CurrentMax float64 // A
	TurnsMax   float64 // turns of the motor shaft either way from where the run began

	// SilenceAt > 0 ends heartbeats and drive values from that time of the run
	// on, so that the board's own timeout shows. Only for CheckSilence.
	SilenceAt time.Duration
	// Locked says that the shaft is held: no counts are expected, and motion
	// trips instead. The time under drive is bounded by Envelope.LockedMax.
	Locked bool
	// Inch makes it a plan for inching: each press of the start key goes through
	// the segments once, the first after the count-down; then the arm waits for the
	// next press until it lapses. Limits count from the start of each inch.
	Inch bool
}

// Duration is the longest that the plan can take.
func (p Plan) Duration() (d time.Duration) {
	for _, s := range p.Segments {
		d += s.Duration
	}
	return d
}

// clone copies the plan so that nobody can change it afterwards.
func (p Plan) clone() Plan {
	p.Segments = append([]Segment(nil), p.Segments...)
	return p
}
