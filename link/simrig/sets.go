package simrig

import (
	"math"
	"strconv"

	"gainwright/protocol"
)

// set is a row of binary32 values that changes as a whole.
type set struct {
	names  []string
	held   []uint32
	staged map[int]uint32
}

// use makes the staged values the held ones if crc is that of the whole row.
func (s *set) use(crc uint16) bool {
	next := append([]uint32(nil), s.held...)
	for i, v := range s.staged {
		next[i] = v
	}
	if protocol.SetCRC(next) != crc {
		return false
	}
	s.held, s.staged = next, nil
	return true
}

func (s *set) stage(i int, v uint32) {
	if s.staged == nil {
		s.staged = map[int]uint32{}
	}
	s.staged[i] = v
}

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

// gainSet is the running gains; the stored ones belong to the rig, since they
// outlive a start.
type gainSet struct {
	set
}

// gainNames lists the slots that law, form and anti-windup call for.
func gainNames(c *Config) []string {
	b := &c.Board
	var n []string
	if b.Form == "parallel" {
		n = append(n, "kp", "ki")
		if b.Law == "pid" {
			n = append(n, "kd", "tf")
		}
	} else {
		n = append(n, "kc", "ti")
		if b.Law == "pid" {
			n = append(n, "td", "tf")
		}
	}
	n = append(n, "b")
	if b.Windup == "back-calculation" {
		n = append(n, "tt")
	}
	return append(n, "kv", "ks")
}

// gainBits is the set that the file says is stored.
func gainBits(c *Config) []uint32 {
	g := &c.Gains
	all := map[string]float64{"kp": g.Kp, "ki": g.Ki, "kd": g.Kd, "kc": g.Kc, "ti": g.Ti, "td": g.Td,
		"tf": g.Tf, "b": g.B, "tt": g.Tt, "kv": g.Kv, "ks": g.Ks}
	var bits []uint32
	for _, n := range gainNames(c) {
		bits = append(bits, math.Float32bits(float32(all[n])))
	}
	return bits
}

func newGainSet(c *Config, stored []uint32) gainSet {
	return gainSet{set{names: gainNames(c), held: append([]uint32(nil), stored...)}}
}

// law makes the control law of the running gains.
func (g *gainSet) law(c *Config) law {
	v := map[string]float32{}
	for i, n := range g.names {
		v[n] = math.Float32frombits(g.held[i])
	}
	l := law{kp: v["kp"], ki: v["ki"], kd: v["kd"], tf: v["tf"], b: v["b"], tt: v["tt"], kv: v["kv"], ks: v["ks"],
		period: float32(c.Board.LoopUS) * 1e-6, disc: c.Board.Disc, windup: c.Board.Windup,
		onError: c.Board.Deriv == "error"}
	switch kc, ti, td := v["kc"], v["ti"], v["td"]; c.Board.Form {
	case "ideal":
		l.kp, l.kd = kc, kc*td
		if ti > 0 {
			l.ki = kc / ti
		}
	case "series":
		l.kp, l.kd = kc, kc*td
		if ti > 0 {
			l.kp, l.ki = kc*(1+td/ti), kc/ti
		}
	}
	l.reset()
	return l
}

// doGain: gain get|set|use|store|crc.
func (r *Rig) doGain(args []string, a *answer) {
	g := &r.board.gains
	n := len(g.names)
	switch act := argument(args, 0); {
	case act == "get" && len(args) == 3:
		row, ok := r.gainRow(args[1])
		i, ok2 := slot(args[2], n)
		if !ok || !ok2 {
			a.no(protocol.RefArgument)
			return
		}
		a.ok(args[2], g.names[i], hex32(row[i]))
	case act == "crc" && len(args) == 2:
		row, ok := r.gainRow(args[1])
		if !ok {
			a.no(protocol.RefArgument)
			return
		}
		a.ok(hex16(protocol.SetCRC(row)), strconv.Itoa(n))
	case act == "set" && len(args) == 3:
		a.done(r.stageGain(args[1], args[2]), args[1])
	case act == "use" && len(args) == 2:
		a.done(r.useGains(args[1]), args[1])
	case act == "store" && len(args) == 2:
		why := r.storeGains(args[1])
		a.done(why, args[1], strconv.Itoa(r.writes))
	default:
		a.no(protocol.RefArgument)
	}
}

func (r *Rig) gainRow(which string) ([]uint32, bool) {
	switch which {
	case "run":
		return r.board.gains.held, true
	case "store":
		return r.stored, true
	}
	return nil, false
}

// settable refuses a change of gains unless the board is off and at rest.
func (r *Rig) settable() protocol.Refusal {
	switch {
	case r.board.state != protocol.Off:
		return protocol.RefState
	case !r.atRest():
		return protocol.RefMoving
	}
	return 0
}

func (r *Rig) stageGain(which, digits string) protocol.Refusal {
	i, ok := slot(which, len(r.board.gains.names))
	bits, ok2 := protocol.ParseHex32([]byte(digits))
	v := float64(math.Float32frombits(bits))
	if !ok || !ok2 || math.IsNaN(v) || math.IsInf(v, 0) {
		return protocol.RefArgument
	}
	if why := r.settable(); why != 0 {
		return why
	}
	r.board.gains.stage(i, bits)
	return 0
}

func (r *Rig) useGains(digits string) protocol.Refusal {
	crc, ok := protocol.ParseHex16([]byte(digits))
	if !ok {
		return protocol.RefArgument
	}
	if why := r.settable(); why != 0 {
		return why
	}
	if !r.board.gains.use(crc) {
		return protocol.RefSetCRC
	}
	return 0
}

func (r *Rig) storeGains(digits string) protocol.Refusal {
	crc, ok := protocol.ParseHex16([]byte(digits))
	if !ok {
		return protocol.RefArgument
	}
	if why := r.settable(); why != 0 {
		return why
	}
	g := &r.board.gains
	if protocol.SetCRC(g.held) != crc {
		return protocol.RefSetCRC
	}
	r.stored = append([]uint32(nil), g.held...)
	if r.wrong[FaultGainsDiffer] {
		r.stored[0] ^= 1
	}
	r.writes++
	return 0
}
