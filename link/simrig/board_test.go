package simrig

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
)

// The paragraphs cited are those of protocol/SPEC.md.

func TestIdentity(t *testing.T) { // P4
	c := newConsole(t, benchConfig())
	c.identify()
	id := c.id
	if id.LookOnly() != "" || len(id.UnknownID) != 0 {
		t.Errorf("look-only %q, unknown %q", id.LookOnly(), id.UnknownID)
	}
	if id.Loop != time.Millisecond || id.WindowLoops != 4 || id.CountsPerTurn != 2000 || id.ComputeDelay != 100*time.Microsecond ||
		id.Boots != 42 || id.ResetCause != "power" || !id.BusMeasured || !id.Can("capture") || !id.Can("ramp") {
		t.Errorf("%+v", id)
	}
	if got := strings.Join(id.GainNames, " "); got != "kp ki b kv ks" {
		t.Errorf("gain slots %q", got)
	}
	if !c.happened("ev boot 42 power") {
		t.Errorf("no boot event in %q", c.events)
	}
	q := id.RadPerCount() / id.Window().Seconds() / id.Scales.SpeedLSB
	if math.Abs(q-math.Round(q)) > 1e-4 {
		t.Errorf("one count is %g steps of the wire", q)
	}
	c.r.Receive([]byte("id\n"))
	c.wait(200 * time.Millisecond)
	if len(c.bad) != 0 {
		t.Errorf("bad lines %q", c.bad)
	}
}

func TestOpenLoopReachesItsSteadyState(t *testing.T) {
	c := newConsole(t, benchConfig())
	c.hold(nil)
	c.must("rate", "125 x tu")
	c.arm()
	c.volts(time.Second, 8)
	s := c.last()
	tr := c.r.Truth(float64(s.Speed))
	want := tr.Gain * (8 - tr.OffsetVolts)
	// Speed is quantised by 0.785 rad/s and the duty by 0.0005 of 24 V.
	if math.Abs(float64(s.Speed)-want) > 1.2 || math.Abs(float64(s.Speed)-c.r.Speed()) > 1.2 {
		t.Errorf("speed %g, shaft %g, physics linearised %g", s.Speed, c.r.Speed(), want)
	}
	if math.Abs(float64(s.Volts)-8) > 0.02 || s.State != protocol.Driving || s.Has&protocol.HasCurrent == 0 {
		t.Errorf("%+v", s)
	}
	first := c.samples[0]
	turned := float64(s.Counts-first.Counts) * c.id.RadPerCount()
	if late := 0.009 * c.r.Speed(); math.Abs(turned-c.r.Angle()) > late {
		t.Errorf("counts say %g rad, the shaft %g", turned, c.r.Angle())
	}
	for i := 1; i < len(c.samples); i++ {
		if d := c.samples[i].BoardUS - c.samples[i-1].BoardUS; d != 8000 {
			t.Fatalf("sample %d comes %d µs after the last", i, d)
		}
	}
	if c.f.Stats.Lost != 0 || len(c.bad) != 0 {
		t.Errorf("%+v %q", c.f.Stats, c.bad)
	}
	e := c.r.Extremes()
	if len(e.Violations) != 0 || e.PoweredS < 0.9 || e.Speed < float64(s.Speed)-2 || e.Amps <= 0 {
		t.Errorf("%+v", e)
	}
}

func TestCutAnywhere(t *testing.T) { // P2
	for _, garbage := range []string{"", "dv 1 00", "\x80\xFFgarbage", strings.Repeat("x", 300), "id\n"} {
		c := newConsole(t, benchConfig())
		c.hold(nil)
		c.arm()
		c.volts(300*time.Millisecond, 6)
		c.r.Receive([]byte(garbage + "\x18"))
		if c.r.Powered() {
			t.Fatalf("%q: output still on after the cut byte", garbage)
		}
		at := c.r.Now()
		c.volts(500*time.Millisecond, 6) // the old token is void
		if c.r.Powered() || c.r.Speed() > 60 {
			t.Errorf("%q: driven by a void token", garbage)
		}
		want := fmt.Sprintf("cut 1 %d", at.Microseconds())
		if !c.happened(want) || !c.happened("ev off 1 ") {
			t.Errorf("%q: no %q in %q", garbage, want, c.events)
		}
		if c.state() != protocol.Off {
			t.Errorf("%q: %v", garbage, c.state())
		}
	}
}

func TestSilenceTrips(t *testing.T) { // P6.4, P7.7
	c := newConsole(t, benchConfig())
	c.hold(map[string]float64{"beat": 0.25})
	c.arm()
	c.volts(400*time.Millisecond, 5)
	c.wait(400 * time.Millisecond)
	if c.r.Powered() || !c.happened("ev trip 10 ") || c.state() != protocol.Tripped {
		t.Fatalf("powered %v, events %q", c.r.Powered(), c.events)
	}
	f := c.must("log", "0").Fields
	beat, _ := strconv.Atoi(f[4])
	off, _ := strconv.Atoi(f[5])
	if d := off - beat; d < 250_000 || d > 251_001 || f[2] != "10" {
		t.Errorf("off %d µs after the last heartbeat, log %q", d, f)
	}
	c.refused("nonce", "x", protocol.RefArgument)
	n, crc := c.must("nonce", "").Field(0), c.must("lim", "crc").Field(0)
	c.refused("arm", n+" "+crc, protocol.RefTripped)
	c.wait(2 * time.Second) // it coasts
	c.must("reset", "")
	if c.state() != protocol.Off {
		t.Error("reset did not lead to off")
	}
}

func TestArming(t *testing.T) { // P6.1, P6.2, P12.2
	c := newConsole(t, benchConfig())
	c.identify()
	crc := c.must("lim", "crc").Field(0)
	n := c.must("nonce", "").Field(0)
	c.refused("arm", n+" "+crc, protocol.RefLimits) // nothing put in use since the start
	c.hold(nil)
	crc = c.must("lim", "crc").Field(0)
	c.refused("arm", n+" "+crc, protocol.RefOldNumber) // used up by the refusal
	n = c.must("nonce", "").Field(0)
	c.refused("arm", n+" 0000", protocol.RefLimits)
	n = c.must("nonce", "").Field(0)
	c.wait(2100 * time.Millisecond)
	c.refused("arm", n+" "+crc, protocol.RefOldNumber)
	n = c.must("nonce", "").Field(0)
	c.r.Receive([]byte{protocol.Cut})
	c.refused("arm", n+" "+crc, protocol.RefOldNumber)
	c.arm()
	if c.state() != protocol.Armed || c.r.Powered() {
		t.Error("not armed, or already driving")
	}
	for range 600 { // hb alone keeps it alive but does not renew it
		c.drive(100*time.Millisecond, func(k uint16) []byte { return protocol.AppendBeat(nil, k, c.token) })
	}
	c.wait(50 * time.Millisecond)
	if !c.happened("ev off 3 ") || c.state() != protocol.Off {
		t.Errorf("the arm did not lapse: %q", c.events)
	}
}

func TestStaleDriveLinesAreIgnored(t *testing.T) { // P6.3, P6.5
	c := newConsole(t, benchConfig())
	c.hold(nil)
	c.arm()
	c.volts(100*time.Millisecond, 5)
	c.r.Receive(protocol.AppendDriveVolts(nil, c.k-1, c.token, 15))
	c.r.Receive(protocol.AppendDriveVolts(nil, c.k, c.token, 15))
	c.r.Receive(protocol.AppendDriveVolts(nil, c.k+1, c.token+1, 15))
	c.r.Receive(protocol.AppendDriveSpeed(nil, c.k+1, c.token, 50))
	c.wait(20 * time.Millisecond)
	c.volts(200*time.Millisecond, 5)
	if e := c.r.Extremes(); e.Volts > 5.1 {
		t.Errorf("%g V after stale lines", e.Volts)
	}
	c.r.Receive(protocol.AppendDriveVolts(nil, c.k+1, c.token, 20.5))
	if c.r.Powered() {
		t.Error("a drive value over vmax did not cut")
	}
	c.wait(20 * time.Millisecond)
	if !c.happened("ev trip 12 ") {
		t.Errorf("%q", c.events)
	}
}

func TestTripsNameTheFirstCause(t *testing.T) { // P7.5
	reversed := func(c *Config) { c.Faults = []FaultSpec{{Kind: FaultReversed}} }
	dead := func(c *Config) { c.Faults = []FaultSpec{{Kind: FaultDeadEncoder}} }
	stalled := func(c *Config) { c.Faults = []FaultSpec{{Kind: FaultStalled}} }
	for _, tc := range []struct {
		name   string
		change func(*Config)
		limits map[string]float64
		volts  float64
		want   protocol.Cause
	}{
		{"speed", nil, map[string]float64{"wmax": 50}, 8, protocol.CauseSpeed},
		{"current", nil, map[string]float64{"imax": 1}, 8, protocol.CauseCurrent},
		{"turns", nil, map[string]float64{"turns": 2}, 8, protocol.CauseTurns},
		{"run time", nil, map[string]float64{"run": 0.3}, 8, protocol.CauseRunTime},
		{"acceleration", nil, map[string]float64{"amax": 100}, 12, protocol.CauseAccel},
		{"heat", nil, map[string]float64{"heat": 0.1}, 12, protocol.CauseHeat},
		{"wrong way", reversed, nil, 8, protocol.CauseWrongWay},
		{"no counts", dead, nil, 8, protocol.CauseNoCounts},
		{"stall", stalled, nil, 8, protocol.CauseStall},
		{"no limit is passed", nil, nil, 8, protocol.CauseNone},
	} {
		t.Run(tc.name, func(t *testing.T) {
			cfg := benchConfig()
			if tc.change != nil {
				tc.change(&cfg)
			}
			c := newConsole(t, cfg)
			c.hold(tc.limits)
			c.arm()
			c.volts(1500*time.Millisecond, tc.volts)
			if tc.want == protocol.CauseNone {
				if !c.r.Powered() {
					t.Errorf("stopped: %q", c.events)
				}
				return
			}
			if want := fmt.Sprintf("ev trip %d ", tc.want); !c.happened(want) || c.r.Powered() {
				t.Errorf("want %v, events %q", tc.want, c.events)
			}
		})
	}
}

func TestInterlockAndEStopInput(t *testing.T) { // P7.5, P7.6, P11
	cfg := benchConfig()
	cfg.Board.Inputs = []string{"estop", "guard"}
	c := newConsole(t, cfg)
	c.hold(nil)
	c.arm()
	c.volts(200*time.Millisecond, 5)
	if !c.r.SetInput("guard", false) || c.r.SetInput("door", false) {
		t.Fatal("inputs by name")
	}
	c.volts(20*time.Millisecond, 5)
	if c.r.Powered() || !c.happened("ev trip 24 ") {
		t.Fatalf("%q", c.events)
	}
	if got := c.must("in", "").Field(0); got != "0001" {
		t.Errorf("inputs %s", got)
	}
	c.wait(2 * time.Second)
	c.refused("reset", "", protocol.RefInterlock)
	c.r.SetInput("guard", true)
	c.wait(time.Second)
	if c.r.Powered() || c.state() != protocol.Tripped {
		t.Error("closing the guard changed the state")
	}
	c.must("reset", "")
	c.r.SetInput("estop", false)
	n, crc := c.must("nonce", "").Field(0), c.must("lim", "crc").Field(0)
	c.refused("arm", n+" "+crc, protocol.RefInterlock)
}

func TestRampAndCut(t *testing.T) { // P6.7
	for _, closed := range []bool{true, false} {
		cfg := benchConfig()
		cfg.Gains = GainSpec{Kp: 0.08, Ki: 0.9, B: 1}
		c := newConsole(t, cfg)
		c.hold(nil)
		c.arm()
		go2 := func(d time.Duration) {
			if closed {
				c.speed(d, 150)
			} else {
				c.volts(d, 8)
			}
		}
		go2(time.Second)
		c.refused("ramp", hex16(c.token+1), protocol.RefToken)
		a := c.must("ramp", hex16(c.token))
		if a.Field(0) != "ramping" {
			t.Errorf("%+v", a)
		}
		go2(1500 * time.Millisecond)
		if c.r.Powered() || !c.happened("ev off 2 ") || math.Abs(c.r.Speed()) > 1 {
			t.Errorf("closed %v: powered %v, %g rad/s, %q", closed, c.r.Powered(), c.r.Speed(), c.events)
		}
	}
}

func TestHand(t *testing.T) {
	cfg := benchConfig()
	c := newConsole(t, cfg)
	c.identify()
	c.must("rate", "100 x tu")
	c.wait(100 * time.Millisecond)
	from := c.last().Counts
	c.r.Hand(1)
	c.wait(2500 * time.Millisecond)
	if d := c.last().Counts - from; d < 1998 || d > 2002 {
		t.Errorf("one turn is %d counts", d)
	}
	if c.r.Speed() != 0 {
		t.Errorf("%g rad/s after the hand let go", c.r.Speed())
	}
}

// TestBreakawayOfTheWholeRig ramps the drive up until the shaft moves: dead
// band, friction of that direction, torque constant and resistance together.
func TestBreakawayOfTheWholeRig(t *testing.T) {
	for _, sign := range []float64{1, -1} {
		c := newConsole(t, benchConfig())
		c.hold(nil)
		c.arm()
		v := 1.0
		for c.r.Speed() == 0 && v < 3 {
			v += 0.002
			c.volts(20*time.Millisecond, sign*v)
		}
		tr := c.r.Truth(0)
		want := tr.BreakawayForward
		if sign < 0 {
			want = tr.BreakawayReverse
		}
		// The duty has steps of 12 mV, and the bus that it is worked out from
		// 20 mV of noise.
		if math.Abs(v-want) > 0.02 {
			t.Errorf("breaks away at %g V, truth %g V", sign*v, want)
		}
	}
}

// TestDeadTimeIsContinuous finds when the winding first sees an order.
func TestDeadTimeIsContinuous(t *testing.T) {
	cfg := benchConfig()
	cfg.Driver.DeadTime = 0.00237
	c := newConsole(t, cfg)
	c.hold(nil)
	c.arm()
	c.now = c.now.Truncate(time.Millisecond) + 1700*time.Microsecond
	c.pump()
	c.r.Receive(protocol.AppendDriveVolts(nil, 1, c.token, 5))
	// The loop period after it begins 300 µs later; 100 µs compute delay.
	want := c.now + 300*time.Microsecond + 100*time.Microsecond + 2370*time.Microsecond
	for c.r.plant.shaft.i == 0 && c.now < want+time.Millisecond {
		c.now += 10 * time.Microsecond
		c.r.Advance(c.now)
		c.r.sync()
	}
	if c.now != want+10*time.Microsecond {
		t.Errorf("current flows at %v, want it just after %v", c.now, want)
	}
}

func TestBrakingIsNotTheWrongWay(t *testing.T) {
	c := newConsole(t, benchConfig())
	c.hold(map[string]float64{"wrong": 0.02})
	c.arm()
	c.volts(time.Second, 10)
	c.volts(time.Second, -6)
	if !c.r.Powered() || c.r.Speed() > -50 {
		t.Errorf("%g rad/s, %q", c.r.Speed(), c.events)
	}
}

// TestViolationsAreTheRigsOwnAccount passes the nameplate's speed twice with a
// board that allows it.
func TestViolationsAreTheRigsOwnAccount(t *testing.T) {
	cfg := benchConfig()
	cfg.Nameplate.SpeedMax, cfg.Nameplate.VoltsMax = 100, 7.9
	c := newConsole(t, cfg)
	c.hold(nil)
	c.arm()
	for range 2 {
		c.volts(500*time.Millisecond, 7)
		c.volts(500*time.Millisecond, 3)
	}
	e := c.r.Extremes()
	if len(e.Violations) != 2 {
		t.Fatalf("%+v", e.Violations)
	}
	for _, v := range e.Violations {
		if v.What != "speed" || v.Limit != 100 || math.Abs(v.Worst-e.Speed) > 1 || v.At == 0 {
			t.Errorf("%+v, extremes %+v", v, e)
		}
	}
	c.volts(20*time.Millisecond, 8.3)
	if e := c.r.Extremes(); len(e.Violations) != 3 || e.Violations[2].What != "volts" {
		t.Errorf("%+v", e.Violations)
	}
	if turns := c.r.Angle() / (2 * math.Pi); math.Abs(c.r.Extremes().Turns-turns) > 1e-9 {
		t.Errorf("%g turns, angle %g", c.r.Extremes().Turns, turns)
	}
}
