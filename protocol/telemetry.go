package protocol

import (
	"encoding/binary"
	"math/bits"
	"strconv"

	"gainwright/protocol/si"
)

// HexLine is the length of a fixed hex telemetry line with its line feed.
const HexLine = 24

// Has tells which optional values a sample carries.
type Has uint8

// The optional values.
const (
	HasCurrent Has = 1 << iota
	HasBus
	HasSetpoint
	HasCounts
	HasTemp
	HasInputs
)

// Sample is one instant of the board in SI units at the motor shaft.
//
// Time is the instant at which the encoder counts were latched; Speed is the
// mean over the window that ends there (Identity.WindowLoops loop periods);
// Volts is what was applied since the latch before it.
type Sample struct {
	Seq       uint8
	BoardUS   uint64 // board time in µs, unwrapped since the first sample
	State     State
	Saturated bool // the drive was at a stop of its range since the latch before
	TripHeld  bool // a trip is latched
	Speed     si.RadPerSec
	Volts     si.Volts

	Has      Has
	Current  si.Amps
	Bus      si.Volts
	Setpoint si.RadPerSec
	Counts   int64 // encoder counts, unwrapped since the first sample
	Slow     Slow
}

// Slow is what a board reports a few times a second.
type Slow struct {
	Seen   bool
	Temp   si.Celsius
	HasTmp bool
	Inputs uint16
	Trip   Cause // first cause of the latched trip, or CauseNone
	Heat   uint8 // heat budget used, percent, 255: not known
	Boots  uint16
}

// Scales turns the integers of the wire into SI units. All are positive and
// come from the identity.
type Scales struct {
	SpeedLSB   float64 // rad/s at the motor shaft
	VoltsLSB   float64 // V
	CurrentLSB float64 // A; 0 where current is not measured
	BusLSB     float64 // V; 0 where the bus is not measured
}

// RawFast is the payload of a T line.
type RawFast struct {
	Seq       uint8
	TimeUS    uint32 // 24 bits
	State     State
	Saturated bool
	TripHeld  bool
	Speed     int16
	Volts     int16
}

// RawExtra is the payload of a U line. Setpoint is in speed units.
type RawExtra struct {
	Seq      uint8
	Current  int16
	Bus      int16
	Setpoint int16
	Counts   uint16
}

// RawSlow is the payload of a V line.
type RawSlow struct {
	Seq    uint8
	Temp   int16 // 0.1 degC, -32768: not known
	Inputs uint16
	Trip   Cause
	Heat   uint8
	Boots  uint16
}

// TempUnknown stands in RawSlow.Temp where no temperature is measured.
const TempUnknown int16 = -32768

func (r RawFast) flags() byte {
	f := byte(r.State) & 7
	if r.Saturated {
		f |= 8
	}
	if r.TripHeld {
		f |= 16
	}
	return f
}

func (r *RawFast) setFlags(f byte) {
	r.State, r.Saturated, r.TripHeld = State(f&7), f&8 != 0, f&16 != 0
}

// AppendFast appends a T line.
func AppendFast(dst []byte, r RawFast) []byte {
	at := len(dst)
	dst = append(dst, 'T')
	dst = appendHex(dst, uint64(r.Seq), 2)
	dst = appendHex(dst, uint64(r.TimeUS), 6)
	dst = appendHex(dst, uint64(r.flags()), 2)
	dst = appendHex(dst, uint64(uint16(r.Speed)), 4)
	dst = appendHex(dst, uint64(uint16(r.Volts)), 4)
	return closeHex(dst, at)
}

// AppendExtra appends a U line. It goes out before the T line of its number.
func AppendExtra(dst []byte, r RawExtra) []byte {
	at := len(dst)
	dst = append(dst, 'U')
	dst = appendHex(dst, uint64(r.Seq), 2)
	dst = appendHex(dst, uint64(uint16(r.Current)), 4)
	dst = appendHex(dst, uint64(uint16(r.Bus)), 4)
	dst = appendHex(dst, uint64(uint16(r.Setpoint)), 4)
	dst = appendHex(dst, uint64(r.Counts), 4)
	return closeHex(dst, at)
}

// AppendSlow appends a V line. It goes out before the T line of its number.
func AppendSlow(dst []byte, r RawSlow) []byte {
	at := len(dst)
	dst = append(dst, 'V')
	dst = appendHex(dst, uint64(r.Seq), 2)
	dst = appendHex(dst, uint64(uint16(r.Temp)), 4)
	dst = appendHex(dst, uint64(r.Inputs), 4)
	dst = appendHex(dst, uint64(r.Trip), 2)
	dst = appendHex(dst, uint64(r.Heat), 2)
	dst = appendHex(dst, uint64(r.Boots), 4)
	return closeHex(dst, at)
}

func closeHex(dst []byte, at int) []byte {
	dst = appendHex(dst, uint64(CRC16(dst[at:])), 4)
	return append(dst, '\n')
}

// AppendFastText appends a t line, the decimal form for people: number, board
// time in µs, state, speed in mrad/s, volts in mV, flags as two hex digits.
func AppendFastText(dst []byte, r RawFast, sc Scales) []byte {
	var b [64]byte
	body := append(b[:0], 't', ' ')
	body = strconv.AppendUint(body, uint64(r.Seq), 10)
	body = append(body, ' ')
	body = strconv.AppendUint(body, uint64(r.TimeUS), 10)
	body = append(body, ' ')
	body = append(body, r.State.String()...)
	body = appendMilli(body, float64(r.Speed)*sc.SpeedLSB)
	body = appendMilli(body, float64(r.Volts)*sc.VoltsLSB)
	body = append(body, ' ')
	body = appendHex(body, uint64(r.flags()), 2)
	return AppendLine(dst, body)
}

// AppendExtraText appends a u line: number, current in mA, bus in mV, setpoint
// in mrad/s, counts.
func AppendExtraText(dst []byte, r RawExtra, sc Scales) []byte {
	var b [64]byte
	body := append(b[:0], 'u', ' ')
	body = strconv.AppendUint(body, uint64(r.Seq), 10)
	body = appendMilli(body, float64(r.Current)*sc.CurrentLSB)
	body = appendMilli(body, float64(r.Bus)*sc.BusLSB)
	body = appendMilli(body, float64(r.Setpoint)*sc.SpeedLSB)
	body = append(body, ' ')
	body = strconv.AppendUint(body, uint64(r.Counts), 10)
	return AppendLine(dst, body)
}

func appendMilli(dst []byte, v float64) []byte {
	dst = append(dst, ' ')
	v *= 1000
	if v < 0 {
		v -= 0.5
	} else {
		v += 0.5
	}
	return strconv.AppendInt(dst, int64(v), 10)
}

// decodeHex checks one fixed hex line without its line feed and stores what it
// says. line[0] is T, U or V.
func (f *Framer) decodeHex(line []byte) error {
	_ = line[HexLine-2]
	a, bad1 := hex8(line[1:9])
	b, bad2 := hex8(line[9:17])
	c, bad3 := hex8(line[15:23]) // the last four of b once more, and the CRC
	if bad1|bad2|bad3 != 0 {
		return ErrMalformed
	}
	if CRC16(line[:19]) != uint16(c) {
		return ErrBadCRC
	}
	seq, w3 := uint8(a>>24), uint16(c>>16)
	switch line[0] {
	case 'T':
		r := RawFast{Seq: seq, TimeUS: a & 0xFFFFFF, Speed: int16(b >> 8), Volts: int16(w3)}
		r.setFlags(byte(b >> 24))
		return f.fast(&r)
	case 'U':
		f.extra = RawExtra{Seq: seq, Current: int16(a >> 8), Bus: int16(a<<8 | b>>24), Setpoint: int16(b >> 8), Counts: w3}
		f.hasExtra = true
	case 'V':
		f.slow(RawSlow{Seq: seq, Temp: int16(a >> 8), Inputs: uint16(a<<8 | b>>24), Trip: Cause(b >> 16), Heat: uint8(b >> 8), Boots: w3})
	}
	return nil
}

// hex8 reads eight upper-case hex digits, the first the most significant, all at
// once in one word: the digit of a byte is its low half, plus nine for a letter,
// and it was a digit if writing it again gives the same byte. bad is not 0 where
// one is no such digit.
func hex8(p []byte) (v uint32, bad uint64) {
	const ones = 0x0101010101010101
	x := binary.LittleEndian.Uint64(p)
	n := x&(0x0F*ones) + 9*(x>>6&ones)
	letter := (n + 6*ones) >> 4 & ones
	bad = (n + 0x30*ones + 7*letter) ^ x | n&(0xF0*ones)
	n = (n<<4 | n>>8) & 0x00FF00FF00FF00FF
	n = (n | n>>8) & 0x0000FFFF0000FFFF
	return bits.ReverseBytes32(uint32(n | n>>16)), bad
}
