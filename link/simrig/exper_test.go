package simrig

import (
	"fmt"
	"math"
	"testing"
	"time"

	"gainwright/protocol"
)

// A register of n stages goes through every state but zero before it repeats:
// that is what maximal length means (Golomb, Shift Register Sequences, 1967).
func TestSequencesAreOfMaximalLength(t *testing.T) {
	for n := 3; n <= 16; n++ {
		x, ok := parseExper("prbs", []string{"1000", fmt.Sprint(n), "1", "1"})
		if !ok {
			t.Fatal(n)
		}
		seen := make([]bool, 1<<n)
		ups := 0
		for i := 0; i < 1<<n-1; i++ {
			if s := x.shift; s == 0 || seen[s] {
				t.Fatalf("%d stages: state %X comes again after %d bits", n, s, i)
			}
			seen[x.shift] = true
			if x.step(5, 0) > 5 {
				ups++
			}
		}
		if ups != 1<<(n-1) || x.over {
			t.Errorf("%d stages: %d bits are up, over %t", n, ups, x.over)
		}
		if v := x.step(5, 0); v != 5 || !x.over {
			t.Errorf("%d stages: %g V after the last bit", n, v)
		}
	}
}

func experBench(t *testing.T) *console {
	cfg := benchConfig()
	cfg.Board.Exper = true
	c := newConsole(t, cfg)
	c.hold(map[string]float64{"vmax": 12})
	if !c.id.Can("exper") {
		t.Fatal("not declared")
	}
	return c
}

func TestRelayInTheLoop(t *testing.T) { // P13.1, P13.2, P13.4
	c := experBench(t)
	c.must("rate", "250 x t")
	relay := func(amp, mid int) string {
		return fmt.Sprintf("relay %s %d 5000 %d 12", hex16(c.token), amp, mid)
	}
	c.refused("exp", relay(2000, 100000), protocol.RefState)
	c.arm()
	c.refused("exp", relay(2000, 100000), protocol.RefState)
	c.volts(time.Second, 8)
	mid := int(c.last().Speed) * 1000
	c.refused("exp", relay(4001, mid), protocol.RefLimit)
	c.refused("exp", "relay 0000 2000 5000 0 12", protocol.RefToken)
	c.refused("exp", relay(0, mid), protocol.RefArgument)
	from := len(c.samples)
	c.must("exp", relay(2000, mid))
	c.volts(100*time.Millisecond, 8)
	if c.must("exp", "state").Field(0) != "run" {
		t.Error("it does not run")
	}
	c.volts(3*time.Second, 8)
	if f := c.must("exp", "state").Fields; f[0] != "done" || f[1] != "12" {
		t.Errorf("%q", f)
	}
	low, high := math.Inf(1), 0.0
	for _, s := range c.samples[from:] {
		low, high = min(low, float64(s.Volts)), max(high, float64(s.Volts))
	}
	if math.Abs(low-6) > 0.05 || math.Abs(high-10) > 0.05 {
		t.Errorf("between %g and %g V, wanted 8±2", low, high)
	}
	if v := c.last().Volts; math.Abs(float64(v)-8) > 0.05 {
		t.Errorf("%g V after the end", v)
	}
}

func TestSquareWaveInTheLoop(t *testing.T) { // P13.5
	x, ok := parseExper("steps", []string{"1500", "3", "4"})
	if !ok {
		t.Fatal("refused")
	}
	for i, want := range []float32{6.5, 6.5, 6.5, 3.5, 3.5, 3.5, 6.5, 6.5, 6.5, 3.5, 3.5, 3.5, 5, 5} {
		if v := x.step(5, 0); v != want {
			t.Errorf("loop %d: %g V, want %g", i, v, want)
		}
	}
	if x.phase() != "done" || x.switched != 3 {
		t.Errorf("%s after %d switchings", x.phase(), x.switched)
	}
	for _, bad := range [][]string{{"0", "3", "4"}, {"1500", "10001", "4"}, {"1500", "3", "0"}, {"1500", "3"}, {"1500", "3", "4", "1"}} {
		if _, ok := parseExper("steps", bad); ok {
			t.Errorf("%q is taken", bad)
		}
	}
}

// What ends a run ends its experiment; nothing of it is left for the next.
func TestExperimentsEndWithTheRun(t *testing.T) { // P13.1, P13.4
	for name, end := range map[string]func(c *console){
		"cut":     func(c *console) { c.r.Receive([]byte{0x18}) },
		"silence": func(c *console) { c.wait(400 * time.Millisecond) },
		"vmax":    func(c *console) { c.volts(20*time.Millisecond, 10.5) },
		"ramp":    func(c *console) { c.must("ramp", hex16(c.token)) },
	} {
		c := experBench(t)
		c.arm()
		c.volts(300*time.Millisecond, 8)
		c.must("exp", fmt.Sprintf("prbs %s 2000 10 20 77", hex16(c.token)))
		c.volts(100*time.Millisecond, 8)
		end(c)
		if name != "ramp" && c.r.Powered() {
			t.Errorf("%s: output still on", name)
		}
		if f := c.must("exp", "state").Fields; f[0] != "none" {
			t.Errorf("%s: %q", name, f)
		}
		if name == "vmax" && !c.happened("ev trip 12 ") {
			t.Errorf("%q", c.events)
		}
	}
	c := newConsole(t, benchConfig())
	c.refused("exp", "state", protocol.RefNotHere)
}

func FuzzExper(f *testing.F) {
	f.Add("prbs", "1000", "16", "1", "65535")
	f.Add("relay", "1000", "5", "-1", "10000")
	f.Fuzz(func(t *testing.T, kind, a, b, c, d string) {
		x, ok := parseExper(kind, []string{a, b, c, d})
		if !ok {
			return
		}
		for range 100 {
			if v := x.step(1, 0); v > 1+100 || v < 1-100 {
				t.Fatalf("%g V", v)
			}
		}
	})
}
