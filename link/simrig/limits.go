package simrig

import (
	"math"
	"strconv"

	"gainwright/protocol"
)

// limitSet is the limits that the board holds.
type limitSet struct {
	set
	inUse  bool     // a set was put in use since the start
	judged []uint32 // what the limiter goes by: held, but for a board that lies
}

func (l *limitSet) value(slot int) float32 { return math.Float32frombits(l.judged[slot]) }
func (l *limitSet) crc() uint16            { return protocol.SetCRC(l.held) }

// newLimitSet holds the board's hard limits, and for the rest what a board would
// be delivered with.
func newLimitSet(c *Config) limitSet {
	v := make([]float32, len(limitNames))
	v[limVolts], v[limSpeed], v[limCurrent] = float32(c.Board.VoltsMax), float32(c.Board.SpeedMax), float32(c.Board.AmpsMax)
	v[limStall], v[limWrong], v[limNoCount], v[limRun] = 1, 0.5, 1, 10
	v[limBeat] = float32(c.Board.BeatMax) / 1000
	l := limitSet{set: set{names: limitNames}}
	for _, x := range v {
		l.held = append(l.held, math.Float32bits(x))
	}
	l.judged = l.held
	return l
}

// mayBeZero lists the limits for which 0 means not judged.
var mayBeZero = map[int]bool{limCurrent: true, limBusMax: true, limBusMin: true, limAccel: true,
	limTurns: true, limHeat: true, limSlew: true, limBreak: true}

// doLimit: lim get|set|use|crc.
func (r *Rig) doLimit(args []string, a *answer) {
	l := &r.board.limits
	i, okSlot := slot(argument(args, 1), len(limitNames))
	switch act := argument(args, 0); {
	case act == "crc" && len(args) == 1:
		a.ok(hex16(l.crc()), strconv.Itoa(len(l.held)))
	case act == "get" && len(args) == 2 && okSlot:
		a.ok(args[1], limitNames[i], hex32(l.held[i]))
	case act == "set" && len(args) == 3 && okSlot:
		a.done(r.stageLimit(i, args[2]), args[1])
	case act == "use" && len(args) == 2:
		a.done(r.useLimits(args[1]), args[1])
	default:
		a.no(protocol.RefArgument)
	}
}

func (r *Rig) stageLimit(i int, digits string) protocol.Refusal {
	bits, ok := protocol.ParseHex32([]byte(digits))
	v := float64(math.Float32frombits(bits))
	switch {
	case r.board.state != protocol.Off:
		return protocol.RefState
	case !ok || math.IsNaN(v) || math.IsInf(v, 0) || v < 0 || v == 0 && (!mayBeZero[i] || math.Signbit(v)):
		return protocol.RefArgument
	case r.overHard(i, v) && !r.wrong[FaultLimitsLie]:
		return protocol.RefLimit
	}
	r.board.limits.stage(i, bits)
	return 0
}

// overHard reports whether a limit would allow more than the board ever does.
func (r *Rig) overHard(i int, v float64) bool {
	c := &r.cfg.Board
	hard := func(x float64) float64 { return float64(float32(x)) }
	switch i {
	case limVolts:
		return v > hard(c.VoltsMax)
	case limSpeed:
		return v > hard(c.SpeedMax)
	case limCurrent:
		return c.AmpsMax > 0 && (v > hard(c.AmpsMax) || v == 0)
	case limBeat:
		return v > hard(float64(c.BeatMax)/1000) || v < hard(float64(c.BeatMin)/1000)
	}
	return false
}

func (r *Rig) useLimits(digits string) protocol.Refusal {
	l := &r.board.limits
	crc, ok := protocol.ParseHex16([]byte(digits))
	switch {
	case !ok:
		return protocol.RefArgument
	case r.board.state != protocol.Off:
		return protocol.RefState
	case !l.use(crc):
		return protocol.RefSetCRC
	}
	l.inUse = true
	beat := l.held[limBeat]
	if !r.wrong[FaultLimitsLie] {
		l.judged = l.held
	} else if l.judged[limBeat] != beat {
		l.judged = append([]uint32(nil), l.judged...)
		l.judged[limBeat] = beat // it lies about limits, not about its timeout
	}
	return 0
}

// LimitsInUse reports whether a set of limits was put in use since the board's start.
func (r *Rig) LimitsInUse() bool { return r.board.limits.inUse }
