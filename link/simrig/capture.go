package simrig

import (
	"strconv"

	"gainwright/protocol"
)

// capture records samples in board RAM at loop rate.
type capture struct {
	memory int
	phase  capPhase
	every  int
	wait   int
	before int
	count  int
	ring   []capSample // while waiting: the newest `before` samples
	data   []capSample
	mean   mean
}

type capPhase int

const (
	capIdle capPhase = iota
	capWait
	capRun
	capFull
)

var capWords = [...]string{"idle", "wait", "run", "full"}

type capSample struct {
	at          int64
	counts      uint16
	volts, amps int16
}

func (c *capture) busy() bool { return c.phase == capWait || c.phase == capRun }

// stop ends a capture that runs; it is full with what it has. One that still
// waits for a drive goes on waiting.
func (c *capture) stop() {
	if c.phase == capRun {
		c.phase = capFull
	}
}

// trigger begins the capture that waits for the first drive line.
func (c *capture) trigger() {
	if c.phase != capWait {
		return
	}
	c.phase = capRun
	c.data = append(c.data[:0], c.ring...)
	c.ring = nil
}

// capture takes a sample where one is due.
func (r *Rig) capture() {
	b := &r.board
	c := &b.cap
	if !c.busy() {
		return
	}
	if c.wait--; c.wait > 0 {
		return
	}
	c.wait = c.every
	s := capSample{at: r.now, counts: uint16(b.counts), volts: toLSB(c.mean.since(&b.pins), b.tel.scales.VoltsLSB),
		amps: toLSB(b.amps, b.tel.scales.CurrentLSB)}
	if c.phase == capWait {
		if c.before > 0 {
			if len(c.ring) == c.before {
				c.ring = append(c.ring[:0], c.ring[1:]...)
			}
			c.ring = append(c.ring, s)
		}
		return
	}
	c.data = append(c.data, s)
	if len(c.data) >= c.count {
		c.phase = capFull
	}
}

// doCapture: cap arm|now|state|get|crc.
func (r *Rig) doCapture(args []string, a *answer) {
	c := &r.board.cap
	if c.memory == 0 {
		a.no(protocol.RefNotHere)
		return
	}
	switch act := argument(args, 0); {
	case act == "arm" && len(args) == 4:
		a.done(r.beginCapture(args[1], args[2], args[3], capWait))
	case act == "now" && len(args) == 3:
		a.done(r.beginCapture(args[1], "0", args[2], capRun))
	case act == "state" && len(args) == 1:
		var first string
		if first = "0"; len(c.data) > 0 {
			first = r.low32(c.data[0].at)
		}
		a.ok(capWords[c.phase], strconv.Itoa(len(c.data)), first, strconv.FormatInt(int64(c.every)*r.loop/1000, 10))
	case act == "get" && len(args) == 2:
		i, ok := slot(args[1], len(c.data))
		if !ok {
			a.no(protocol.RefArgument)
			return
		}
		a.ok(args[1], string(c.digits(i, min(i+8, len(c.data)))))
	case act == "crc" && len(args) == 1:
		a.ok(hex16(protocol.CRC16(c.digits(0, len(c.data)))))
	default:
		a.no(protocol.RefArgument)
	}
}

// digits is the samples from..to as they travel, twelve hex digits each.
func (c *capture) digits(from, to int) []byte {
	b := make([]byte, 0, 12*(to-from))
	for _, s := range c.data[from:to] {
		b = protocol.AppendHex16(b, s.counts)
		b = protocol.AppendHex16(b, uint16(s.volts))
		b = protocol.AppendHex16(b, uint16(s.amps))
	}
	return b
}

func (r *Rig) beginCapture(every, before, count string, phase capPhase) protocol.Refusal {
	c := &r.board.cap
	e, ok1 := protocol.ParseUint([]byte(every), 10_000)
	p, ok2 := protocol.ParseUint([]byte(before), 1_000_000)
	n, ok3 := protocol.ParseUint([]byte(count), 1_000_000)
	switch {
	case !ok1 || !ok2 || !ok3 || e < 1 || n < 1:
		return protocol.RefArgument
	case int(n) > c.memory || p >= n:
		return protocol.RefLimit
	}
	*c = capture{memory: c.memory, phase: phase, every: int(e), wait: int(e), before: int(p), count: int(n)}
	r.board.pins.accrue(r.now)
	c.mean.since(&r.board.pins)
	return 0
}
