package adapter

import (
	"errors"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
)

const columns = `name = "example"
columns = ["time", "-", "speed", "voltage"]
separator = ","
comment = "#"

[column.time]
scale = 0.001
wrap = 65536

[column.speed]
scale = 0.10471975511965977

[column.voltage]
scale = 0.001
`

// Columns with scales, a counter of milliseconds that wraps, comments and lines
// that are something else.
func TestColumns(t *testing.T) {
	a, err := Parse("x.toml", []byte(columns))
	if err != nil {
		t.Fatal(err)
	}
	r := NewReader(a)
	text := "# hello\r\n65530,x,600,12000\r\n65534,x,660,12000\r\nready\r\n2,x,720,-500\r\n2,x,720,-500\r\n\r\n6,x,oops,1\r\n"
	var got []Sample
	r.Feed([]byte(text), func(s Sample) { got = append(got, s) })
	want := "[{0 [65.53 62.8319 12]} {0.004 [65.534 69.115 12]} {0.008 [65.538 75.3982 -0.5]}]"
	if s := fmt.Sprintf("%.6g", got); s != want {
		t.Errorf("got  %s\nwant %s", s, want)
	}
	if r.Stats != (Stats{Samples: 3, Other: 2, Backward: 1}) {
		t.Errorf("%+v", r.Stats)
	}
}

// A pattern finds its groups inside lines with words; hex counts; no time of its own.
func TestPattern(t *testing.T) {
	a, err := Parse("x.toml", []byte("pattern = '^W=(?P<speed>-?\\d+) C=(?P<counts>[0-9A-F]{4})$'\nperiod_s = 0.01\n[column.counts]\nhex = true\nwrap = 65536\n"))
	if err != nil {
		t.Fatal(err)
	}
	r := NewReader(a)
	var got []Sample
	r.Feed([]byte("W=10 C=FFFE\nW=11 C=0003\nnoise W=11 C=0004\nW=12 C=0008\n"), func(s Sample) { got = append(got, s) })
	if s := fmt.Sprint(got); s != "[{0 [10 65534]} {0.01 [11 65539]} {0.02 [12 65544]}]" || r.Stats.Other != 1 {
		t.Errorf("%s, %+v", s, r.Stats)
	}
}

// Whatever way a stream is cut it gives the same samples, and a line that never
// ends is not held.
func TestCutsAndEndlessLines(t *testing.T) {
	a, err := Parse("x.toml", []byte(columns))
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 9))
	var text strings.Builder
	for i := range 500 {
		fmt.Fprintf(&text, "%d,q,%d,%d\n", i*3, rng.IntN(1000), rng.IntN(24000))
		if i%50 == 7 {
			text.WriteString(strings.Repeat("z", 1000) + "\n")
		}
	}
	var whole []Sample
	NewReader(a).Feed([]byte(text.String()), func(s Sample) { whole = append(whole, s) })
	for range 20 {
		r := NewReader(a)
		var got []Sample
		for rest := []byte(text.String()); len(rest) > 0; {
			n := min(1+rng.IntN(40), len(rest))
			r.Feed(rest[:n], func(s Sample) { got = append(got, s) })
			rest = rest[n:]
			if r.Pending() > LineMax {
				t.Fatalf("%d bytes are held", r.Pending())
			}
		}
		if fmt.Sprint(got) != fmt.Sprint(whole) || r.Stats.TooLong != 10 {
			t.Fatalf("%d samples, whole %d; %+v", len(got), len(whole), r.Stats)
		}
	}
}

func TestMistakesHaveTheirPlace(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"columns = [\"speed\"]\nperiod_s = 0.1\ncolour = 1\n", "x.toml:3:1: unknown key: colour"},
		{"columns = [\"speed\"\n", "x.toml:1:19: cannot be read"},
		{"columns = [\"speed\"]\n", "x.toml:1:1: value is not allowed: period_s: the lines carry no time"},
		{"name = \"a\"\ncolumns = [\"time\", \"sped\"]\n", "x.toml:2:1: value is not allowed: columns: \"sped\" is no quantity"},
		{"name = \"a\"\n\npattern = '(?P<speed>'\nperiod_s = 1\n", "x.toml:3:1: value is not allowed: pattern: error parsing"},
		{"columns = [\"time\", \"speed\"]\n[column.bus]\nscale = 2\n", "x.toml:2:1: value is not allowed: column.bus: there is no such column"},
		{"columns = [\"time\", \"counts\"]\n", "rad_per_count"},
		{"columns = [\"time\", \"bus\"]\n", "x.toml:1:1: value is not allowed: columns: want speed or counts"},
		{"columns = [\"time\", \"speed\", \"speed\"]\n", "stands twice"},
		{"", "want a pattern or columns"},
	} {
		_, err := Parse("x.toml", []byte(c.text))
		var f *FileError
		if err == nil || !strings.Contains(err.Error(), c.want) || !errors.As(err, &f) {
			t.Errorf("%q gives %v, want %q", c.text, err, c.want)
		}
	}
}

func FuzzReader(f *testing.F) {
	a, err := Parse("x.toml", []byte(columns))
	if err != nil {
		f.Fatal(err)
	}
	f.Add([]byte("1,a,2,3\n"))
	f.Fuzz(func(t *testing.T, b []byte) {
		r := NewReader(a)
		last := -1.0
		r.Feed(b, func(s Sample) {
			if len(s.Values) != 3 || s.Time <= last {
				t.Errorf("%+v after %v", s, last)
			}
			last = s.Time
		})
		if r.Pending() > LineMax {
			t.Errorf("%d bytes are held", r.Pending())
		}
	})
}
