package simrig

import (
	"math/bits"
	"strconv"

	"gainwright/protocol"
)

// exper is an experiment that the loop itself drives about the drive line's volts
// (P13). It goes with the run that it is part of.
type exper struct {
	kind     string  // "relay", "prbs", "steps"; "": none
	amp      float32 // V; 0 once it is over
	over     bool
	fresh    bool
	high     bool
	switched int

	middle, hyst float32 // relay, rad/s
	todo         int

	taps, shift uint16 // prbs
	stages      int
	every, tick int
	left        int
}

// registerTaps are those of maximal-length registers of 3 to 16 stages, bit 0 the
// stage that goes out: P. Alfke, Xilinx application note 052 (1996), table 3 (from memory),
// stage k of n as bit n−k.
var registerTaps = [...]uint16{3: 0x3, 0x3, 0x5, 0x3, 0x3, 0x1D, 0x11, 0x9, 0x5, 0x941, 0x1601, 0x2A01, 0x3, 0x100B}

// step is one loop period: the output wanted, in V.
func (x *exper) step(bias, speed float32) float32 {
	if x.kind == "" || x.over {
		return bias
	}
	was, first := x.high, x.fresh
	if x.kind == "relay" {
		x.relay(speed)
	} else {
		x.levels()
	}
	x.fresh = false
	if !first && x.high != was {
		x.switched++
		if x.kind == "relay" && x.switched == x.todo {
			x.end()
		}
	}
	if x.high {
		return bias + x.amp
	}
	return bias - x.amp
}

func (x *exper) end() { x.over, x.amp = true, 0 }

func (x *exper) relay(speed float32) {
	switch {
	case x.fresh:
		x.high = speed < x.middle
	case speed >= x.middle+x.hyst:
		x.high = false
	case speed <= x.middle-x.hyst:
		x.high = true
	}
}

// levels goes on with the sequence or the square wave.
func (x *exper) levels() {
	if x.tick > 0 {
		x.tick--
		return
	}
	if x.left == 0 {
		x.end()
		return
	}
	x.left--
	x.tick = x.every - 1
	if x.kind == "steps" {
		x.high = x.fresh || !x.high
		return
	}
	x.high = x.shift&1 == 1
	odd := uint16(bits.OnesCount16(x.shift&x.taps) & 1)
	x.shift = x.shift>>1 | odd<<(x.stages-1)
}

// parseExper reads the arguments behind the token.
func parseExper(kind string, args []string) (x exper, ok bool) {
	least := [4]int64{1, 1, -100_000_000, 1}
	most := [4]int64{100_000, 100_000_000, 100_000_000, 10_000}
	if kind == "prbs" {
		least, most = [4]int64{1, 3, 1, 1}, [4]int64{100_000, 16, 10_000, 65535}
	}
	n := 4
	if kind == "steps" {
		least, most, n = [4]int64{1, 1, 1}, [4]int64{100_000, 10_000, 10_000}, 3
	}
	if len(args) != n {
		return x, false
	}
	var v [4]int64
	for i, s := range args {
		if v[i], ok = protocol.ParseInt([]byte(s)); !ok || v[i] < least[i] || v[i] > most[i] {
			return x, false
		}
	}
	x = exper{kind: kind, amp: float32(v[0]) / 1000, fresh: true}
	switch kind {
	case "relay":
		x.hyst, x.middle, x.todo = float32(v[1])/1000, float32(v[2])/1000, int(v[3])
	case "prbs":
		x.stages, x.every, x.shift = int(v[1]), int(v[2]), uint16(v[3])
		x.taps, x.left = registerTaps[x.stages], 1<<x.stages-1
		ok = int64(x.left) >= v[3]
	case "steps":
		x.every, x.left = int(v[1]), int(v[2])
	default:
		ok = false
	}
	return x, ok
}

// doExper: exp relay|prbs|steps <token> … and exp state → none|run|done <switchings>.
func (r *Rig) doExper(args []string, a *answer) {
	b := &r.board
	kind := argument(args, 0)
	if !r.cfg.Board.Exper {
		a.no(protocol.RefNotHere)
		return
	}
	if kind == "state" && len(args) == 1 {
		a.ok(b.run.exper.phase(), strconv.Itoa(b.run.exper.switched))
		return
	}
	token, ok := protocol.ParseHex16([]byte(argument(args, 1)))
	if !ok {
		a.no(protocol.RefArgument)
		return
	}
	x, ok := parseExper(kind, args[2:])
	low := b.run.target - x.amp
	switch {
	case !ok:
		a.no(protocol.RefArgument)
	case b.state != protocol.Driving:
		a.no(protocol.RefState)
	case token != b.arm.token:
		a.no(protocol.RefToken)
	case max(b.run.target+x.amp, -low) > b.limits.value(limVolts) || r.cfg.Driver.Quadrants != 4 && low < 0:
		a.no(protocol.RefLimit)
	default:
		b.run.exper = x
		a.ok()
	}
}

func (x *exper) phase() string {
	switch {
	case x.kind == "":
		return "none"
	case x.over:
		return "done"
	}
	return "run"
}
