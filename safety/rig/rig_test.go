package rig

import (
	"errors"
	"flag"
	"math"
	"os"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"gainwright/safety"
)

var update = flag.Bool("update", false, "write README.md's table anew")

const small = `name = "bench"
[motor]
voltage_rated_V = 24
speed_max_rpm = 3000
current_max_A = 5
[drive]
kind = "volts"
quadrants = 4
bus_nominal_V = 24
[encoder]
counts_per_turn = 2000
[load]
state = "bare"
`

func TestSmallestFileGivesAnEnvelope(t *testing.T) {
	r, err := Parse("RIG.toml", []byte(small))
	if err != nil {
		t.Fatal(err)
	}
	env := r.Envelope()
	if env.VoltsMax != 24 || math.Abs(float64(env.SpeedMax)-314.159265) > 1e-5 || env.CurrentMax != 5 {
		t.Errorf("envelope is not the nameplate: %+v", env)
	}
	if env.BusMax != 30 || !env.Reverse || !env.Brake {
		t.Errorf("bus %v, reverse %v, brake %v", env.BusMax, env.Reverse, env.Brake)
	}
	p := safety.Plan{Segments: []safety.Segment{{Mode: safety.ModeVolts, From: 0, To: 24, Duration: 1e9}}}
	if _, err := env.Admit(p); err != nil {
		t.Errorf("the nameplate's own volts are refused: %v", err)
	}
	p.Segments[0].To = 24.1
	if _, err := env.Admit(p); err == nil {
		t.Error("more volts than the nameplate's are admitted")
	}
}

// The bus ceiling of a 48 V rig has to stay under 60 V, the PELV ceiling in the
// dry of EN 60204-1, 6.4.1.
func TestBusOf48VStaysUnder60V(t *testing.T) {
	r, err := Parse("RIG.toml", []byte(strings.ReplaceAll(small, "bus_nominal_V = 24", "bus_nominal_V = 48")))
	if err != nil || r.Drive.BusMax != 57 {
		t.Errorf("bus ceiling %v, error %v; want 57 V", r.Drive.BusMax, err)
	}
}

func TestErrorsHaveTheirPlace(t *testing.T) {
	for _, c := range []struct {
		name, old, new string
		kind           error
		want           string
	}{
		{"unknown key", "current_max_A = 5", "current_max_A = 5\nspeed_max = 3", ErrUnknownKey, "RIG.toml:6:1: motor.speed_max: no such key; did you mean motor.speed_max_rpm?"},
		{"unknown table", "[load]", "[motr]\nx = 1\n[load]", ErrUnknownKey, "RIG.toml:12:2: motr"},
		{"syntax", "quadrants = 4", "quadrants = = 4", ErrSyntax, "RIG.toml:8:"},
		{"type", "speed_max_rpm = 3000", `speed_max_rpm = "fast"`, ErrType, "RIG.toml:4:"},
		{"nan", "speed_max_rpm = 3000", "speed_max_rpm = nan", ErrRange, "RIG.toml:4:17: motor.speed_max_rpm: NaN"},
		{"inf", "speed_max_rpm = 3000", "speed_max_rpm = +inf", ErrRange, "RIG.toml:4:17: motor.speed_max_rpm: +Inf"},
		{"range", "voltage_rated_V = 24", "voltage_rated_V = 900", ErrRange, "RIG.toml:3:19: motor.voltage_rated_V: 900 V is not from 0.5 to 400"},
		{"missing", "counts_per_turn = 2000", "", ErrMissing, "RIG.toml: encoder.counts_per_turn: missing"},
		{"word", `kind = "volts"`, `kind = "steam"`, ErrRange, `RIG.toml:7:8: drive.kind: "steam" is none of volts, current`},
		{"quadrants", "quadrants = 4", "quadrants = 3", ErrRange, "RIG.toml:8:13: drive.quadrants: 3 is none of 1, 2, 4"},
		{"loosened", `state = "bare"`, "state = \"bare\"\n[limits]\nspeed_rpm = 3001", ErrLoosened, "RIG.toml:15:13: limits.speed_rpm: 3001 rpm is looser than 3000 rpm"},
		{"bus", "bus_nominal_V = 24", "bus_nominal_V = 24\nbus_min_V = 25", ErrRange, "RIG.toml:10:13: drive.bus_min_V"},
		{"heartbeat", `state = "bare"`, "state = \"bare\"\n[timing]\nheartbeat_ms = 200", ErrRange, "timing.board_timeout_ms: 250 is under two heartbeats"},
		{"inline", "[encoder]\ncounts_per_turn = 2000", "encoder_x = 1\n[encoder]\ncounts_per_turn = 2000", ErrUnknownKey, "RIG.toml:10:1"},
		{"interlock twice", `state = "bare"`, "state = \"bare\"\n[[interlock]]\nbit=1\nname=\"a\"\n[[interlock]]\nbit=1\nname=\"b\"", ErrRange, "RIG.toml:18:5: interlock.1.bit: 1 is there twice"},
		{"interlock check", `state = "bare"`, "state = \"bare\"\n[checks]\ninterlock = true", ErrMissing, "RIG.toml:15:13: checks.interlock"},
	} {
		t.Run(c.name, func(t *testing.T) {
			text := strings.Replace(small, c.old, c.new, 1)
			if text == small {
				t.Fatal("the case changes nothing")
			}
			_, err := Parse("RIG.toml", []byte(text))
			if !errors.Is(err, c.kind) {
				t.Errorf("error %v, want %v", err, c.kind)
			}
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("error\n  %v\nwant in it\n  %s", err, c.want)
			}
		})
	}
}

// Every key takes neither nan nor a value outside its range.
func TestEveryNumberIsHeldToItsRange(t *testing.T) {
	base, err := Parse("RIG.toml", []byte(small))
	if err != nil {
		t.Fatal(err)
	}
	for i := range keys {
		k := &keys[i]
		for _, v := range []float64{math.NaN(), math.Inf(1), math.Inf(-1), k.max*1.01 + 1, k.min - 1} {
			r := base
			p, ok := k.at(&r).(*float64)
			if !ok {
				continue
			}
			*p = v
			c := checker{file: "x", r: &r, at: map[string]Place{k.path: {1, 1}}}
			c.key(k)
			if len(c.errs) != 1 || !errors.Is(c.errs[0], ErrRange) {
				t.Errorf("%s = %v: errors %v", k.path, v, c.errs)
			}
		}
	}
}

func TestLoosenedReasonIsKept(t *testing.T) {
	text := small + "[limits]\nspeed_rpm = 3001\nloosened_reason = \"gear checked for 3500\"\n"
	r, err := Parse("RIG.toml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	if got := r.Envelope().Loosened; got != "gear checked for 3500" {
		t.Errorf("reason %q is lost", got)
	}
}

func TestMarshalReadsBackEqual(t *testing.T) {
	text := strings.Replace(small, `state = "bare"`, `state = "loaded"
note = "a \"quoted\" note\u0007"
[limits]
turns = 3.25
volts_V = 12.1
[stop]
style = "ramp-and-cut"
[[interlock]]
bit = 0
name = "guard"
[[interlock]]
bit = 1
name = "enabling switch"
kind = "enabling"
[[interlock]]
bit = 2
name = "pressed through"
kind = "enabling-through"
`, 1)
	text = strings.Replace(text, `name = "bench"`, "name = \"bench\"\nchecklist = [\"glasses on\", \"disc guarded\"]\nacceptance = [\"stops within a turn\"]", 1)
	one, err := Parse("RIG.toml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range []Rig{one} {
		out := Marshal(r)
		two, err := Parse("again.toml", out)
		if err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
		if d := cmp.Diff(r, two, cmpopts.IgnoreFields(Rig{}, "Hash")); d != "" {
			t.Errorf("reads back different (-wrote +read):\n%s", d)
		}
	}
}

func TestEncoderBehindTheGear(t *testing.T) {
	text := strings.Replace(small, "counts_per_turn = 2000", "counts_per_turn = 4000\nside = \"load\"\ngear_ratio = 20", 1)
	r, err := Parse("RIG.toml", []byte(text))
	if err != nil || r.CountsPerMotorTurn() != 200 {
		t.Errorf("%v counts a motor turn, error %v; want 200", r.CountsPerMotorTurn(), err)
	}
}

func TestRefusedRigsAdmitNothing(t *testing.T) {
	p := safety.Plan{Segments: []safety.Segment{{Mode: safety.ModeVolts, From: 0, To: 1, Duration: 1e9}}}
	for _, c := range [][2]string{
		{`kind = "volts"`, `kind = "current"`},
		{`state = "bare"`, "state = \"loaded\"\ngravity = true"},
	} {
		r, err := Parse("RIG.toml", []byte(strings.Replace(small, c[0], c[1], 1)))
		if err != nil {
			t.Fatal(err)
		}
		if _, err := r.Envelope().Admit(p); !errors.Is(err, safety.ErrRefused) {
			t.Errorf("%s: admitted, error %v", c[1], err)
		}
	}
}

func TestReadmeIsTheTable(t *testing.T) {
	const file = "README.md"
	const from, to = "<!-- keys -->\n", "<!-- end of keys -->"
	b, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	head, rest, ok := strings.Cut(string(b), from)
	_, tail, ok2 := strings.Cut(rest, to)
	if !ok || !ok2 {
		t.Fatal("README.md has lost its marks")
	}
	want := head + from + Describe() + to + tail
	if *update {
		if err := os.WriteFile(file, []byte(want), 0o644); err != nil {
			t.Fatal(err)
		}
	} else if want != string(b) {
		t.Error("README.md is not the table of keys: go test ./safety/rig -update")
	}
	for _, block := range strings.Split(string(b), "```toml\n")[1:] {
		text, _, _ := strings.Cut(block, "```")
		if _, err := Parse("README.md", []byte(text)); err != nil {
			t.Errorf("the example does not read: %v", err)
		}
	}
}

func FuzzParse(f *testing.F) {
	f.Add([]byte(small))
	f.Add([]byte("[[interlock]]\nbit = 3\ninterlock = {bit=1}"))
	f.Add([]byte("motor = {voltage_rated_V = nan}"))
	f.Fuzz(func(t *testing.T, b []byte) {
		r, err := Parse("f", b)
		if err != nil {
			return
		}
		two, err := Parse("g", Marshal(r))
		if err != nil {
			t.Fatalf("%v\n%s", err, Marshal(r))
		}
		if d := cmp.Diff(r, two, cmpopts.IgnoreFields(Rig{}, "Hash"), cmpopts.EquateEmpty()); d != "" {
			t.Fatal(d)
		}
	})
}
