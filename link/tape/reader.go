package tape

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"
	"time"
)

// Errors of a tape, inside a ParseError.
var (
	ErrHeader    = errors.New("not a tape: the first line must be \"" + headerWord + "TIME\"")
	ErrTime      = errors.New("time is not a count of microseconds")
	ErrDirection = errors.New("direction is not one of < > ! #")
	ErrEscape    = errors.New("escape is not one of \\\\ \\n \\r \\t \\xHH")
	ErrByte      = errors.New("byte must be written as an escape")
)

// ParseError is an error in a tape with its place. Line and column are
// 1-indexed, the column counts bytes.
type ParseError struct {
	Line, Column int
	Err          error
}

func (e *ParseError) Error() string {
	return fmt.Sprintf("tape:%d:%d: %v", e.Line, e.Column, e.Err)
}

// Unwrap returns what is wrong.
func (e *ParseError) Unwrap() error { return e.Err }

// Reader reads a tape record by record.
type Reader struct {
	// Start is the wall clock at time 0, from the header.
	Start time.Time

	in   *bufio.Reader
	line int
	cut  bool
}

// NewReader reads the header of a tape. A file that ends within the header is a
// tape that was cut, not an error.
func NewReader(r io.Reader) (*Reader, error) {
	t := &Reader{in: bufio.NewReader(r)}
	text, err := t.next()
	if err != nil && err != io.EOF {
		return nil, err
	}
	stamp, found := strings.CutPrefix(string(text), headerWord)
	if t.cut && (found || strings.HasPrefix(headerWord, string(text))) {
		return t, nil
	}
	if t.Start, err = time.Parse(time.RFC3339Nano, stamp); !found || err != nil {
		return nil, &ParseError{1, 1, ErrHeader}
	}
	return t, nil
}

// Cut reports whether the tape ended in the middle of a line. It is known when
// Next has returned io.EOF.
func (t *Reader) Cut() bool { return t.cut }

// Next returns the next record, io.EOF at the end, or a *ParseError, after which
// the reader goes on with the next line. Of a record that was cut off by the end
// of the file, the bytes before the cut are returned.
func (t *Reader) Next() (Record, error) {
	for {
		if t.cut {
			return Record{}, io.EOF
		}
		text, err := t.next()
		if err != nil {
			return Record{}, err
		}
		rec, column, err := parse(text, t.cut)
		if err != nil {
			return Record{}, &ParseError{t.line, column, err}
		}
		if rec.Dir != 0 {
			return rec, nil
		}
	}
}

// ReadAll returns all records and the first error. Records after a bad line are
// returned too.
func (t *Reader) ReadAll() ([]Record, error) {
	var all []Record
	var first error
	for {
		rec, err := t.Next()
		var pe *ParseError
		switch {
		case err == nil:
			all = append(all, rec)
		case errors.As(err, &pe):
			if first == nil {
				first = err
			}
		case err == io.EOF:
			return all, first
		default:
			return all, err
		}
	}
}

// next returns a line without its end and notes whether the end was missing.
func (t *Reader) next() ([]byte, error) {
	text, err := t.in.ReadBytes('\n')
	t.line++
	if err == io.EOF {
		t.cut = len(text) > 0 || t.line == 1
		if !t.cut {
			return nil, io.EOF
		}
		return text, nil
	}
	if err != nil {
		return nil, fmt.Errorf("tape:%d: %w", t.line, err)
	}
	return bytes.TrimSuffix(text[:len(text)-1], []byte("\r")), nil
}

// parse reads one line. A line that was cut before its text gives a Record
// without a direction and no error.
func parse(text []byte, cut bool) (rec Record, column int, err error) {
	number, rest, found := bytes.Cut(text, []byte(" "))
	if !found && cut && isDigits(number) {
		return Record{}, 0, nil
	}
	micros, err := strconv.ParseInt(string(number), 10, 64)
	if err != nil || !isDigits(number) || micros > int64(time.Duration(1<<63-1)/time.Microsecond) {
		return Record{}, 1, ErrTime
	}
	column = len(number) + 2
	if cut && (len(rest) == 0 || len(rest) == 1 && Dir(rest[0]).valid()) {
		return Record{}, 0, nil
	}
	if len(rest) < 2 || !Dir(rest[0]).valid() || rest[1] != ' ' {
		return Record{}, column, ErrDirection
	}
	b, at, err := unescape(rest[2:], cut)
	if err != nil {
		return Record{}, column + 2 + at, err
	}
	return Record{time.Duration(micros) * time.Microsecond, Dir(rest[0]), b}, 0, nil
}

func isDigits(b []byte) bool {
	for _, c := range b {
		if c < '0' || c > '9' {
			return false
		}
	}
	return len(b) > 0
}

// unescape gives the bytes of text, or the place in it that is wrong. An escape
// that was cut is left out.
func unescape(text []byte, cut bool) (b []byte, at int, err error) {
	for i := 0; i < len(text); {
		c := text[i]
		if c < 0x20 || c >= 0x7F {
			return nil, i, ErrByte
		}
		n := 1
		if c == '\\' {
			if c, n = unescapeOne(text[i:]); n == 0 {
				if cut && len(text)-i < 4 && isEscapeStart(text[i:]) {
					return b, 0, nil
				}
				return nil, i, ErrEscape
			}
		}
		b = append(b, c)
		i += n
	}
	return b, 0, nil
}

// isEscapeStart reports whether more text could make an escape of s.
func isEscapeStart(s []byte) bool {
	return len(s) == 1 || s[1] == 'x' && (len(s) == 2 || hexValue(s[2]) >= 0)
}

// unescapeOne reads the escape at the start of s; n is 0 if it is none.
func unescapeOne(s []byte) (c byte, n int) {
	if len(s) < 2 {
		return 0, 0
	}
	switch s[1] {
	case '\\':
		return '\\', 2
	case 'n':
		return '\n', 2
	case 'r':
		return '\r', 2
	case 't':
		return '\t', 2
	case 'x':
		if len(s) >= 4 && hexValue(s[2]) >= 0 && hexValue(s[3]) >= 0 {
			return byte(hexValue(s[2])<<4 | hexValue(s[3])), 4
		}
	}
	return 0, 0
}

func hexValue(c byte) int {
	switch {
	case c >= '0' && c <= '9':
		return int(c - '0')
	case c >= 'A' && c <= 'F':
		return int(c-'A') + 10
	case c >= 'a' && c <= 'f':
		return int(c-'a') + 10
	}
	return -1
}
