package firmware_test

import (
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// vector is one file of protocol/testdata/vectors; its README says what they hold
// and where they are from.
type vector struct {
	name, takes string
	expect      []string
	body        []string // lines without comments, bytes still spelled
}

func vectors(t *testing.T) (all []vector) {
	t.Helper()
	for _, f := range glob(t, "../testdata/vectors/*.txt") {
		b, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		v := vector{name: filepath.Base(f)}
		head, body, ok := strings.Cut(string(b), "\n\n")
		if !ok {
			t.Fatalf("%s: no empty line", f)
		}
		for l := range strings.Lines(head) {
			switch key, value, _ := strings.Cut(strings.TrimSpace(l), ": "); key {
			case "takes":
				v.takes = value
			case "expect":
				v.expect = append(v.expect, value)
			}
		}
		for l := range strings.Lines(body) {
			if l = strings.TrimSuffix(l, "\n"); l != "" && l[0] != '#' {
				v.body = append(v.body, l)
			}
		}
		all = append(all, v)
	}
	return all
}

// TestVectorsOfArithmetic has the core's own functions work out the cases of the
// files on CRCs, numbers and their order.
func TestVectorsOfArithmetic(t *testing.T) {
	need(t, "gcc")
	out := filepath.Join(buildDir, "vectors")
	args := append([]string{"-Icore", "-Ihost", "-o", out}, warnings...)
	args = append(args, variants["float"]...)
	args = append(args, glob(t, "core/*.c", "host/vectors/*.c")...)
	if msg, err := exec.Command("gcc", args...).CombinedOutput(); err != nil {
		t.Fatalf("gcc: %v\n%s", err, msg)
	}
	var in, want []string
	add := func(order, result string) { in, want = append(in, order), append(want, result) }
	for _, v := range vectors(t) {
		for _, l := range v.body {
			first, rest, _ := strings.Cut(l, " ")
			switch v.takes {
			case "crc":
				add("crc "+rest, first)
			case "set-crc":
				add("set "+rest, first)
			case "newer":
				i := strings.LastIndexByte(l, ' ')
				add("newer "+l[:i], l[i+1:])
			}
		}
		if v.name == "numbers.txt" {
			for _, e := range v.expect {
				if word, ok := strings.CutPrefix(e, "no-integer "); ok {
					add("int "+word, "no")
				} else if i := strings.LastIndexByte(e, ' '); e[i+1:] == "4294967295" {
					add("int "+e[i+1:], "2147483647") // held at the end of the range, gw_text.c
				} else {
					add("int "+e[i+1:], e[i+1:])
				}
			}
		}
	}
	if len(in) < 30 {
		t.Fatalf("%d cases only", len(in))
	}
	cmd := exec.Command(out)
	cmd.Stdin = strings.NewReader(strings.Join(in, "\n") + "\n")
	msg, err := cmd.CombinedOutput()
	got := strings.Split(strings.TrimSpace(string(msg)), "\n")
	if err != nil || len(got) != len(want) {
		t.Fatalf("%v, %d answers to %d cases:\n%s", err, len(got), len(want), msg)
	}
	for i := range want {
		if got[i] != want[i] {
			t.Errorf("%s: %s, want %s", in[i], got[i], want[i])
		}
	}
}

// TestVectorsOfLines sends the bytes of the files for boards to the firmware and
// looks at what it makes of each line: an answer of that number, a refusal of the
// line, a cut, or nothing.
func TestVectorsOfLines(t *testing.T) {
	n := 0
	for _, v := range vectors(t) {
		if v.takes != "board" {
			continue
		}
		t.Run(v.name, func(t *testing.T) {
			b := start(t, "float")
			b.take()
			var got []string
			sent := 0
			for _, l := range v.body {
				p, err := strconv.Unquote(`"` + strings.ReplaceAll(l, `"`, `\"`) + `"`)
				if err != nil {
					t.Fatalf("%q: %v", l, err)
				}
				for _, piece := range strings.SplitAfter(p, "\n") {
					b.send([]byte(piece))
					b.run(40) // complaints come 10 ms apart (P1.4)
					sent++
					got = append(got, b.take()...)
				}
			}
			if sent < 4 {
				t.Fatalf("%d pieces", sent)
			}
			if want := answers(v.expect); strings.Join(heads(got), "|") != strings.Join(want, "|") {
				t.Errorf("sent %q\ngot  %q\nwant %q", v.body, heads(got), want)
			}
			n++
		})
	}
	if n < 3 {
		t.Errorf("%d files for boards", n)
	}
}

// answers is what a board says to what came out of its line parser. Motion lines
// have no answer, a line without a number that can be read neither (P3.2).
func answers(expect []string) (out []string) {
	for _, e := range expect {
		f := strings.Fields(e)
		switch {
		case f[0] == "cut":
			out = append(out, "cut")
		case f[0] == "bad-crc":
			out = append(out, "no 0 1")
		case f[0] == "too-long":
			out = append(out, "no 0 2")
		case f[0] == "malformed":
		case f[0] == "no-integer":
			out = append(out, "1") // the requests of that file have number 1 and a verb that no board knows
		case f[1] == "dv" || f[1] == "ds" || f[1] == "hb":
		default:
			out = append(out, f[2])
		}
	}
	return out
}

// heads shortens answers to what answers gives.
func heads(lines []string) (out []string) {
	for _, l := range lines {
		f := strings.Fields(l)
		switch {
		case f[0] == "cut":
			out = append(out, "cut")
		case f[0] == "no" && f[1] == "0":
			out = append(out, fmt.Sprint("no 0 ", f[2]))
		case f[0] == "ok" || f[0] == "no":
			out = append(out, f[1])
		default:
			out = append(out, l)
		}
	}
	return out
}
