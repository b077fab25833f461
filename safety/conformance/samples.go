package conformance

import (
	"math"
	"strconv"
	"strings"

	"gainwright/protocol"
)

// The telemetry is read here once more, strictly and without the codec's
// tolerance for what is lost or doubled: that is what is judged.

// textSample is a t line.
type textSample struct {
	seq            uint8
	us             uint32 // low 24 bits
	state          protocol.State
	tripHeld       bool
	speed, millivs int64 // mrad/s, mV
}

func parseText(body string) (textSample, error) {
	w := strings.Split(body, " ")
	if len(w) != 7 || w[0] != "t" {
		return textSample{}, errorf("%q has not the seven words of a t line", body)
	}
	seq, ok1 := protocol.ParseUint([]byte(w[1]), 255)
	us, ok2 := protocol.ParseUint([]byte(w[2]), 1<<24-1)
	speed, ok3 := protocol.ParseInt([]byte(w[4]))
	mv, ok4 := protocol.ParseInt([]byte(w[5]))
	flags, ok5 := hexByte(w[6])
	if !ok1 || !ok2 || !ok3 || !ok4 || !ok5 {
		return textSample{}, errorf("%q: a number cannot be read", body)
	}
	s := textSample{seq: uint8(seq), us: uint32(us), state: protocol.State(flags & 7), tripHeld: flags&16 != 0, speed: speed, millivs: mv}
	if s.state > protocol.Tripped || w[3] != s.state.String() {
		return s, errorf("%q: the state word is not that of the flags", body)
	}
	return s, nil
}

// parseExtra reads a u line: its number.
func parseExtra(body string) (uint8, error) {
	w := strings.Split(body, " ")
	seq, ok := protocol.ParseUint([]byte(at(w, 1)), 255)
	for _, f := range w[min(2, len(w)):] {
		_, good := protocol.ParseInt([]byte(f))
		ok = ok && good
	}
	if _, counts := protocol.ParseUint([]byte(at(w, 5)), 65535); !ok || !counts || len(w) != 6 {
		return 0, errorf("%q is no u line", body)
	}
	return uint8(seq), nil
}

// hexByte reads two upper-case hex digits.
func hexByte(w string) (byte, bool) {
	v, ok := protocol.ParseHex16([]byte("00" + w))
	return byte(v), ok && len(w) == 2
}

// fixed is a T, U or V line as its digits.
type fixed struct {
	kind   byte
	seq    uint8
	digits string // 16, after the number
}

func parseFixed(body string) (fixed, error) {
	seq, ok := hexByte(body[1:3])
	for i := 3; i < len(body); i += 4 {
		_, good := protocol.ParseHex16([]byte(body[i : i+4]))
		ok = ok && good
	}
	if !ok {
		return fixed{}, errorf("%q holds other than upper-case hex digits", body)
	}
	return fixed{kind: body[0], seq: seq, digits: body[3:]}, nil
}

// hex reads n digits from the i-th.
func (f fixed) hex(i, n int) uint32 {
	v, err := strconv.ParseUint(f.digits[i:i+n], 16, 32)
	if err != nil {
		return math.MaxUint32 // parseFixed has seen to it that this cannot be
	}
	return uint32(v)
}

func (f fixed) us() uint32            { return f.hex(0, 6) }
func (f fixed) flags() byte           { return byte(f.hex(6, 2)) }
func (f fixed) state() protocol.State { return protocol.State(f.flags() & 7) }
func (f fixed) volts() int16          { return int16(f.hex(12, 4)) }

// fixedLines are the hex lines since the last forget.
func (s *session) fixedLines() ([]fixed, error) {
	var all []fixed
	for _, l := range s.lines {
		if !l.hex || !l.good {
			continue
		}
		f, err := parseFixed(l.body)
		if err != nil {
			return nil, err
		}
		all = append(all, f)
	}
	return all, nil
}

func kind(all []fixed, k byte) (some []fixed) {
	for _, f := range all {
		if f.kind == k {
			some = append(some, f)
		}
	}
	return some
}
