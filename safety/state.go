package safety

import (
	"time"

	"gainwright/protocol"
)

// Phase is where a session stands between still and moving.
type Phase uint8

// The phases. Tripped is entered from everywhere and left only by an
// acknowledgement and then a reset.
const (
	Disarmed  Phase = iota // nothing will be commanded
	Arming                 // the board was asked to arm
	Armed                  // clear-area question, then the start key
	CountDown              // any key ends it
	Running                // a plan drives
	Stopping               // stops are sent until the board says off
	Tripped                // stops are sent until the board says off; latched
)

// String returns the phase as the screens show it.
func (p Phase) String() string {
	return [...]string{"DISARMED", "ARMING", "ARMED", "COUNT-DOWN", "RUNNING", "STOPPING", "TRIPPED"}[min(p, Tripped)]
}

// Trip is a latched stop with its first cause.
type Trip struct {
	At    time.Duration
	Cause Cause
	Acked bool
	Later int // causes that came while it was latched; they do not replace it
}

// State is all that Step remembers. The zero value is disarmed and knows no
// board. Exported fields may be read by anybody; only Step writes them.
type State struct {
	Phase Phase
	Now   time.Duration
	Stops uint // stops and trips so far; intents carry it
	Trip  Trip // meaningful while Tripped

	Connected  bool
	LookOnly   bool
	Simulated  bool
	Board      string
	BootCount  uint16
	Patterns   bool // the board's loop runs patterns
	LimitsHeld bool
	Checks     Checks
	RecordBad  bool
	Writing    bool    // a write was allowed and has not ended well
	Heat       float64 // A²s

	Last        protocol.Sample // newest fresh sample, if Heard
	Heard       bool
	HeardAt     time.Duration // its instant on the console's clock, lag taken off
	SilenceTook time.Duration // of the last silence check: last heartbeat to off; 0 unknown

	Plan      Admitted // of the arm or run; zero when Disarmed
	ArmedAt   time.Duration
	Clear     bool // the clear-area question was answered
	CountedAt time.Duration
	RunAt     time.Duration
	Segment   int
	SegmentAt time.Duration
	Value     float64 // last drive value sent, V or rad/s
	Silent    bool    // heartbeats and drive values are withheld
	Inches    int     // made under this arm

	unattended  bool
	leased      bool
	leasedAt    time.Duration
	arrived     bool
	arrivedAt   time.Duration // of the newest sample, for the lag
	boardUS     uint64
	offset      time.Duration // smallest console minus board time, drift allowed for
	arming      time.Duration
	beatAt      time.Duration
	drivenAt    time.Duration
	driven      bool // a drive value was sent in this run
	patterned   bool // the board was asked to begin the pattern of this run
	valueAt     time.Duration
	silentAt    time.Duration
	stopped     bool // a stop was asked for at some time
	stoppedAt   time.Duration
	stoppingAt  time.Duration
	ramp        rampState
	end         ending
	boardOff    bool
	boardTrip   bool
	resetOwed   bool
	resetAt     time.Duration
	silenceOpen bool // a silence run ended and its time is not known yet
	whichInput  bool // the board stopped by an input and has not said by which
	inchedAt    time.Duration
	disarmedAt  time.Duration
	pos         float64 // turns of the motor shaft since the first sample
	runPos      float64 // pos when the run began
	segPos      float64
	segCounts   int64
	moved       bool
	restSince   time.Duration
	resting     bool
	judge       judgeState
}

// ending is how the run in hand will be reported once the board is off.
type ending struct {
	due    bool
	reason EndReason
	cause  Cause
	at     time.Duration
}

// Ramping reports whether a ramp and cut is under way: the board brings the shaft
// to rest under power, and a cut would take that away.
func (s State) Ramping() bool { return s.Phase == Stopping && s.ramp.on }

type rampState struct {
	on       bool
	answered bool
	at       time.Duration
	lookAt   time.Duration
	speed    float64
}

// Age is how old the newest fresh sample is; ok is false if there is none.
func (s State) Age(now time.Duration) (age time.Duration, ok bool) {
	return now - s.HeardAt, s.Heard
}

// BoardOff reports whether the newest sample says that the output is off.
func (s State) BoardOff() bool { return s.Heard && s.boardOff }

// ArmHeld reports whether the phase is one in which the board may be armed.
func (p Phase) ArmHeld() bool { return p >= Arming && p <= Running }
