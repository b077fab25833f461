package main

import (
	"bytes"
	"encoding/json"
	"strings"
	"testing"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
)

// served serves a simulated board on a pseudo-terminal in real time.
func served(t *testing.T, file string) string {
	t.Helper()
	cfg, err := simrig.Load(file)
	if err != nil {
		t.Fatal(err)
	}
	sim, err := bench.ServePTY(simrig.New(cfg, 1))
	if err != nil {
		t.Skip(err)
	}
	t.Cleanup(func() { sim.Close() })
	return sim.Path
}

// The same checks as in virtual time, here through a pseudo-terminal; a few, so
// that the test does not take the minutes of all.
func TestConformanceOverAPort(t *testing.T) {
	path := served(t, "../../testdata/rigs/benchtop.toml")
	var out, say bytes.Buffer
	code := run([]string{"conformance", "--port", path, "--only", "P4,P3,P2.2,P2.3a,P6.2a,P6.4a,P1.2,P12.1a", "--json"}, &out, &say)
	var rep struct {
		Protocol       string
		Passed, Failed int
		Checks         []struct {
			ID string
			OK bool
		}
		Conforms bool
		Use      string
		Reason   string
	}
	if err := json.Unmarshal(out.Bytes(), &rep); err != nil {
		t.Fatalf("%v\n%s%s", err, &out, &say)
	}
	if code != exitFailed || rep.Conforms || rep.Use != "look-only" || !strings.HasPrefix(rep.Reason, "not judged: ") {
		t.Errorf("exit %d, conforms %t, use %s (%s): some of what decides was not asked for", code, rep.Conforms, rep.Use, rep.Reason)
	}
	if rep.Failed != 0 || rep.Passed < 20 || rep.Protocol != "1.0" || len(rep.Checks) != rep.Passed {
		t.Errorf("%d passed, %d failed: %s", rep.Passed, rep.Failed, &out)
	}
}

func TestConformanceNamesABrokenBoard(t *testing.T) {
	path := served(t, "../../testdata/rigs/ignorescut.toml")
	var out, say bytes.Buffer
	code := run([]string{"conformance", "--port", path, "--only", "P2.1a"}, &out, &say)
	for _, want := range []string{"FAIL P2.1a ", "Use: look-only", "not met: P2.1a"} {
		if !strings.Contains(out.String(), want) {
			t.Errorf("%q is not in\n%s", want, &out)
		}
	}
	if code != exitFailed {
		t.Errorf("exit %d", code)
	}
}

func TestConformanceUsage(t *testing.T) {
	for _, args := range [][]string{{"conformance"}, {"conformance", "--port", "/nowhere/port"}, {"conformance", "--port", "x", "--move"}} {
		var out, say bytes.Buffer
		if code := run(args, &out, &say); code != exitUsage || !strings.Contains(say.String(), "gainwright: ") || out.Len() > 0 {
			t.Errorf("%q: exit %d, %q %q", args, code, &out, &say)
		}
	}
}
