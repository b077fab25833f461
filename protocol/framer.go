package protocol

import (
	"bytes"

	"gainwright/protocol/si"
)

// Handler takes what a Framer finds. Slices are valid during the call only.
type Handler interface {
	// Sample is a telemetry sample whose CRC and number were good.
	Sample(Sample)
	// Line is any other line whose CRC was good; body is without CRC and end.
	Line(body []byte)
	// Bad is a line that was dropped, raw and possibly cut to LineMax bytes.
	Bad(raw []byte, err error)
}

// Stats counts what a Framer has seen since it was made.
type Stats struct {
	Samples   uint64 // good samples
	Lines     uint64 // other good lines
	BadLines  uint64 // dropped: CRC, length, shape or characters
	Lost      uint64 // samples missing by their numbers
	Stale     uint64 // samples doubled or out of order, dropped
	Noise     uint64 // bytes outside printable ASCII
	TimeJumps uint64 // samples whose board time stood still or ran over 8 s ahead
}

// Framer turns bytes into samples and lines, in whatever chunks they come. The
// zero value works, with unit scales of one; set Scales once the identity is
// known. It allocates nothing per sample.
type Framer struct {
	Scales Scales
	Stats  Stats

	h        Handler
	line     [LineMax]byte
	n        int
	over     bool // the line in hand is too long: drop it up to its end
	dirty    bool // the line in hand holds a byte outside printable ASCII
	extra    RawExtra
	hasExtra bool
	sample   Sample // the newest; what a U or V line brought stays as long as it holds
	started  bool
	last     RawFast
	boardUS  uint64
	counts   int64
	counts16 uint16
	counting bool
	fields   [][]byte
}

// Reset forgets the line in hand and the sequence, as after a reconnection. The
// statistics stay.
func (f *Framer) Reset() {
	*f = Framer{Scales: f.Scales, Stats: f.Stats, fields: f.fields}
}

// Restarted forgets the sequence and what belongs to it, as after a start of the
// board: its numbers, time and counts begin anew. The line in hand stays. A
// Handler may call it.
func (f *Framer) Restarted() {
	f.started, f.hasExtra, f.counting = false, false, false
	f.sample = Sample{}
}

// Pending returns the number of bytes of the line in hand.
func (f *Framer) Pending() int { return f.n }

// Feed takes the next bytes of the stream and reports to h what they complete.
func (f *Framer) Feed(b []byte, h Handler) {
	f.h = h
	for len(b) > 0 {
		i := bytes.IndexByte(b, '\n')
		if i < 0 {
			f.hold(b)
			break
		}
		if f.n == 0 && !f.over && !f.dirty && i == HexLine-1 && b[0] >= 'T' && b[0] <= 'V' {
			f.finish(b[:i])
		} else {
			f.hold(b[:i])
			f.end()
		}
		b = b[i+1:]
	}
	f.h = nil
}

func (f *Framer) hold(b []byte) {
	for _, c := range b {
		if c == '\r' {
			continue
		}
		if c < 0x20 || c > 0x7E {
			f.Stats.Noise++
			f.dirty = true
		}
		if f.n == LineMax-1 {
			f.over = true
			continue
		}
		f.line[f.n] = c
		f.n++
	}
}

func (f *Framer) end() {
	line := f.line[:f.n]
	over, dirty := f.over, f.dirty
	f.n, f.over, f.dirty = 0, false, false
	switch {
	case over:
		f.bad(line, ErrTooLong)
	case dirty:
		f.bad(line, ErrNotASCII)
	case len(line) == 0:
	default:
		f.finish(line)
	}
}

func (f *Framer) bad(line []byte, err error) {
	f.Stats.BadLines++
	f.h.Bad(line, err)
}

func (f *Framer) finish(line []byte) {
	if len(line) == HexLine-1 && line[0] >= 'T' && line[0] <= 'V' {
		if err := f.decodeHex(line); err != nil {
			f.bad(line, err)
		}
		return
	}
	body, err := SplitCRC(line)
	if err != nil {
		f.bad(line, err)
		return
	}
	if len(body) > 2 && body[1] == ' ' && (body[0] == 't' || body[0] == 'u') {
		if err := f.decodeText(body); err != nil {
			f.bad(line, err)
		}
		return
	}
	f.Stats.Lines++
	f.h.Line(body)
}

// fast completes a sample from its T line and what came before it.
func (f *Framer) fast(r *RawFast) error {
	if r.State > Tripped {
		return ErrMalformed
	}
	if f.started {
		ahead := r.Seq - f.last.Seq
		if ahead == 0 || ahead >= 128 {
			f.Stats.Stale++
			return nil
		}
		f.Stats.Lost += uint64(ahead) - 1
		dt := (r.TimeUS - f.last.TimeUS) & 0xFFFFFF
		if dt == 0 || dt >= 8_000_000 {
			f.Stats.TimeJumps++
		}
		f.boardUS += uint64(dt)
	} else {
		f.boardUS = uint64(r.TimeUS)
		f.started = true
	}
	f.last = *r
	f.Stats.Samples++
	sc := &f.Scales
	if sc.SpeedLSB == 0 {
		sc = &unitScales
	}
	// What a sample holds for long is kept in place; only what a T line brings is
	// written anew.
	s := &f.sample
	s.Seq, s.BoardUS, s.State, s.Saturated, s.TripHeld = r.Seq, f.boardUS, r.State, r.Saturated, r.TripHeld
	s.Speed = si.RadPerSec(float64(r.Speed) * sc.SpeedLSB)
	s.Volts = si.Volts(float64(r.Volts) * sc.VoltsLSB)
	if f.hasExtra && f.extra.Seq == r.Seq {
		f.addExtra(s, sc)
	} else if s.Has&hasExtra != 0 {
		s.Has &^= hasExtra
		s.Current, s.Bus, s.Setpoint, s.Counts = 0, 0, 0, 0
	}
	f.hasExtra = false
	f.h.Sample(*s)
	return nil
}

// hasExtra is what a U line can bring.
const hasExtra = HasCurrent | HasBus | HasSetpoint | HasCounts

var unitScales = Scales{SpeedLSB: 1, VoltsLSB: 1}

func (f *Framer) addExtra(s *Sample, sc *Scales) {
	x := &f.extra
	s.Has = s.Has&^hasExtra | HasSetpoint | HasCounts
	s.Current, s.Bus = 0, 0
	s.Setpoint = si.RadPerSec(float64(x.Setpoint) * sc.SpeedLSB)
	if sc.CurrentLSB > 0 {
		s.Has |= HasCurrent
		s.Current = si.Amps(float64(x.Current) * sc.CurrentLSB)
	}
	if sc.BusLSB > 0 {
		s.Has |= HasBus
		s.Bus = si.Volts(float64(x.Bus) * sc.BusLSB)
	}
	if f.counting {
		f.counts += int64(int16(x.Counts - f.counts16))
	} else {
		f.counting = true
	}
	f.counts16 = x.Counts
	s.Counts = f.counts
}

func (f *Framer) slow(r RawSlow) {
	s := &f.sample
	s.Slow = Slow{Seen: true, Inputs: r.Inputs, Trip: r.Trip, Heat: r.Heat, Boots: r.Boots}
	s.Has = s.Has&^HasTemp | HasInputs
	if r.Temp != TempUnknown {
		s.Slow.HasTmp, s.Slow.Temp = true, si.Celsius(float64(r.Temp)/10)
		s.Has |= HasTemp
	}
}

func (f *Framer) scales() Scales {
	if f.Scales.SpeedLSB == 0 {
		return Scales{SpeedLSB: 1, VoltsLSB: 1}
	}
	return f.Scales
}

// decodeText reads a t or u line, the decimal form. Values come back through
// the scales, so that both forms give the same sample within one LSB.
func (f *Framer) decodeText(body []byte) error {
	f.fields = Fields(f.fields, body)
	sc := f.scales()
	if body[0] == 'u' {
		return f.decodeExtraText(sc)
	}
	if len(f.fields) != 7 {
		return ErrMalformed
	}
	seq, ok1 := ParseUint(f.fields[1], 255)
	t, ok2 := ParseUint(f.fields[2], 1<<24-1)
	speed, ok3 := ParseInt(f.fields[4])
	volts, ok4 := ParseInt(f.fields[5])
	flags, ok5 := parseHex(f.fields[6])
	if !ok1 || !ok2 || !ok3 || !ok4 || !ok5 || len(f.fields[6]) != 2 {
		return ErrMalformed
	}
	r := RawFast{Seq: uint8(seq), TimeUS: uint32(t)}
	r.setFlags(byte(flags))
	if string(f.fields[3]) != r.State.String() {
		return ErrMalformed
	}
	r.Speed = toLSB(speed, sc.SpeedLSB)
	r.Volts = toLSB(volts, sc.VoltsLSB)
	return f.fast(&r)
}

func (f *Framer) decodeExtraText(sc Scales) error {
	if len(f.fields) != 6 {
		return ErrMalformed
	}
	seq, ok1 := ParseUint(f.fields[1], 255)
	cur, ok2 := ParseInt(f.fields[2])
	bus, ok3 := ParseInt(f.fields[3])
	set, ok4 := ParseInt(f.fields[4])
	cnt, ok5 := ParseUint(f.fields[5], 65535)
	if !ok1 || !ok2 || !ok3 || !ok4 || !ok5 {
		return ErrMalformed
	}
	f.extra = RawExtra{Seq: uint8(seq), Current: toLSB(cur, sc.CurrentLSB), Bus: toLSB(bus, sc.BusLSB),
		Setpoint: toLSB(set, sc.SpeedLSB), Counts: uint16(cnt)}
	f.hasExtra = true
	return nil
}

// toLSB turns a value in thousandths into LSBs, held inside 16 bits.
func toLSB(milli int64, lsb float64) int16 {
	if lsb <= 0 {
		return 0
	}
	v := float64(milli) / 1000 / lsb
	if v < 0 {
		v -= 0.5
	} else {
		v += 0.5
	}
	return int16(max(-32767, min(32767, v)))
}
