// Package tape keeps every byte that passes between the console and a board,
// with its time and direction, and plays it back as a port. It records at the
// byte border: what a line meant is decided again at replay, by the same code.
//
// A tape is a text file that only grows. Its first line is the header, then one
// record a line:
//
//	gainwright tape 1 2026-02-03T04:05:06Z
//	1204 < t 17 1200 d 0 0;5A3C\r\n
//	1530 > id 1;09F2\n
//	2100 ! lost 3 chunks 212 bytes
//	2100 # operator pressed stop
//
//	record    = time SP direction SP text LF
//	time      = microseconds since the time in the header, decimal
//	direction = "<" from the board, ">" to the board,
//	            "!" a loss: text says how much of either direction is missing here,
//	            "#" a remark
//	text      = the bytes. 0x20 to 0x7E stand for themselves, but a backslash is
//	            written \\; LF, CR and TAB are \n, \r and \t; every other byte is
//	            \x and two hex digits. A reader takes \x for any byte.
//
// Records are in the order in which they were handed over; their times come
// from several goroutines and may go back by the time between reading a clock
// and handing over. A tape may end anywhere: the machine may have been switched
// off. What stands before the cut is read, the cut is reported.
package tape

import (
	"strconv"
	"time"
)

// Dir is the direction of a record.
type Dir byte

const (
	FromBoard Dir = '<'
	ToBoard   Dir = '>'
	Loss      Dir = '!'
	Remark    Dir = '#'
)

func (d Dir) valid() bool { return d == FromBoard || d == ToBoard || d == Loss || d == Remark }

// Record is one line of a tape.
type Record struct {
	Time  time.Duration // since the time in the header
	Dir   Dir
	Bytes []byte
}

const headerWord = "gainwright tape 1 "

// AppendHeader appends the first line of a tape that began at start, and
// AppendRecord a record: for a recording that is written as it is made, in
// virtual time say. A Writer does the same without keeping its caller waiting.
func AppendHeader(dst []byte, start time.Time) []byte {
	dst = append(dst, headerWord...)
	dst = start.UTC().AppendFormat(dst, time.RFC3339Nano)
	return append(dst, '\n')
}

// AppendRecord appends the line of one record at time t since the header's.
func AppendRecord(dst []byte, t time.Duration, d Dir, b []byte) []byte {
	return appendRecord(dst, t, d, b)
}

// appendRecord appends the line of a record to dst.
func appendRecord(dst []byte, t time.Duration, d Dir, b []byte) []byte {
	dst = appendMicros(dst, t)
	dst = append(dst, ' ', byte(d), ' ')
	dst = appendEscaped(dst, b)
	return append(dst, '\n')
}

func appendMicros(dst []byte, t time.Duration) []byte {
	return strconv.AppendInt(dst, max(0, t.Microseconds()), 10)
}

const hexDigits = "0123456789ABCDEF"

// plain[c] reports whether byte c stands for itself.
var plain = func() (t [256]bool) {
	for c := 0x20; c < 0x7F; c++ {
		t[c] = c != '\\'
	}
	return t
}()

// appendEscaped copies runs of plain bytes whole: nearly all of a tape is plain.
func appendEscaped(dst, b []byte) []byte {
	run := 0
	for i, c := range b {
		if plain[c] {
			continue
		}
		dst = append(dst, b[run:i]...)
		run = i + 1
		switch c {
		case '\\':
			dst = append(dst, '\\', '\\')
		case '\n':
			dst = append(dst, '\\', 'n')
		case '\r':
			dst = append(dst, '\\', 'r')
		case '\t':
			dst = append(dst, '\\', 't')
		default:
			dst = append(dst, '\\', 'x', hexDigits[c>>4], hexDigits[c&15])
		}
	}
	return append(dst, b[run:]...)
}
