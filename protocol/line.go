package protocol

import (
	"errors"
	"strconv"
)

// LineMax is the longest line in bytes, its end included.
const LineMax = 128

// Cut is the byte that cuts the drive wherever it stands: ASCII CAN. A board
// acts on it before it reads the next byte.
const Cut byte = 0x18

// crcTail is the length of ";CCCC".
const crcTail = 5

// Errors of a single line.
var (
	ErrNoCRC     = errors.New("protocol: line without a CRC")
	ErrBadCRC    = errors.New("protocol: CRC does not match")
	ErrTooLong   = errors.New("protocol: line longer than 128 bytes")
	ErrNotASCII  = errors.New("protocol: byte outside printable ASCII")
	ErrMalformed = errors.New("protocol: malformed line")
)

const hexDigits = "0123456789ABCDEF"

// AppendLine closes body with its CRC and a line feed and appends it to dst.
// The body must be printable ASCII of at most LineMax-6 bytes: anything else is
// a mistake of the caller and panics.
func AppendLine(dst, body []byte) []byte {
	if len(body) > LineMax-crcTail-1 {
		panic("protocol: body too long: " + string(body))
	}
	for _, c := range body {
		if c < 0x20 || c > 0x7E {
			panic("protocol: body holds byte " + strconv.Itoa(int(c)))
		}
	}
	dst = append(dst, body...)
	return appendCRC(dst, CRC16(body))
}

func appendCRC(dst []byte, crc uint16) []byte {
	dst = append(dst, ';')
	dst = appendHex(dst, uint64(crc), 4)
	return append(dst, '\n')
}

// SplitCRC takes a line without its end, checks its CRC and returns the body.
func SplitCRC(line []byte) (body []byte, err error) {
	n := len(line) - crcTail
	if n < 0 || line[n] != ';' {
		return nil, ErrNoCRC
	}
	want, ok := parseHex(line[n+1:])
	if !ok {
		return nil, ErrNoCRC
	}
	if CRC16(line[:n]) != uint16(want) {
		return nil, ErrBadCRC
	}
	return line[:n], nil
}

// Fields cuts body at single spaces into dst, which may be reused.
func Fields(dst [][]byte, body []byte) [][]byte {
	dst = dst[:0]
	start := 0
	for i := 0; i <= len(body); i++ {
		if i == len(body) || body[i] == ' ' {
			dst = append(dst, body[start:i])
			start = i + 1
		}
	}
	return dst
}

// appendHex appends v as n upper-case hex digits.
func appendHex(dst []byte, v uint64, n int) []byte {
	for i := n - 1; i >= 0; i-- {
		dst = append(dst, hexDigits[v>>(4*i)&15])
	}
	return dst
}

// hexValue is the value of a hex digit, or 0xFF. Lower case is not accepted: a
// line has one spelling.
var hexValue = func() (t [256]byte) {
	for i := range t {
		t[i] = 0xFF
	}
	for i := range 16 {
		t[hexDigits[i]] = byte(i)
	}
	return t
}()

// parseHex reads up to 16 upper-case hex digits.
func parseHex(b []byte) (v uint64, ok bool) {
	if len(b) == 0 || len(b) > 16 {
		return 0, false
	}
	var bad byte
	for _, c := range b {
		d := hexValue[c]
		bad |= d
		v = v<<4 | uint64(d&15)
	}
	return v, bad < 16
}

// ParseHex32 reads exactly eight upper-case hex digits.
func ParseHex32(b []byte) (uint32, bool) {
	if len(b) != 8 {
		return 0, false
	}
	v, ok := parseHex(b)
	return uint32(v), ok
}

// ParseHex16 reads exactly four upper-case hex digits.
func ParseHex16(b []byte) (uint16, bool) {
	if len(b) != 4 {
		return 0, false
	}
	v, ok := parseHex(b)
	return uint16(v), ok
}

// AppendHex32 appends v as eight upper-case hex digits.
func AppendHex32(dst []byte, v uint32) []byte { return appendHex(dst, uint64(v), 8) }

// AppendHex16 appends v as four upper-case hex digits.
func AppendHex16(dst []byte, v uint16) []byte { return appendHex(dst, uint64(v), 4) }

// ParseInt reads a decimal integer with an optional minus sign: at most ten
// digits, no plus sign, no leading zeros but for 0 itself.
func ParseInt(b []byte) (v int64, ok bool) {
	neg := len(b) > 0 && b[0] == '-'
	if neg {
		b = b[1:]
	}
	if len(b) == 0 || len(b) > 10 || (b[0] == '0' && (len(b) > 1 || neg)) {
		return 0, false
	}
	for _, c := range b {
		if c < '0' || c > '9' {
			return 0, false
		}
		v = v*10 + int64(c-'0')
	}
	if neg {
		v = -v
	}
	return v, true
}

// ParseUint reads a decimal integer of at most max.
func ParseUint(b []byte, max int64) (v int64, ok bool) {
	v, ok = ParseInt(b)
	return v, ok && v >= 0 && v <= max
}
