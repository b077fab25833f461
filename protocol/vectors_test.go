package protocol

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// vector is one file of testdata/vectors; its README.md says what it means.
type vector struct {
	takes  string
	scale  Scales
	expect []string
	body   string // lines of the body without comments, as they stand
}

func readVector(t *testing.T, path string) (v vector) {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	head, body, ok := strings.Cut(string(b), "\n\n")
	if !ok {
		t.Fatalf("%s: no empty line after the headers", path)
	}
	for i, l := range strings.Split(head, "\n") {
		key, value, _ := strings.Cut(l, ": ")
		switch key {
		case "tests":
		case "takes":
			v.takes = value
		case "scale":
			fmt.Sscan(value, &v.scale.SpeedLSB, &v.scale.VoltsLSB, &v.scale.CurrentLSB, &v.scale.BusLSB)
		case "expect":
			v.expect = append(v.expect, value)
		default:
			t.Fatalf("%s:%d: unknown header %q", path, i+1, key)
		}
	}
	for _, l := range strings.Split(body, "\n") {
		if !strings.HasPrefix(l, "#") && l != "" {
			v.body += l + "\n"
		}
	}
	return v
}

// bytesOf undoes the escapes of a body.
func (v vector) bytesOf(t *testing.T) []byte {
	t.Helper()
	var out []byte
	s := strings.ReplaceAll(v.body, "\n", "")
	for s != "" {
		c, _, rest, err := strconv.UnquoteChar(s, 0)
		if err != nil {
			t.Fatalf("escape at %q: %v", s, err)
		}
		out = append(out, byte(c))
		s = rest
	}
	return out
}

var errorWords = []struct {
	err  error
	word string
}{{ErrBadCRC, "bad-crc"}, {ErrNoCRC, "no-crc"}, {ErrTooLong, "too-long"}, {ErrNotASCII, "not-ascii"}, {ErrMalformed, "malformed"}}

func errorWord(err error) string {
	for _, e := range errorWords {
		if errors.Is(err, e.err) {
			return e.word
		}
	}
	return err.Error()
}

// told collects what a Framer reports, in the words of the vectors.
type told []string

func (h *told) Line(body []byte)          { *h = append(*h, "line "+string(body)) }
func (h *told) Bad(raw []byte, err error) { *h = append(*h, errorWord(err)) }
func (h *told) Sample(s Sample) {
	flags := ""
	if s.Saturated {
		flags += "s"
	}
	if s.TripHeld {
		flags += "t"
	}
	if flags == "" {
		flags = "-"
	}
	line := fmt.Sprintf("sample %d %d %v %.6f %.6f %s", s.Seq, s.BoardUS, s.State, float64(s.Speed), float64(s.Volts), flags)
	if s.Has&HasCounts != 0 {
		line += fmt.Sprintf(" %.6f %.6f %.6f %d", float64(s.Current), float64(s.Bus), float64(s.Setpoint), s.Counts)
	}
	*h = append(*h, line)
}

// asBoard reads bytes as P1 and P2 ask of a board.
func asBoard(b []byte) (out []string) {
	var line []byte
	for _, c := range b {
		switch {
		case c == Cut:
			line = nil
			out = append(out, "cut")
		case c == '\n':
			out = append(out, asRequest(line)...)
			line = nil
		case c != '\r':
			line = append(line, c)
		}
	}
	return out
}

func asRequest(line []byte) []string {
	if len(line) == 0 {
		return nil
	}
	if len(line) >= LineMax {
		return []string{"too-long"}
	}
	body, err := SplitCRC(line)
	if err != nil {
		return []string{errorWord(err)}
	}
	c, _, err := ParseCommand(nil, body)
	if err != nil {
		return []string{errorWord(err)}
	}
	args := string(bytes.Join(c.Args, []byte(" ")))
	if c.Verb == "x" { // the vectors of integers
		if _, ok := ParseInt(c.Args[0]); !ok {
			return []string{"no-integer " + args}
		}
	}
	return []string{strings.TrimSpace(fmt.Sprintf("request %s %d %s", c.Verb, c.N, args))}
}

// arithmetic computes one case of a body and says what was expected of it.
func arithmetic(t *testing.T, takes, line string) (got, want string) {
	t.Helper()
	switch takes {
	case "crc":
		want, text, _ := strings.Cut(line, " ")
		return fmt.Sprintf("%04X", CRC16([]byte(text))), want
	case "set-crc":
		words := strings.Fields(line)
		var set []uint32
		for _, w := range words[1:] {
			v, ok := ParseHex32([]byte(w))
			if !ok {
				t.Fatalf("%q: not eight digits", w)
			}
			set = append(set, v)
		}
		return fmt.Sprintf("%04X", SetCRC(set)), words[0]
	case "sequence":
		var stages int
		var seed uint16
		if _, err := fmt.Sscan(line, &stages, &seed, &want); err != nil {
			t.Fatalf("%q: %v", line, err)
		}
		for _, up := range Sequence(stages, seed)[:len(want)] {
			if up {
				got += "1"
			} else {
				got += "0"
			}
		}
		return got, want
	case "newer":
		var k, last uint16
		if _, err := fmt.Sscan(line, &k, &last, &want); err != nil {
			t.Fatalf("%q: %v", line, err)
		}
		if Newer(k, last) {
			return "yes", want
		}
		return "no", want
	}
	t.Fatalf("takes %q", takes)
	return "", ""
}

func TestVectors(t *testing.T) {
	files, err := filepath.Glob("testdata/vectors/*.txt")
	if err != nil || len(files) < 13 {
		t.Fatalf("%d vectors: %v", len(files), err)
	}
	for _, path := range files {
		t.Run(filepath.Base(path), func(t *testing.T) {
			v := readVector(t, path)
			switch v.takes {
			case "console":
				var got told
				f := Framer{Scales: v.scale}
				f.Feed(v.bytesOf(t), &got)
				compare(t, got, v.expect)
			case "board":
				compare(t, asBoard(v.bytesOf(t)), v.expect)
			default:
				for _, l := range strings.Split(strings.TrimSpace(v.body), "\n") {
					if got, want := arithmetic(t, v.takes, l); got != want {
						t.Errorf("%q: %s, want %s", l, got, want)
					}
				}
			}
		})
	}
}

func compare(t *testing.T, got, want []string) {
	t.Helper()
	for i := range max(len(got), len(want)) {
		g, w := "nothing", "nothing"
		if i < len(got) {
			g = got[i]
		}
		if i < len(want) {
			w = want[i]
		}
		if g != w {
			t.Errorf("%d: got  %s\n   want %s", i+1, g, w)
		}
	}
}
