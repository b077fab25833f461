package simrig

import (
	"math"
	"strconv"

	"gainwright/protocol"
)

// telemetry is the stream of samples.
type telemetry struct {
	scales protocol.Scales
	every  int // loop periods between lines, 0 for none
	wait   int // loop periods to the next line
	hex    bool
	extra  bool
	seq    uint8
	mean   mean
	slowIn int // lines to the next V line
	slowN  int
	buf    []byte
}

// Bytes of the longest decimal line and V lines a second.
const (
	textLine  = 64
	slowLines = 5
)

// bytesPerSecond is what the asked-for lines would put on the wire at most.
func (t *telemetry) bytesPerSecond(hz float64, hex, extra bool) float64 {
	size := float64(textLine)
	n := hz
	if extra {
		n *= 2
	}
	if hex {
		size = protocol.HexLine
		n += min(slowLines, hz)
	}
	return n * size
}

func (t *telemetry) begin(every int, hex, extra bool, r *Rig) {
	t.every, t.wait, t.hex, t.extra = every, every, hex, extra
	t.slowN = max(1, int(1e9/float64(r.loop)/float64(every)/slowLines))
	t.slowIn = 1
	r.board.pins.accrue(r.now)
	t.mean.since(&r.board.pins)
	r.board.clipped = false
}

// report sends a sample where one is due.
func (r *Rig) report() {
	t := &r.board.tel
	if t.every == 0 {
		return
	}
	if t.wait--; t.wait > 0 {
		return
	}
	t.wait = t.every
	t.slowIn--
	r.sample(t.hex, t.extra, t.hex && t.slowIn <= 0)
	if t.slowIn <= 0 {
		t.slowIn = t.slowN
	}
}

// tell is tel: one decimal sample for a person.
func (r *Rig) tell() {
	r.board.pins.accrue(r.now)
	r.sample(false, r.cfg.Sensors.Current || r.cfg.Sensors.Bus, false)
}

// sample sends the lines of one sample, or none of them where the transmit ring
// is full; the number counts on, so that the loss shows.
func (r *Rig) sample(hex, extra, slow bool) {
	b := &r.board
	t := &b.tel
	if !r.wrong[FaultStaleSequence] || t.seq%8 != 7 {
		t.seq++
	}
	fast := protocol.RawFast{
		Seq: t.seq, TimeUS: uint32(r.clockUS(r.now)) & 0xFFFFFF, State: b.state,
		Saturated: b.clipped, TripHeld: b.trip != protocol.CauseNone,
		Speed: toLSB(float64(b.speed), t.scales.SpeedLSB),
		Volts: toLSB(t.mean.since(&b.pins), t.scales.VoltsLSB),
	}
	b.clipped = false
	out := t.buf[:0]
	if extra {
		x := r.extraNow(fast.Seq)
		if hex {
			out = protocol.AppendExtra(out, x)
		} else {
			out = protocol.AppendExtraText(out, x, t.scales)
		}
	}
	if slow {
		out = protocol.AppendSlow(out, r.slowNow(fast.Seq))
	}
	if hex {
		out = protocol.AppendFast(out, fast)
	} else {
		out = protocol.AppendFastText(out, fast, t.scales)
	}
	t.buf = out
	if b.tx.room() < len(out) {
		return
	}
	if r.wrong[FaultWrongCRC] {
		spoil(out)
	}
	b.tx.put(r.now, out)
}

func (r *Rig) extraNow(seq uint8) protocol.RawExtra {
	b := &r.board
	sc := b.tel.scales
	x := protocol.RawExtra{Seq: seq, Counts: uint16(b.counts),
		Current: toLSB(b.amps, sc.CurrentLSB), Bus: toLSB(b.busV, sc.BusLSB)}
	switch {
	case b.state == protocol.Looping:
		x.Setpoint = toLSB(float64(b.run.setpoint), sc.SpeedLSB)
	case b.state == protocol.Ramping && b.run.ramp.loop:
		left := max(0, rampNS-(r.now-b.run.ramp.from))
		x.Setpoint = toLSB(float64(b.run.ramp.value)*float64(left)/float64(rampNS), sc.SpeedLSB)
	}
	return x
}

func (r *Rig) slowNow(seq uint8) protocol.RawSlow {
	b := &r.board
	s := protocol.RawSlow{Seq: seq, Temp: protocol.TempUnknown, Inputs: r.inputs, Trip: b.trip, Heat: 255, Boots: r.boots}
	if r.cfg.Sensors.Temperature {
		s.Temp = int16(math.Round(10 * r.plant.winding.celsius))
	}
	if limit := float64(b.limits.value(limHeat)); limit > 0 && r.cfg.Sensors.Current {
		s.Heat = uint8(min(254, 100*b.heat/limit))
	}
	return s
}

// toLSB is v in steps of the wire, rounded and held inside 16 bits.
func toLSB(v, lsb float64) int16 {
	if lsb <= 0 {
		return 0
	}
	return int16(max(-32767, min(32767, math.Round(v/lsb))))
}

// doRate: rate <Hz> d|x t|tu → <Hz that it will be>.
func (r *Rig) doRate(args []string, a *answer) {
	hz, ok := protocol.ParseUint([]byte(argument(args, 0)), 100_000)
	form, what := argument(args, 1), argument(args, 2)
	if !ok || len(args) != 3 || form != "d" && form != "x" || what != "t" && what != "tu" {
		a.no(protocol.RefArgument)
		return
	}
	t := &r.board.tel
	if hz == 0 {
		t.every = 0
		a.ok("0")
		return
	}
	loopHz := 1e9 / float64(r.loop)
	every := max(1, int((loopHz+float64(hz)-1e-6)/float64(hz)))
	got := loopHz / float64(every)
	if t.bytesPerSecond(got, form == "x", what == "tu") > 0.7*float64(r.cfg.Board.Baud)/10 {
		a.no(protocol.RefLineFull)
		return
	}
	t.begin(every, form == "x", what == "tu", r)
	a.ok(strconv.Itoa(int(got + 0.5)))
}
