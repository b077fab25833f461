package safety

import "fmt"

// Code numbers a cause. Help and record refer to it; numbers never change.
type Code uint16

// The causes, in groups of a hundred: link, laptop, rig and motor, asked for,
// refusals.
const (
	CodeNone Code = 0

	CodeStale         Code = 101
	CodeLinkLost      Code = 102
	CodeReconnected   Code = 103
	CodeRestarted     Code = 104
	CodeNoStopAnswer  Code = 105
	CodeBoardTripped  Code = 106
	CodeBoardOff      Code = 107
	CodeBoardUnasked  Code = 108
	CodeBoardNoTime   Code = 109
	CodeBoardNoAnswer Code = 110
	CodeBoardRefused  Code = 111
	CodeNotNumber     Code = 112
	CodeNoPattern     Code = 113

	CodeLease   Code = 201
	CodePort    Code = 202
	CodeTape    Code = 203
	CodeClock   Code = 204
	CodeWake    Code = 205
	CodeRigFile Code = 206
	CodeLate    Code = 207
	CodePanic   Code = 208

	CodeSpeed       Code = 301
	CodeSpeedAhead  Code = 302
	CodeVolts       Code = 303
	CodeCurrent     Code = 304
	CodeBusHigh     Code = 305
	CodeBusLow      Code = 306
	CodeTemp        Code = 307
	CodeAccel       Code = 308
	CodeTurns       Code = 309
	CodeStalled     Code = 310
	CodeNoCounts    Code = 311
	CodeStallOrDead Code = 312
	CodeWrongWay    Code = 313
	CodeSlip        Code = 314
	CodeHeat        Code = 315
	CodeRunTime     Code = 316
	CodeInterlock   Code = 317
	CodeUndriven    Code = 318
	CodeNotHeld     Code = 319
	CodeLoose       Code = 320
	CodeForecast    Code = 321
	CodePushed      Code = 322

	CodeAsked    Code = 401
	CodeOtherKey Code = 402
	CodePaste    Code = 403
	CodeLapsed   Code = 404
	CodeDisarmed Code = 405
	CodeEnabling Code = 406

	CodeNoPlan       Code = 501
	CodeOverEnvelope Code = 502
	CodeVoided       Code = 503
	CodeHoldOff      Code = 504
	CodeNotConnected Code = 505
	CodeLookOnly     Code = 506
	CodeChecks       Code = 507
	CodeLimits       Code = 508
	CodeNotDisarmed  Code = 509
	CodeTripHeld     Code = 510
	CodeMoving       Code = 511
	CodeUnattended   Code = 512
	CodeWriting      Code = 513
	CodeNoReason     Code = 514
	CodeNoLease      Code = 515
	CodePatternHere  Code = 516
)

// Cause is why something stopped or was refused, in words, with what to do.
type Cause struct {
	Code  Code
	Words string
	Do    string
}

// String returns the words with the number.
func (c Cause) String() string {
	if c.Code == CodeNone {
		return "none"
	}
	return fmt.Sprintf("%s (%d)", c.Words, c.Code)
}

type text struct{ words, do string }

const watch = "watch the shaft, not the screen; use the E-stop if it turns"

var causes = map[Code]text{
	CodeStale:         {"no fresh telemetry", watch + ". Then look at cable and baud rate"},
	CodeLinkLost:      {"link lost", "the board should stop by its own timeout, motion is unknown: " + watch},
	CodeReconnected:   {"the board connected anew while armed", "look for a loose plug, then arm again"},
	CodeRestarted:     {"the board restarted", "look for a supply dip; running gains are the stored ones again. Make the checks again"},
	CodeNoStopAnswer:  {"the board does not say that its output is off", watch},
	CodeBoardTripped:  {"the board tripped", "find the cause it names before the next run"},
	CodeBoardOff:      {"the board switched off by itself", "read its stop log"},
	CodeBoardUnasked:  {"the board drives and was not asked to", watch + ". Do not use this board"},
	CodeBoardNoTime:   {"the board did not stop by itself when it heard nothing", "this board is look-only until its timeout has been seen working"},
	CodeBoardNoAnswer: {"the board did not answer the arm", "look at the link and arm again"},
	CodeBoardRefused:  {"the board refused to arm", "do what it says and arm again"},
	CodeNoPattern:     {"the board did not begin the pattern", "look at the link, and at what the board says of exp"},
	CodeNotNumber:     {"telemetry is not a number", "look at encoder and sensors; do not trust the screen"},

	CodeLease:   {"the screen is frozen", "free the terminal; nothing moves while nobody can see"},
	CodePort:    {"a write to the port does not end", watch + ". Unplug, plug in and open the port again"},
	CodeTape:    {"the record cannot be written", "make room or choose another folder"},
	CodeClock:   {"the laptop's clock went back or jumped", "arm again"},
	CodeWake:    {"the laptop slept or the program was suspended", "treat as link lost: look at the shaft, then arm again"},
	CodeRigFile: {"the rig file changed", "read it again, send the limits again and make the checks again"},
	CodeLate:    {"this program was held up", "close what loads the laptop and arm again"},
	CodePanic:   {"a fault of this program", "keep the record, send it to its maintainers, start again"},

	CodeSpeed:       {"speed over the limit", "lower the drive or the setpoint; look for a load that came off"},
	CodeSpeedAhead:  {"the speed limit would be passed", "lower the drive or the setpoint"},
	CodeVolts:       {"the board applies more volts than allowed", "look at the board's scales; do not use it until they are right"},
	CodeCurrent:     {"current over the limit", "look for a jam or a short; make the step smaller"},
	CodeBusHigh:     {"bus over the limit", "the supply cannot take the energy back: brake slower or coast"},
	CodeBusLow:      {"the supply folds back", "raise its current limit or make the step smaller"},
	CodeTemp:        {"temperature over the limit", "let it cool; hot parts burn"},
	CodeAccel:       {"acceleration over the limit", "look for a load that came off, or make the step smaller"},
	CodeTurns:       {"turns over the limit", "look at the travel that is left; make the run shorter"},
	CodeStalled:     {"stalled: drive and current, but no counts", "power off, turn by hand, feel for a jam"},
	CodeNoCounts:    {"turning but no counts: drive, little current", "the encoder has failed or is unplugged. Never close the loop like this"},
	CodeStallOrDead: {"no counts: stalled, or the encoder has failed", "look whether the shaft turns; power off, feel for a jam, look at the encoder"},
	CodeWrongWay:    {"wrong way: drive and speed are opposite", "power off; motor leads or encoder channels are swapped. Closed loop is refused"},
	CodeSlip:        {"speed and voltage disagree", "look at the encoder and its coupling, and at Ke in the rig file"},
	CodeHeat:        {"heat budget used up", "wait until it has cooled"},
	CodeRunTime:     {"run time over the limit", "shorten the plan"},
	CodeInterlock:   {"interlock open", "close it; then arm again"},
	CodePushed:      {"the shaft speeds up beyond what the drive can do", watch + ". Look for what drives it: a load that pulls, another motor"},
	CodeUndriven:    {"the shaft turns without drive", watch},
	CodeNotHeld:     {"the shaft turned and was to be held", "fasten it before the next run"},
	CodeLoose:       {"far more acceleration than the model allows: load coming loose", "power off, look at couplings, keys and screws"},
	CodeForecast:    {"the speed left the band of the forecast", "look for what changed: load, coupling, supply; then find the model anew"},

	CodeAsked:    {"stop asked for", ""},
	CodeOtherKey: {"a key that is not on the short list", ""},
	CodePaste:    {"many keys at once", "type one key at a time"},
	CodeLapsed:   {"the arm lapsed", "arm again"},
	CodeDisarmed: {"disarmed", ""},
	CodeEnabling: {"enabling switch not in its middle position", "hold it in the middle, then arm again"},

	CodeNoPlan:       {"no admitted plan", "choose a plan that the envelope allows"},
	CodeOverEnvelope: {"the plan is outside the envelope", "make it smaller"},
	CodeVoided:       {"a stop came after the asking", "ask again"},
	CodeHoldOff:      {"too soon after a stop", "wait half a second"},
	CodeNotConnected: {"no board", "connect one"},
	CodeLookOnly:     {"look-only", "the board may not be driven; see why at connect"},
	CodeChecks:       {"checks of this session are missing", "make them first"},
	CodeLimits:       {"the board does not hold the limits of the rig file", "send them and read them back"},
	CodeNotDisarmed:  {"not disarmed", "stop or disarm first"},
	CodeTripHeld:     {"tripped", "acknowledge, then reset"},
	CodeMoving:       {"the shaft is not at rest or the output is not off", "wait until it stands still"},
	CodeUnattended:   {"nobody is at the terminal", "only a simulated rig runs unattended"},
	CodeWriting:      {"a write to the board is under way or has failed", "write again and read back"},
	CodeNoReason:     {"limits are loosened only with a typed reason", "type one"},
	CodeNoLease:      {"no live screen", "wait for a frame"},
	CodePatternHere:  {"the board's loop runs no patterns", "run it from the console: a pattern needs the power exper and the limit slew"},
}

// cause makes a Cause; detail, if any, follows the words.
func cause(c Code, detail string) Cause {
	t := causes[c]
	w := t.words
	if detail != "" {
		w += ": " + detail
	}
	return Cause{Code: c, Words: w, Do: t.do}
}

// Codes lists every code that has words, for help and tests.
func Codes() map[Code]Cause {
	m := make(map[Code]Cause, len(causes))
	for c := range causes {
		m[c] = cause(c, "")
	}
	return m
}
