package conformance

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
)

// rigLine is a Line to a simulated board in virtual time: Read moves the time.
type rigLine struct {
	rig *simrig.Rig
	now time.Duration
}

func (l *rigLine) Now() time.Duration      { return l.now }
func (l *rigLine) Write(p []byte) error    { l.rig.Receive(p); return nil }
func (l *rigLine) advance(d time.Duration) { l.now += d; l.rig.Advance(l.now) }
func (l *rigLine) restart() error          { l.rig.PowerCycle(); return nil }
func (l *rigLine) Read(until time.Duration) ([]byte, error) {
	for l.now < until {
		l.advance(min(time.Millisecond, until-l.now))
		if b := l.rig.Output(); len(b) > 0 {
			return b, nil
		}
	}
	return nil, nil
}

func loadRig(t *testing.T, name string) *simrig.Rig {
	t.Helper()
	cfg, err := simrig.Load(filepath.Join("../../testdata/rigs", name+".toml"))
	if err != nil {
		t.Fatal(err)
	}
	return simrig.New(cfg, 1)
}

func runRig(t *testing.T, name string, o Options) Report {
	t.Helper()
	l := &rigLine{rig: loadRig(t, name)}
	l.advance(200 * time.Millisecond)
	if o.Restart != nil {
		o.Restart = l.restart
	}
	rep, err := Run(l, o)
	if err != nil {
		t.Fatal(err)
	}
	return rep
}

func failed(r Report) (ids []string) {
	for _, c := range r.Checks {
		if !c.OK {
			ids = append(ids, c.ID)
		}
	}
	slices.Sort(ids)
	return ids
}

func tell(t *testing.T, r Report) {
	t.Helper()
	for _, c := range r.Checks {
		if !c.OK {
			t.Logf("%s %s: %s", c.ID, c.What, c.Detail)
		}
	}
	for _, l := range r.NotJudged {
		t.Logf("not judged: %s %s: %s", l.ID, l.What, l.Reason)
	}
}

func permitted(string) bool { return true }

var full = Options{Permit: permitted, Restart: func() error { return nil }}

// Boards of different loops, lines, laws and powers.
func TestHealthyBoardsConform(t *testing.T) {
	for _, name := range []string{"benchtop", "fine10k", "pidboard", "velocityform", "servo48", "coreless", "integers"} {
		t.Run(name, func(t *testing.T) {
			r := runRig(t, name, full)
			if !r.Conforms || r.Failed != 0 || r.Use != UseDrive || r.Protocol != "1.0" {
				t.Errorf("conforms %t, use %s (%s), protocol %q", r.Conforms, r.Use, r.Reason, r.Protocol)
				tell(t, r)
			}
		})
	}
}

// Without leave to move or to restart at least 60 checks are judged, and the
// motor's shaft and winding never saw a volt.
func TestNothingMovesUnasked(t *testing.T) {
	l := &rigLine{rig: loadRig(t, "benchtop")}
	l.advance(200 * time.Millisecond)
	r, err := Run(l, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if !r.Conforms || r.Passed < 60 || len(r.Checks) != r.Passed+r.Failed {
		t.Errorf("conforms %t, %d passed, %d failed", r.Conforms, r.Passed, r.Failed)
		tell(t, r)
	}
	if x := l.rig.Extremes(); x.Volts != 0 || x.Speed != 0 || l.rig.Angle() != 0 {
		t.Errorf("it moved: %+v, angle %v", x, l.rig.Angle())
	}
}

// The broken boards, and the checks that must find them. A fault that a whole
// paragraph is about fails every check of it, and nothing else.
func TestBrokenBoardsFailOnTheRightCheck(t *testing.T) {
	for name, want := range map[string]string{
		"notimeout":     "P6.4a",
		"wrongcrc":      "P1.2a",
		"gainsdiffer":   "P8.3h",
		"limitslie":     "P7.2g P7.2h P7.4a P7.4b P7.5a",
		"oldnumber":     "P2.2b P6.1b P6.1c P6.1d P6.2c",
		"stalesequence": "P5.4a",
		"resetsitself":  "P12.3a",
		"ignorescut":    "P2.1a P2.1b P2.1c P2.1d P2.1e P2.1f P2.2a P2.2b P2.2c P2.2d P2.3a P2.3b P2.3c P2.4a P2.4b",
	} {
		t.Run(name, func(t *testing.T) {
			r := runRig(t, name, full)
			got := strings.Join(failed(r), " ")
			if got != want || r.Conforms || r.Use != UseLookOnly {
				t.Errorf("failed %q, wanted %q; conforms %t, use %s", got, want, r.Conforms, r.Use)
				tell(t, r)
			}
		})
	}
}

func TestIDsAreThoseOfTheSpecification(t *testing.T) {
	spec, err := os.ReadFile("../../protocol/SPEC.md")
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for _, c := range list() {
		if seen[c.id] {
			t.Errorf("%s comes twice", c.id)
		}
		seen[c.id] = true
		paragraph := c.id[:len(c.id)-1]
		if !strings.Contains(string(spec), "**"+paragraph+"**") {
			t.Errorf("%s: SPEC.md has no %s", c.id, paragraph)
		}
		if c.needs != "" && !seen[c.needs] {
			t.Errorf("%s needs %s, which comes later or never", c.id, c.needs)
		}
	}
	for _, d := range deciding {
		if !seen[d] {
			t.Errorf("%s decides and does not exist", d)
		}
	}
	if len(seen) < 60 {
		t.Errorf("%d checks", len(seen))
	}
}

// What the checks change is as found after a part of them, too, and where a
// person ends them while other gains are stored.
func TestLimitsAndGainsAreLeftAsFound(t *testing.T) {
	cases := []Options{{Only: []string{"P6.2a", "P7.2f"}}, {Only: []string{"P8.3"}}}
	for late := range 60 { // ends at every step of the checks that store
		storing, steps := false, 0
		cases = append(cases, Options{
			Only: []string{"P8.3a", "P8.3e", "P8.3h"},
			Interrupted: func() bool {
				if storing {
					steps++
				}
				return steps > late
			},
			Progress: func(r Result) { storing = storing || r.ID == "P8.3e" },
		})
	}
	for i, o := range cases {
		l := &rigLine{rig: loadRig(t, "benchtop")}
		l.advance(200 * time.Millisecond)
		before := asked(t, l)
		r, err := Run(l, o)
		if err != nil && !errors.Is(err, ErrInterrupted) || r.NotRestored != "" {
			t.Errorf("%v, %s", err, r.NotRestored)
		}
		if after := asked(t, l); after != before {
			t.Errorf("case %d: limits and gains %s, before %s", i, after, before)
		}
	}
	if r := runRig(t, "gainsdiffer", Options{Brief: true}); !strings.HasPrefix(r.NotRestored, "gains are not as found: ") {
		t.Errorf("a board that cannot store was left with %q", r.NotRestored)
	}
}

// asked are the CRCs of limits and gains as the board gives them.
func asked(t *testing.T, l Line) string {
	t.Helper()
	s := newSession(l, Options{})
	s.n = 9000
	var all []string
	for _, q := range []string{"lim crc", "gain crc run", "gain crc store"} {
		verb, args, _ := strings.Cut(q, " ")
		a, err := s.must(verb, args)
		if err != nil {
			t.Fatal(err)
		}
		all = append(all, a.field(0))
	}
	return strings.Join(all, " ")
}
