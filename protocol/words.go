package protocol

import "strconv"

// State is what a board says it is doing. The numbers stand on the wire.
type State uint8

// The states of a board.
const (
	Off     State = 0 // output off, not armed
	Armed   State = 1 // output off, a console may drive until the arm lapses
	Driving State = 2 // open loop: the drive follows a voltage
	Looping State = 3 // closed loop: the drive follows a speed setpoint
	Ramping State = 4 // coming to rest under power, then off
	Tripped State = 5 // output off, a trip is latched
)

var stateWords = [...]string{"off", "armed", "driving", "looping", "ramping", "tripped"}

// String returns the state in one word.
func (s State) String() string { return word(stateWords[:], int(s), "state") }

// Moving reports whether the board applies power in this state.
func (s State) Moving() bool { return s == Driving || s == Looping || s == Ramping }

// Cause is why a board stopped. The numbers stand on the wire.
type Cause uint8

// The causes. A cause below CauseAsked is no trip: the board was told to stop,
// or has not stopped at all.
const (
	CauseNone      Cause = 0
	CauseCut       Cause = 1 // cut byte or stop line
	CauseRamped    Cause = 2 // ramp and cut, come to rest
	CauseDisarmed  Cause = 3 // disarm, or the arm lapsed
	CauseBeat      Cause = 10
	CauseSpeed     Cause = 11
	CauseVolts     Cause = 12
	CauseCurrent   Cause = 13
	CauseBusHigh   Cause = 14
	CauseBusLow    Cause = 15
	CauseAccel     Cause = 16
	CauseTurns     Cause = 17
	CauseStall     Cause = 18
	CauseWrongWay  Cause = 19
	CauseNoCounts  Cause = 20
	CauseHeat      Cause = 21
	CauseTemp      Cause = 22
	CauseRunTime   Cause = 23
	CauseInterlock Cause = 24
	CauseEStop     Cause = 25
	CauseEncoder   Cause = 26
	CauseDriver    Cause = 27
	CauseNotAtRest Cause = 28 // ramp and cut did not bring the speed down in time
	CauseInternal  Cause = 29

	causeFirstTrip = CauseBeat
)

var causeWords = map[Cause]string{
	CauseNone: "none", CauseCut: "cut", CauseRamped: "ramped", CauseDisarmed: "disarmed",
	CauseBeat: "no heartbeat", CauseSpeed: "speed over limit", CauseVolts: "volts over limit",
	CauseCurrent: "current over limit", CauseBusHigh: "bus over limit", CauseBusLow: "bus under limit",
	CauseAccel: "acceleration over limit", CauseTurns: "turns over limit", CauseStall: "stalled",
	CauseWrongWay: "wrong way", CauseNoCounts: "no counts", CauseHeat: "heat over limit",
	CauseTemp: "temperature over limit", CauseRunTime: "run time over limit",
	CauseInterlock: "interlock open", CauseEStop: "E-stop input in", CauseEncoder: "encoder fault",
	CauseDriver: "driver fault", CauseNotAtRest: "speed did not fall", CauseInternal: "board fault",
}

// Trip reports whether the cause latches: a stop that nobody asked for.
func (c Cause) Trip() bool { return c >= causeFirstTrip }

// String returns the cause in words.
func (c Cause) String() string {
	if w, ok := causeWords[c]; ok {
		return w
	}
	return "cause " + strconv.Itoa(int(c))
}

// Refusal is why a board did not do what a request asked. The numbers stand on
// the wire.
type Refusal uint8

// The refusals.
const (
	RefBadCRC    Refusal = 1
	RefTooLong   Refusal = 2
	RefUnknown   Refusal = 3 // unknown verb
	RefArgument  Refusal = 4
	RefState     Refusal = 5 // not in this state
	RefOldNumber Refusal = 6 // one-time number is used, old or wrong
	RefToken     Refusal = 7
	RefLimit     Refusal = 8 // value outside the board's hard limits
	RefLineFull  Refusal = 9 // the line would be over 70 % full
	RefMoving    Refusal = 10
	RefInterlock Refusal = 11
	RefTripped   Refusal = 12
	RefNotHere   Refusal = 13 // optional power that this board has not
	RefSetCRC    Refusal = 14 // the staged set is not the one named
	RefMemory    Refusal = 15 // lasting memory failed
	RefLimits    Refusal = 16 // limits held are not the ones named
	RefBusy      Refusal = 17
)

var refusalWords = [...]string{"", "bad crc", "line too long", "unknown verb", "bad argument",
	"wrong state", "old number", "wrong token", "over a hard limit", "line too full", "moving",
	"interlock open", "tripped", "not on this board", "set differs", "memory failed",
	"limits differ", "busy"}

// String returns the refusal in words.
func (r Refusal) String() string { return word(refusalWords[:], int(r), "refusal") }

func word(words []string, i int, kind string) string {
	if i < len(words) && words[i] != "" {
		return words[i]
	}
	return kind + " " + strconv.Itoa(i)
}
