package safety

import "time"

// Effect is something that the shell carries out literally and in order.
type Effect interface{ rank() int }

// EndReason says how a run, or an arm that never ran, came to its end.
type EndReason uint8

// The reasons.
const (
	EndDone     EndReason = iota + 1 // the plan was over
	EndSilence                       // the board stopped by itself, as the silence check asks
	EndStopped                       // somebody or something asked for a stop
	EndTripped                       // a limiter stopped it
	EndDisarmed                      // it was disarmed or the arm lapsed before it ran
	EndRefused                       // the board did not arm
)

// String returns the reason in a word.
func (r EndReason) String() string {
	return [...]string{"", "done", "silence", "stopped", "tripped", "disarmed", "refused"}[min(r, EndRefused)]
}

// The effects.
type (
	// SendStop puts the cut byte on the wire ahead of everything and throws away
	// what waits.
	SendStop struct{}
	// SendRampStop asks the board for a ramp and cut, once.
	SendRampStop struct{}
	// SendDisarm asks the board to disarm.
	SendDisarm struct{}
	// SendArm asks the board for its one-time number and arms it. (P6.1, P6.2)
	SendArm struct{}
	// SendDrive sends a drive value: V or rad/s, by mode.
	SendDrive struct {
		Mode  Mode
		Value float64
	}
	// SendPattern has the board's loop add a pattern to the volts last sent.
	SendPattern struct {
		Volts   float64
		Pattern Pattern
	}
	// SendHeartbeat keeps an armed board alive.
	SendHeartbeat struct{}
	// SendReset asks the board to clear its latched trip.
	SendReset struct{}
	// ArmRefused answers an ArmRequest that led to nothing.
	ArmRefused struct{ Cause Cause }
	// WriteAllowed and WriteRefused answer a GainWrite or LimitWrite.
	WriteAllowed struct{ Limits bool }
	// WriteRefused carries why not.
	WriteRefused struct {
		Limits bool
		Cause  Cause
	}
	// RunEnded comes exactly once for every ArmRequest that was not refused.
	RunEnded struct {
		At      time.Duration
		Name    string
		Check   Check
		Reason  EndReason
		Cause   Cause         // of EndStopped, EndTripped, EndDisarmed, EndRefused
		Started bool          // the motor was driven
		Lasted  time.Duration // from the first drive value to the end
	}
	// TripLatched comes once for every trip that latches, with its first cause.
	TripLatched struct {
		At    time.Duration
		Cause Cause
	}
	// CheckJudged is Step's own verdict on the silence check.
	CheckJudged struct {
		Check     Check
		Passed    bool
		SinceBeat time.Duration
		Words     string
	}
	// Log is one line for the record.
	Log struct {
		At    time.Duration
		Words string
	}
)

func (SendStop) rank() int      { return 0 }
func (SendRampStop) rank() int  { return 1 }
func (SendDisarm) rank() int    { return 2 }
func (SendArm) rank() int       { return 3 }
func (SendDrive) rank() int     { return 4 }
func (SendPattern) rank() int   { return 5 }
func (SendHeartbeat) rank() int { return 5 }
func (SendReset) rank() int     { return 6 }
func (ArmRefused) rank() int    { return 7 }
func (WriteAllowed) rank() int  { return 7 }
func (WriteRefused) rank() int  { return 7 }
func (CheckJudged) rank() int   { return 7 }
func (TripLatched) rank() int   { return 7 }
func (RunEnded) rank() int      { return 8 }
func (Log) rank() int           { return 9 }

// Before reports whether a comes before b in the order in which Step puts effects
// out; equal kinds keep the order in which they were decided.
func Before(a, b Effect) bool { return a.rank() < b.rank() }
