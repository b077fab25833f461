package safety

import (
	"time"

	"gainwright/protocol/si"
)

// StopStyle is what the first press of the stop key asks for.
type StopStyle uint8

// The styles. Whether a cut coasts or shorts the winding is the board's.
const (
	StopCut  StopStyle = iota // output off at once
	StopRamp                  // to rest under power, then off; only in closed loop
)

// Input is one interlock input of the board that has to be in its working
// position (bit 1, P11.1) before arming and while armed.
type Input struct {
	Bit  uint8 // 0 to 15
	Name string
}

// LookAhead is a first-order model as plain data, used to see a speed ceiling
// coming. The zero value means no model: the slope seen is used alone.
type LookAhead struct {
	Gain     float64       // rad/s per V
	Tau      time.Duration // time constant
	DeadTime time.Duration

	// What the motor was measured to have; used where the envelope has none.
	Resistance float64  // Ω
	Ke         float64  // V·s/rad
	StallVolts si.Volts // drive above which it was seen to turn; used where it is below the envelope's. 0: not known
}

// Envelope holds the hard limits of one rig and the timing of one session. The
// zero value allows nothing.
type Envelope struct {
	VoltsMax   si.Volts     // |drive|
	SpeedMax   si.RadPerSec // |speed|
	CurrentMax si.Amps      // |current|
	BusMax     si.Volts     // 0: the bus is not judged from above
	BusMin     si.Volts     // 0: the bus is not judged from below
	TempMax    si.Celsius   // 0: not judged
	AccelMax   float64      // rad/s²
	SlewMax    float64      // V/s
	TurnsMax   float64      // turns either way from where a run began

	// Heat: ∫(I² − heat/HeatTau)dt stays under CurrentContinuous²·HeatTau, so that
	// CurrentContinuous may flow for ever and more only for a time.
	CurrentContinuous si.Amps
	HeatTau           time.Duration

	StallVolts   si.Volts // drive above which the shaft is expected to turn
	StallTime    time.Duration
	WrongWayTime time.Duration
	RestSpeed    si.RadPerSec // at or below it the shaft counts as still
	CreepMax     si.RadPerSec // ceiling of the checks that run at creep speed
	SignVolts    si.Volts     // ceiling of the sign ramp
	SignTurns    float64      // turns allowed to the sign ramp
	LockedMax    time.Duration
	InchTurns    float64 // turns of the motor shaft under drive, per press; 0: no inching
	InchTime     time.Duration

	RunTimeMax      time.Duration
	TelemetryAgeMax time.Duration
	LeaseMax        time.Duration // how old the newest frame on screen may be
	ArmLapse        time.Duration
	CountDown       time.Duration
	Heartbeat       time.Duration
	BoardTimeout    time.Duration

	// What is known of motor and rig; 0 where unknown, and then causes are told
	// apart less finely.
	Resistance   float64 // Ω
	Ke           float64 // V·s/rad
	RadPerCount  float64 // rad at the motor shaft
	Look         LookAhead
	Reverse      bool // the drive can drive both ways (two-way or four-quadrant)
	Brake        bool // the drive can brake
	VoltageDrive bool // the drive takes volts or duty; a current-mode drive is refused
	GravityLoad  bool
	BrakeListed  bool // a holding brake stands in the rig file
	Stop         StopStyle
	Inputs       []Input
	Enabling     Enabling
	ChecksAsked  Checks // beyond the usual ones: CheckLimit, CheckInterlock, CheckTicked
	Hash         string // of the rig file, for the record
	Loosened     string // typed reason why a limit is looser than the rig file's default; "" if none
}

// Times that are the same for every rig.
const (
	ClearWait     = 2 * time.Second        // the clear-area question takes no answer before
	AckWait       = 300 * time.Millisecond // a trip cannot have been read before
	HoldOff       = 500 * time.Millisecond // no arm for this long after a stop
	RampAnswer    = 50 * time.Millisecond  // for the board to say that it ramps
	RampCheck     = 200 * time.Millisecond // the speed must fall from one look to the next
	RampMax       = 3 * time.Second        // then a ramp becomes a cut
	StopAnswer    = time.Second            // for the board to say that its output is off
	ArmAnswer     = time.Second            // for the board to answer an arm
	OffConfirm    = 20 * time.Millisecond  // telemetry younger than the stop by this may confirm it
	OffSettle     = 100 * time.Millisecond // after it the board may not be seen armed any more
	LateEvent     = 50 * time.Millisecond  // events may arrive out of order by this
	TickMax       = 200 * time.Millisecond // a longer gap between events in motion is a trip
	SignCounts    = 20                     // the sign ramp ends after this many counts
	SegmentsMax   = 20000
	ResetInterval = 500 * time.Millisecond // between asks to clear an owed board trip
	// DriftShare is how far the two clocks may run apart: a share of time. The RC
	// oscillators of small boards are off by about a percent once calibrated (common
	// practice, no source).
	DriftShare = 0.01
)
