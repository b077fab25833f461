package job

import (
	"time"

	"gainwright/protocol/si"
)

// View is everything a screen may show, as one immutable value. The bench makes
// a new one when something changed; nobody writes to one that was handed out.
type View struct {
	Now       time.Duration // console time since the start of the session, monotonic
	Program   string        // name and version
	Simulated bool          // the board is a simulated rig: nothing real moves
	Rig       string
	Board     string // unique id
	Port      string
	Sheet     string // folder of the record

	Link    LinkView
	Drive   DriveView
	Steps   []StepView
	Current StepID // the step offered, or in work while Doing
	Doing   bool
	Busy    string  // long work that goes on, in words; "" if none
	Share   float64 // of that work, 0 to 1

	Ask        *Question
	Plan       *PlanView
	Live       *LiveView
	Found      *FoundView
	Earlier    *EarlierView
	Call       string // of a drill: what somebody calls out, "" else
	Checks     []CheckView
	Interlocks []InterlockView
	Model      *ModelView
	// Experiments are the optional ones that were done, in the order of the path.
	Experiments []ExperimentView
	Design      *DesignView
	Push        *PushView
	Verify      *VerifyView
	Card        string
	Alarms      []AlarmView
	Log         []LogLine // oldest first
	Refusal     *RefusalView
	Ports       []PortView
	Hand        bool // a simulated shaft can be turned by key
}

// LinkState says how the line to the board stands.
type LinkState string

// The states of the link.
const (
	NoPort   LinkState = "NO PORT"
	Opening  LinkState = "OPENING"
	Fresh    LinkState = "FRESH"
	Stale    LinkState = "STALE"
	LinkLost LinkState = "LINK LOST"
	LookOnly LinkState = "LOOK-ONLY"
)

// LinkView is the state of the line.
type LinkView struct {
	State     LinkState
	Why       string        // for LookOnly and LinkLost
	Age       time.Duration // of the newest sample; negative: none yet
	Frames    uint64        // good samples so far: the tick on screen advances with it only
	Rate      float64       // samples a second
	BadLines  uint64
	Lost      uint64
	Stale     uint64
	BoardBoot int
}

// DriveView is what the drive does and what may stop it.
type DriveView struct {
	Phase     string        // DISARMED, ARMING, ARMED, COUNT-DOWN, RUNNING, STOPPING, TRIPPED
	Moving    bool          // the board reports speed or applies power
	Unknown   bool          // whether it moves is not known: the link is not fresh
	Space     string        // what the stop key does now, in a few words
	ArmLeft   time.Duration // until the arm lapses
	CountLeft time.Duration // until the run begins
	ClearAsk  bool          // the clear-area question waits for its answer
	ClearWait time.Duration // until an answer will be taken
	Clear     bool          // it was answered
	Trip      string        // first cause in words, "" if not tripped
	Remedy    string        // what to do about it
	Acked     bool
	Speed     si.RadPerSec
	SpeedMax  si.RadPerSec
	Volts     si.Volts
	VoltsMax  si.Volts
	Current   *si.Amps
	Bus       *si.Volts
	Counts    *int64
	HeatShare float64 // of the heat budget, 0 to 1; negative: not known
	Inch      bool    // the arm is one for inching: each start key moves one inch
	Inches    int     // made under this arm
	Enabling  string  // position of the enabling switch, "" where none is wired
}

// Status is where a step stands.
type Status string

// The states of a step.
const (
	ToDo    Status = "to do"
	Doing   Status = "doing"
	Done    Status = "done"
	Refused Status = "refused"
	Skipped Status = "skipped"
)

// StepID names a step for good.
type StepID string

// The steps in the order of the path.
const (
	StepPort       StepID = "port"
	StepIdentity   StepID = "identity"
	StepSwap       StepID = "swap"
	StepRunUp      StepID = "run-up"
	StepAcceptance StepID = "acceptance"
	StepCount      StepID = "count"
	StepSign       StepID = "sign"
	StepStop       StepID = "stop"
	StepSilence    StepID = "silence"
	StepInterlocks StepID = "interlocks"
	StepLimits     StepID = "limits"
	StepInch       StepID = "inch"
	StepBreakaway  StepID = "breakaway"
	StepStaircase  StepID = "staircase"
	StepStep       StepID = "step"
	StepSecond     StepID = "second"
	StepFit        StepID = "fit"
	StepFound      StepID = "found"
	StepDesign     StepID = "design"
	StepPush       StepID = "push"
	StepFirstLoop  StepID = "first-loop"
	StepVerify     StepID = "verify"
	StepStore      StepID = "store"
	StepAsLeft     StepID = "as-left"
	StepCard       StepID = "card"
)

// StepView is one step of the path.
type StepView struct {
	ID     StepID
	Title  string
	For    string // what it is for, one line
	Needs  string
	Moves  string // what it will do to the motor
	Takes  string // how long
	Gives  string // what comes out
	Status Status
	Reason string // of Refused and Skipped
	Result string // of Done, one line
	Note   string // of a job file
	Ready  bool   // what it needs is there

	Optional bool // done only where somebody wants it
}

// PlanView is a plan that waits for its arm, with its forecast.
type PlanView struct {
	Name     string
	Purpose  string
	Segments int
	Mode     string  // volts or closed loop
	Drive    []Point // the profile: time, V or rad/s
	Expect   []Point // expected speed, rad/s
	Band     float64 // half width of the expected band as a share of the speed
	Unit     string  // of Drive
	Facts    []Fact
	Size     float64  // of the size chosen, 1 = as proposed
	Resize   bool     // the size can be changed
	Notes    []string // said before arming: battery, sleep
	Grave    int      // of them, from the first
}

// Fact is a quantity with its name, in words ready to show.
type Fact struct {
	Name, Value string
	Limit       string // "" where none applies
	Why         string // formula, inputs, source
	Verdict     string // "", ok, odd, over …
}

// Point is one point of a curve: time in s, value in the unit of the curve.
type Point struct{ T, V float64 }

// LiveView is the run that goes on, or the last one.
type LiveView struct {
	Name     string
	Running  bool
	Started  time.Duration
	Length   time.Duration // planned
	Elapsed  time.Duration
	Segment  string
	Speed    []Point // rad/s; a NaN value is a gap
	Volts    []Point
	Setpoint []Point // empty in open loop
	Expect   []Point // the forecast line
	SpeedMax float64 // limit lines
	VoltsMax float64
	Marks    []float64 // s
	Ended    string    // reason, once it ended
	Learn    string    // the ± that shrinks, in words
}

// FoundView is the board as it was found.
type FoundView struct {
	File    string
	Lines   []Fact
	Running []Fact
	Stored  []Fact
	Same    bool // running and stored gains are equal
}

// CheckView is a check of the session.
type CheckView struct {
	Name   string
	State  string // to do, seen working, failed
	Detail string
}

// Curve is a drawn line with a name.
type Curve struct {
	Name   string
	Points []Point
}

// ModelView is the fitted model with its judgement.
type ModelView struct {
	Verdict    string
	Reasons    []string
	Helps      string // the test that would help
	Params     []Fact
	Friction   []Fact
	Candidates []Candidate
	Data, Fit  []Point // the record it was fitted on
	Residual   []Point
	HoldData   []Point // the record it was judged on
	HoldFit    []Point
	Plausible  []Fact
	Stairs     []Point // volts, speed
}

// Candidate is one model structure that was tried.
type Candidate struct {
	Kind, NRMSE, Holdout, AICc, Verdict string
	Chosen                              bool
}

// BodeView is an open loop over frequency; T of the points is the logarithm of the
// frequency in Hz to base 10. Worst is that of the worst draw.
type BodeView struct {
	Gain, Phase           []Point // dB, degrees
	WorstGain, WorstPhase []Point
	// Crossovers, log10 Hz, and the margins there, degrees and dB; nil where there is none.
	Crossover, PhaseCross *float64
	PM, GM                *float64
}

// DesignView is the proposal.
type DesignView struct {
	MsMax      float64
	NoChange   bool   // as-found gains meet the targets
	Refused    string // why nothing is proposed
	Gains      []Fact
	Margins    []Fact
	Worst      []Fact
	Targets    []Fact
	Found      []Fact // margins of the as-found gains on the same model
	Rules      []RuleRow
	Step       []Point // forecast response, rad/s
	Drive      []Point // forecast volts
	FoundStep  []Point
	SetPoint   float64
	Notes      []string
	CanBeMoved bool // the bound can be stepped now

	Bode       BodeView
	ByHand     bool // a person is at the gains
	Keys       int  // that can be taken back
	BeforeStep []Point
}

// RuleRow is one rule beside the others.
type RuleRow struct {
	Rule, Kp, Ki, Ms, PM, GM, Overshoot, Settling, Note string
	Chosen                                              bool
}

// PushView is a change of gains.
type PushView struct {
	Rows   []PushRow
	Word   string // to type
	State  string // proposed, pushed, read back equal, reverted, failed …
	Stored string
}

// PushRow is one gain of a push.
type PushRow struct{ Name, Old, New, Unit, ReadBack string }

// VerifyView is measured against forecast.
type VerifyView struct {
	Passed   bool
	Rows     []Fact // per target: measured, limit, verdict
	Measured []Point
	Forecast []Point
	Setpoint []Point
	Earlier  []Point // last time's, where its steps were the same
	BandLow  []Point
	BandHigh []Point
	Hunting  string
}

// LogLine is one line of what happened.
type LogLine struct {
	At   time.Duration
	Text string
}

// RefusalView is a refusal with its number, cause and remedy.
type RefusalView struct {
	Number int
	What   string
	Cause  string
	Remedy string
}

// PortView is one port that could be opened.
type PortView struct {
	Path, Name, Product, Serial, Note string
}
