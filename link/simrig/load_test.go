package simrig

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
)

func rigFiles(t testing.TB) []string {
	all, err := filepath.Glob("../../testdata/rigs/*.toml")
	if err != nil {
		t.Fatal(err)
	}
	var boards []string
	for _, f := range all {
		if !strings.HasSuffix(f, ".rig.toml") {
			boards = append(boards, f)
		}
	}
	if len(boards) < 24 {
		t.Fatalf("only %d boards", len(boards))
	}
	return boards
}

func TestErrorsHaveTheirPlace(t *testing.T) {
	b, err := os.ReadFile("../../testdata/rigs/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	good := string(b)
	lines := strings.Split(good, "\n")
	lineOf := func(key string) int {
		for i, l := range lines {
			if strings.HasPrefix(l, key) {
				return i + 1
			}
		}
		t.Fatalf("no %q in the file", key)
		return 0
	}
	for _, tc := range []struct {
		name, from, to string
		line, column   int
		want           error
	}{
		{"unknown key", "resistance_ohm = 2.6", "resistance_ohm = 2.6\nresistence = 3", lineOf("resistance_ohm") + 1, 1, ErrUnknownKey},
		{"unknown table", "[motor]", "[moter]", lineOf("[motor]"), 2, ErrUnknownKey},
		{"missing key", "inductance_H = 0.0025\n", "", lineOf("[motor]"), 2, ErrMissingKey},
		{"not a number", "resistance_ohm = 2.6", "resistance_ohm = nan", lineOf("resistance_ohm"), 1, ErrRange},
		{"infinite", "resistance_ohm = 2.6", "resistance_ohm = inf", lineOf("resistance_ohm"), 1, ErrRange},
		{"out of range", "counts_per_turn = 2000", "counts_per_turn = 3", lineOf("counts_per_turn"), 1, ErrRange},
		{"wrong type", "counts_per_turn = 2000", "counts_per_turn = \"many\"", lineOf("counts_per_turn"), 19, ErrSyntax},
		{"syntax", "[motor]", "[motor", lineOf("[motor]"), 1, ErrSyntax},
		{"twice", "[motor]", "[motor]\nresistance_ohm = 1.0", lineOf("resistance_ohm") + 1, 1, ErrSyntax},
		{"word", "ki = 2.2\n", "ki = 2.2\n[[fault]]\nkind = \"gremlin\"\n", lineOf("ki") + 2, 1, ErrRange},
		{"static below Coulomb", "static_Nm = 0.0208", "static_Nm = 0.001", lineOf("static_Nm"), 1, ErrRange},
		{"delay over the period", "compute_delay_us = 100", "compute_delay_us = 1001", lineOf("compute_delay_us"), 1, ErrRange},
		{"control byte", "firmware = \"bench 2.4\"", "firmware = \"bench\\u001b[2J\"", lineOf("firmware"), 1, ErrRange},
	} {
		text := strings.Replace(good, tc.from, tc.to, 1)
		if text == good {
			t.Fatalf("%s: nothing replaced", tc.name)
		}
		_, err := Parse("b.toml", []byte(text))
		var fe *FileError
		if !errors.As(err, &fe) || !errors.Is(err, tc.want) {
			t.Errorf("%s: %v, want %v", tc.name, err, tc.want)
			continue
		}
		if tc.name == "syntax" || tc.name == "wrong type" {
			tc.column = fe.Column // where exactly is the parser's choice
		}
		if fe.Line != tc.line || fe.Column != tc.column || !strings.HasPrefix(err.Error(), "b.toml:") {
			t.Errorf("%s: %v, want line %d column %d", tc.name, err, tc.line, tc.column)
		}
	}
	if _, err := Load("no such file.toml"); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("%v", err)
	}
}

func TestEveryRigFileTurnsAShaft(t *testing.T) {
	refused := 0
	for _, f := range rigFiles(t) {
		cfg, err := Load(f)
		if err != nil {
			t.Error(err)
			continue
		}
		if cfg.Name != strings.TrimSuffix(filepath.Base(f), ".toml") {
			t.Errorf("%s: name %q", f, cfg.Name)
		}
		if (cfg.Expect == "refused") != (cfg.Cause != "") {
			t.Errorf("%s: expect %q with cause %q", f, cfg.Expect, cfg.Cause)
		}
		if cfg.Expect == "refused" {
			refused++
			continue
		}
		t.Run(cfg.Name, func(t *testing.T) { turn(t, cfg) })
	}
	if refused < 10 {
		t.Errorf("only %d rigs that must be refused", refused)
	}
}

// turn drives a healthy rig at 40 % and compares board, shaft and truth.
func turn(t *testing.T, cfg Config) {
	c := newConsole(t, cfg)
	n := &cfg.Nameplate
	c.hold(map[string]float64{"vmax": n.VoltsMax, "wmax": n.SpeedMax, "vbreak": 0.4 * n.VoltsRated, "bmax": n.BusMax})
	tr := c.r.Truth(0.4 * n.SpeedMax)
	if tr.Gain <= 0 || tr.TimeConstant <= 0 || tr.Den[0] <= 0 || tr.BreakawayForward <= 0 || tr.BreakawayForward > 0.2*n.VoltsRated {
		t.Fatalf("%+v", tr)
	}
	hz := "100"
	if cfg.Board.LoopUS > 5000 {
		hz = "50"
	}
	c.must("rate", hz+" x t")
	c.arm()
	v := 0.4 * n.VoltsRated
	for _, u := range []float64{v, -v} {
		if u < 0 && cfg.Driver.Quadrants != 4 {
			break
		}
		c.volts(time.Duration((8*tr.TimeConstant+0.3)*1e9), u)
		w := c.r.Speed()
		at := c.r.Truth(w)
		want := at.Gain * (u - at.OffsetVolts)
		// The winding warms and the bus sags a little while it turns.
		if math.Abs(w-want) > 0.01*math.Abs(want) {
			t.Errorf("%g V: %g rad/s, linearised %g", u, w, want)
		}
		s := c.last()
		if math.Abs(float64(s.Speed)-w) > c.r.speedStep*1.3+0.01*math.Abs(w) {
			t.Errorf("%g V: board %g rad/s, shaft %g, step %g", u, s.Speed, w, c.r.speedStep)
		}
		if s.State != protocol.Driving {
			t.Fatalf("%v, events %q", s.State, c.events)
		}
	}
	// A reversal from speed draws more than the plate allows on purpose here;
	// from rest it must not.
	for _, viol := range c.r.Extremes().Violations {
		if viol.What != "current" && viol.What != "bus" {
			t.Errorf("%+v", viol)
		}
	}
}
