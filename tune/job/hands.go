package job

import (
	"errors"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/trace"
)

// Errors that end a step without ending the job.
var (
	// ErrDeclined says that the person put the plan or the question aside.
	ErrDeclined = errors.New("put aside")
	// ErrNoCut says that the stop key was pressed and the board did not answer.
	ErrNoCut = errors.New("the board does not answer the cut byte")
	// ErrOver says that the session ends.
	ErrOver = errors.New("the session ends")
)

// Hands does for a job what it cannot do itself. All methods block until the
// thing is done; they are called from one goroutine.
type Hands interface {
	// Now is console time since the start of the session.
	Now() time.Duration
	// Wall is the time of day, for the record only.
	Wall() time.Time

	// Ask puts a question to the person and waits for the answer.
	Ask(Question) (Answer, error)
	// Request asks the board; a refusal is a *protocol.RefusedError.
	Request(verb, args string) (protocol.Answer, error)
	// Connected takes an identity into use. Look is a reason to keep the board
	// look-only, or "".
	Connected(id protocol.Identity, look string)
	// Stream says that telemetry was asked for.
	Stream(on bool)
	// Rig puts an envelope in force; the limiter disarms.
	Rig(env safety.Envelope)
	// Look gives the limiter a model to look ahead with. It only tightens.
	Look(safety.LookAhead)
	// LimitsHeld says that the board holds the limits of that crc, read back equal.
	LimitsHeld(crc uint16)
	// Input waits until the board reports the inputs of q.Set as they are asked
	// for, and returns when it did.
	Input(q Question) (time.Duration, error)
	// Laptop tells of battery and sleep what the system tells.
	Laptop() Laptop
	// Check says whether a check was seen working.
	Check(c safety.Check, passed bool)
	// Line says how the line and the board have done since the session began.
	Line() LineState
	// Permit asks the limiter whether a write may be done now.
	Permit(safety.Event) error
	// Wrote ends a write that was permitted.
	Wrote(ok bool)

	// Run shows the plan, has it armed and started, runs it and returns what was
	// measured. It returns ErrDeclined if the person puts it aside, and a Result
	// with its reason in every other case.
	Run(Run) (Result, error)
	// StopKey waits for a stop by key at rest and returns its times, or ErrNoCut.
	StopKey(q Question) (StopSeen, error)
	// ClearTrip waits until a latched trip was acknowledged and reset.
	ClearTrip(q Question) error
	// Watch collects samples at rest for d.
	Watch(d time.Duration) ([]protocol.Sample, error)
	// PowerCycle has the board switched off and on and waits until it speaks.
	PowerCycle(q Question) error

	// Keep writes an entry into the record.
	Keep(kind, name string, v any) error
	// KeepFile is Keep, and returns the file's name.
	KeepFile(kind, name string, v any) (string, error)
	// KeepText writes a text into the record.
	KeepText(kind, name, text string) error
	// KeepTrace writes a trace into the record and returns its file name.
	KeepTrace(name string, tr *trace.Trace, remarks ...string) (string, error)

	// Card makes card and sticker line from what the record holds so far.
	Card() (card, sticker string, err error)

	// Show changes what the screens show.
	Show(func(*View))
	// Say puts one line into the log of the session.
	Say(format string, args ...any)
}

// LineState counts what came from the board.
type LineState struct {
	protocol.Stats
	Restarts int // of the board, that nobody asked for
}

// Run is a plan with what the person sees before it runs.
type Run struct {
	Plan    safety.Plan
	View    PlanView
	Capture *Capture // at loop rate in board memory; nil: telemetry only
	// Provoke are the inputs that somebody works in motion: what a simulated rig
	// has worked for them.
	Provoke []InputBit
	Band    *Band // leaving it stops the run; nil: none
	// Learn is told of every sample of the run, from its first drive value on. It
	// returns how well the number is known that the run is for, "" for no news, and
	// whether that is enough: then the run ends. It must be quick.
	Learn func(Sample) (words string, enough bool)
	// Sized makes the plan in another size, 1 as proposed; nil: it has one size only.
	Sized func(size float64) safety.Plan
	// Resize steps the size of a plan that is shown and not armed, with its forecast.
	// It is quick and asks nobody, so that it may be called while the job waits.
	Resize func(by int) (Run, error)
}

// Capture is a capture that the first drive value of a run triggers.
type Capture struct {
	Decimation    int
	Before, Count int // samples
}

// Sample is a telemetry sample with the console time at which it was read.
type Sample struct {
	At  time.Duration
	Bad uint64 // lines dropped so far
	protocol.Sample
}

// Result is what a run gave.
type Result struct {
	Name        string
	Size        float64 // of the plan, 1 as proposed
	Reason      safety.EndReason
	Cause       safety.Cause
	Started     bool
	Begun       time.Duration
	Lasted      time.Duration
	Samples     []Sample
	Capture     *trace.Trace // nil without capture
	Judged      *safety.CheckJudged
	Stop        *StopSeen  // of a stop during the run
	BoardStop   *BoardStop // the board's own record of the stop, where it tripped
	Marks       []float64  // s since the first drive value
	File        string     // of the telemetry's trace in the record, filled by the job
	CaptureFile string     // of the capture's
}

// BoardStop is what the board kept of a stop of its own.
type BoardStop struct {
	Cause     protocol.Cause
	SpeedRadS float64
	SinceBeat time.Duration
	SeenUS    uint32 // board time at which it saw the cause, µs, low 32 bits
	OffUS     uint32 // and at which its output was off
}

// StopSeen is one stop, from the key to the board's answer.
type StopSeen struct {
	KeyToWire   time.Duration `json:"key_to_wire_ns"`
	WireToBoard time.Duration `json:"wire_to_answer_ns"`
	Cuts        int           `json:"cuts"`
}
