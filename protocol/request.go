package protocol

import (
	"math"
	"strconv"
)

// Verbs of requests. Each is sent as "<verb> <number> <arguments>".
const (
	VerbID     = "id"   // id → lines "id <key> …", then ok <n> <count>
	VerbTel    = "tel"  // tel → one line of decimal telemetry
	VerbStop   = "stop" // stop → as the cut byte
	VerbRate   = "rate" // rate <Hz> d|x t|tu → ok <Hz>
	VerbNonce  = "nonce"
	VerbArm    = "arm" // arm <one-time number> <limits crc> → ok <token>
	VerbDisarm = "dis"
	VerbRamp   = "ramp"  // ramp <token> → ok ramping
	VerbReset  = "reset" // reset → ok, clears a latched trip
	VerbLimit  = "lim"
	VerbGain   = "gain"
	VerbCap    = "cap"
	VerbLog    = "log"
	VerbInput  = "in"
	VerbExper  = "exp" // exp relay|prbs|steps <token> … → ok, experiments that the board's loop drives (P13)
)

// Motion verbs carry a heartbeat number instead of a request number, have no
// answer and are never repeated: the newest counts.
const (
	VerbBeat  = "hb" // hb <k> <token>
	VerbVolts = "dv" // dv <k> <token> <mV>
	VerbSpeed = "ds" // ds <k> <token> <mrad/s>
)

// LimitNames of the reference board, in the order of its slots. A board may
// hold fewer; it lists its own in its identity.
const (
	LimVolts   = "vmax"   // V
	LimSpeed   = "wmax"   // rad/s
	LimCurrent = "imax"   // A; 0: not judged
	LimBusMax  = "bmax"   // V; 0: not judged
	LimBusMin  = "bmin"   // V; 0: not judged
	LimAccel   = "amax"   // rad/s²; 0: not judged
	LimTurns   = "turns"  // turns of the motor shaft in one run; 0: not judged
	LimStall   = "stall"  // s driven without motion
	LimWrong   = "wrong"  // s of speed against the drive
	LimNoCount = "nocnt"  // s driven above breakaway volts without a count
	LimBreak   = "vbreak" // V above which the shaft should turn
	LimHeat    = "heat"   // A²s of i²t budget; 0: not judged
	LimRun     = "run"    // s of one run
	LimBeat    = "beat"   // s without a heartbeat
	LimSlew    = "slew"   // V/s; 0: not judged
)

// AppendRequest appends a numbered request line.
func AppendRequest(dst []byte, verb string, n uint16, args string) []byte {
	var b [LineMax]byte
	body := append(b[:0], verb...)
	body = append(body, ' ')
	body = strconv.AppendUint(body, uint64(n), 10)
	if args != "" {
		body = append(body, ' ')
		body = append(body, args...)
	}
	return AppendLine(dst, body)
}

// AppendBeat appends a heartbeat that carries no drive value.
func AppendBeat(dst []byte, k, token uint16) []byte {
	var b [32]byte
	return AppendLine(dst, motionHead(b[:0], VerbBeat, k, token))
}

// AppendDriveVolts appends an open-loop drive value, in V, which also counts as
// a heartbeat. It is rounded to 1 mV towards zero, so that rounding never
// raises it.
func AppendDriveVolts(dst []byte, k, token uint16, volts float64) []byte {
	var b [48]byte
	body := append(motionHead(b[:0], VerbVolts, k, token), ' ')
	return AppendLine(dst, strconv.AppendInt(body, toMilli(volts), 10))
}

// AppendDriveSpeed appends a closed-loop setpoint, in rad/s at the motor shaft,
// which also counts as a heartbeat. It is rounded to 1 mrad/s towards zero.
func AppendDriveSpeed(dst []byte, k, token uint16, speed float64) []byte {
	var b [48]byte
	body := append(motionHead(b[:0], VerbSpeed, k, token), ' ')
	return AppendLine(dst, strconv.AppendInt(body, toMilli(speed), 10))
}

func motionHead(dst []byte, verb string, k, token uint16) []byte {
	dst = append(dst, verb...)
	dst = append(dst, ' ')
	dst = strconv.AppendUint(dst, uint64(k), 10)
	dst = append(dst, ' ')
	return AppendHex16(dst, token)
}

// toMilli is v in thousandths, rounded towards zero; a value that is a rounding
// error below a thousandth counts as that thousandth.
func toMilli(v float64) int64 {
	if math.IsNaN(v) || math.Abs(v) > 2e6 {
		panic("protocol: drive value " + strconv.FormatFloat(v, 'g', -1, 64))
	}
	return int64(math.Trunc(v*1000 + math.Copysign(1e-6, v)))
}

// Newer reports whether number k is ahead of last in serial arithmetic over 16
// bits, as heartbeats are judged.
func Newer(k, last uint16) bool { return k != last && k-last < 0x8000 }

// SetCRC is the CRC of a set of values: over their eight hex digits each, in
// the order of their slots.
func SetCRC(values []uint32) uint16 {
	b := make([]byte, 0, 8*len(values))
	for _, v := range values {
		b = AppendHex32(b, v)
	}
	return CRC16(b)
}

// Command is a request or a motion line as a board reads it.
type Command struct {
	Verb string
	N    uint16 // request number, or heartbeat number of a motion line
	Args [][]byte
}

// ParseCommand reads the body of a line from the console. The fields are cut
// into scratch, which may be reused.
func ParseCommand(scratch [][]byte, body []byte) (Command, [][]byte, error) {
	scratch = Fields(scratch, body)
	if len(scratch) < 2 {
		return Command{}, scratch, ErrMalformed
	}
	n, ok := ParseUint(scratch[1], 65535)
	if !ok {
		return Command{}, scratch, ErrMalformed
	}
	return Command{Verb: string(scratch[0]), N: uint16(n), Args: scratch[2:]}, scratch, nil
}
