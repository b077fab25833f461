package simrig

import (
	"math"
	"strconv"

	"gainwright/protocol"
)

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
		bits = append(bits, c.Board.gainBits(all[n]))
	}
	return bits
}

// gain is what the board makes of the digits of a gain.
func (b *BoardSpec) gain(bits uint32) float32 {
	if b.Number == "int" {
		return float32(math.Ldexp(float64(int32(bits)), -b.Shift))
	}
	return math.Float32frombits(bits)
}

// gainBits are the digits of a gain as the board holds it.
func (b *BoardSpec) gainBits(v float64) uint32 {
	if b.Number == "int" {
		return uint32(int32(math.Round(math.Ldexp(v, b.Shift))))
	}
	return math.Float32bits(float32(v))
}

func newGainSet(c *Config, stored []uint32) gainSet {
	return gainSet{set{names: gainNames(c), held: append([]uint32(nil), stored...)}}
}

// law makes the control law of the running gains.
func (g *gainSet) law(c *Config) law {
	v := map[string]float32{}
	for i, n := range g.names {
		v[n] = c.Board.gain(g.held[i])
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
	v := float64(r.cfg.Board.gain(bits))
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
