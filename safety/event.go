package safety

import (
	"time"

	"gainwright/protocol"
)

// Event is something that happened, with the console's monotonic time since the
// start of the session. Step takes events in the order in which they are handed
// over; stamps may be out of order by LateEvent.
type Event interface{ When() time.Duration }

// StopSource says who or what asked for a stop.
type StopSource string

// The sources.
const (
	ByStopKey  StopSource = "stop key"
	ByOtherKey StopSource = "another key in motion"
	ByPaste    StopSource = "many keys at once"
	BySignal   StopSource = "signal or closed terminal"
	ByQuit     StopSource = "leaving the program"
	ByPanic    StopSource = "a fault of this program"
	ByJob      StopSource = "the job"
)

// The events.
type (
	// Tick is the passing of time; the shell sends one at least every 10 ms.
	Tick struct{ At time.Duration }

	// Sample is one telemetry sample; At is when its bytes were read.
	Sample struct {
		At time.Duration
		protocol.Sample
	}

	// Connected is a board that has told its identity, after the port was opened
	// or came back. Everything starts again from disarmed.
	Connected struct {
		At        time.Duration
		Board     string // unique id
		BootCount uint16
		LookOnly  bool
		Simulated bool // nothing real moves
		Patterns  bool // its loop runs patterns, under a limit of the rate of change of volts
	}
	// LinkLost is a port that went away or was closed.
	LinkLost struct{ At time.Duration }
	// BoardRestarted is a board that said it has just started.
	BoardRestarted struct{ At time.Duration }
	// LimitsHeld is the result of reading the board's limits back: OK when they
	// are bit for bit those of the rig file.
	LimitsHeld struct {
		At time.Duration
		OK bool
	}

	// CheckPassed is a check seen working. CheckSilence cannot be passed this way:
	// Step judges it itself from OutputOff.
	CheckPassed struct {
		At    time.Duration
		Check Check
	}
	// CheckFailed voids a check.
	CheckFailed struct {
		At    time.Duration
		Check Check
	}

	// ArmRequest asks to arm the board for one plan. Stops is State.Stops as the
	// asker last saw it: a stop in between voids the request.
	ArmRequest struct {
		At         time.Duration
		Plan       Admitted
		Stops      uint
		Unattended bool // nobody at a terminal: simulated rigs only
	}
	// BoardArmed is the board's word that it is armed.
	BoardArmed struct{ At time.Duration }
	// BoardRefused is the board's word that it will not arm.
	BoardRefused struct {
		At    time.Duration
		Code  protocol.Refusal
		Words string
	}
	// PatternRefused is the board's word that it does not begin a pattern, or its
	// silence about it.
	PatternRefused struct {
		At    time.Duration
		Words string
	}
	// ClearArea is the answer that nobody is near.
	ClearArea struct{ At time.Duration }
	// Start is the start key, which is not the arm key.
	Start struct{ At time.Duration }
	// Key is any other key. In count-down and in motion it stops.
	Key struct{ At time.Duration }
	// Mark is the key that marks this moment of a run.
	Mark struct{ At time.Duration }
	// Enough ends a run early as if its plan were over: what it was for is known.
	Enough struct{ At time.Duration }
	// LeftForecast says that a run is not going as it was forecast.
	LeftForecast struct {
		At    time.Duration
		Words string
	}
	// Stop asks for a stop, in every phase.
	Stop struct {
		At     time.Duration
		Source StopSource
	}
	// Disarm withdraws the permission to drive.
	Disarm struct{ At time.Duration }
	// Acknowledge says that a trip was seen. It changes nothing in the drive.
	Acknowledge struct{ At time.Duration }
	// Reset clears an acknowledged trip.
	Reset struct{ At time.Duration }

	// Lease is a frame that reached the screen.
	Lease struct{ At time.Duration }
	// Paste is two or more keys within one read of the terminal.
	Paste struct{ At time.Duration }
	// PortStalled is a write that did not end in time.
	PortStalled struct{ At time.Duration }
	// TapeFailed is a recording that cannot be written, a full disk among others.
	TapeFailed struct {
		At  time.Duration
		Why string
	}
	// TapeBack is a recording that can be written again.
	TapeBack struct{ At time.Duration }
	// ClockJump is a step of the laptop's clock.
	ClockJump struct{ At time.Duration }
	// Wake is a laptop that slept or a program that was suspended.
	Wake struct{ At time.Duration }
	// RigChanged is a rig file that is not the one the envelope was made from.
	RigChanged struct{ At time.Duration }
	// Panicked is a fault of this program in some goroutine.
	Panicked struct {
		At  time.Duration
		Why string
	}

	// GainWrite asks whether gains may be written now.
	GainWrite struct{ At time.Duration }
	// LimitWrite asks whether limits may be written to the board now. Loosening
	// needs a typed reason.
	LimitWrite struct {
		At      time.Duration
		Loosens bool
		Reason  string
	}
	// WriteDone ends a write that was allowed, of gains or limits.
	WriteDone struct {
		At time.Duration
		OK bool
	}

	// BoardTripped is the board's word that it latched a trip.
	BoardTripped struct {
		At    time.Duration
		Cause protocol.Cause
	}
	// OutputOff is the board's own word that its output is off: its answer to a cut
	// or the newest entry of its stop log. Cause and SinceBeat come from the log:
	// SinceBeat is, on the board's clock, from the last heartbeat accepted to output
	// off; 0 where it is not known. The silence check is judged by them, also when
	// they come after the run.
	OutputOff struct {
		At        time.Duration
		Cause     protocol.Cause
		SinceBeat time.Duration
	}
	// Ramping is the board's word that it brings the speed down under power.
	Ramping struct{ At time.Duration }
)

// When returns the time of the event.
func (e Tick) When() time.Duration           { return e.At }
func (e Sample) When() time.Duration         { return e.At }
func (e Connected) When() time.Duration      { return e.At }
func (e LinkLost) When() time.Duration       { return e.At }
func (e BoardRestarted) When() time.Duration { return e.At }
func (e LimitsHeld) When() time.Duration     { return e.At }
func (e CheckPassed) When() time.Duration    { return e.At }
func (e CheckFailed) When() time.Duration    { return e.At }
func (e ArmRequest) When() time.Duration     { return e.At }
func (e BoardArmed) When() time.Duration     { return e.At }
func (e BoardRefused) When() time.Duration   { return e.At }
func (e PatternRefused) When() time.Duration { return e.At }
func (e ClearArea) When() time.Duration      { return e.At }
func (e Start) When() time.Duration          { return e.At }
func (e Key) When() time.Duration            { return e.At }
func (e Mark) When() time.Duration           { return e.At }
func (e Enough) When() time.Duration         { return e.At }
func (e LeftForecast) When() time.Duration   { return e.At }
func (e Stop) When() time.Duration           { return e.At }
func (e Disarm) When() time.Duration         { return e.At }
func (e Acknowledge) When() time.Duration    { return e.At }
func (e Reset) When() time.Duration          { return e.At }
func (e Lease) When() time.Duration          { return e.At }
func (e Paste) When() time.Duration          { return e.At }
func (e PortStalled) When() time.Duration    { return e.At }
func (e TapeFailed) When() time.Duration     { return e.At }
func (e TapeBack) When() time.Duration       { return e.At }
func (e ClockJump) When() time.Duration      { return e.At }
func (e Wake) When() time.Duration           { return e.At }
func (e RigChanged) When() time.Duration     { return e.At }
func (e Panicked) When() time.Duration       { return e.At }
func (e GainWrite) When() time.Duration      { return e.At }
func (e LimitWrite) When() time.Duration     { return e.At }
func (e WriteDone) When() time.Duration      { return e.At }
func (e BoardTripped) When() time.Duration   { return e.At }
func (e OutputOff) When() time.Duration      { return e.At }
func (e Ramping) When() time.Duration        { return e.At }
