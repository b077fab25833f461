package simrig

import (
	"bytes"
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

func TestLimitsSets(t *testing.T) { // P7.1 to P7.3
	c := newConsole(t, benchConfig())
	c.hold(nil)
	c.refused("lim", "set 0 "+hexFloat(25), protocol.RefLimit)
	c.refused("lim", "set 0 "+hexFloat(0), protocol.RefArgument)
	c.refused("lim", "set 2 "+hexFloat(-1), protocol.RefArgument)
	c.refused("lim", "set 1 7FC00000", protocol.RefArgument)
	c.refused("lim", "set 15 "+hexFloat(1), protocol.RefArgument)
	c.refused("lim", "set 13 "+hexFloat(5), protocol.RefLimit)
	before := c.must("lim", "crc").Field(0)
	c.must("lim", "set 0 "+hexFloat(12))
	c.refused("lim", "use 0000", protocol.RefSetCRC)
	if c.must("lim", "crc").Field(0) != before {
		t.Error("a refused set is held")
	}
	if got := c.must("lim", "get 1").Fields; got[1] != "wmax" || got[2] != hexFloat(300) {
		t.Errorf("%q", got)
	}
	c.arm()
	c.refused("lim", "set 0 "+hexFloat(1), protocol.RefState)
}

func TestGainsAreAtomicAndStored(t *testing.T) { // P8
	c := newConsole(t, benchConfig())
	c.identify()
	if got := c.must("gain", "get run 1").Fields; got[1] != "ki" || got[2] != hexFloat(2.2) {
		t.Errorf("%q", got)
	}
	want := []uint32{math.Float32bits(0.08), math.Float32bits(0.9), math.Float32bits(1), 0, 0}
	c.must("gain", "set 0 "+hexFloat(0.08))
	c.must("gain", "set 1 "+hexFloat(0.9))
	if got := c.must("gain", "get run 0").Field(2); got != hexFloat(0.021) {
		t.Error("a staged gain runs already")
	}
	c.refused("gain", "use 1234", protocol.RefSetCRC)
	crc := hex16(protocol.SetCRC(want))
	c.must("gain", "use "+crc)
	if got := c.must("gain", "crc run").Field(0); got != crc {
		t.Errorf("running set %s, want %s", got, crc)
	}
	if got := c.must("gain", "crc store").Field(0); got == crc {
		t.Error("the stored set changed without a store")
	}
	c.r.PowerCycle()
	c.wait(200 * time.Millisecond)
	if got := c.must("gain", "get run 0").Field(2); got != hexFloat(0.021) {
		t.Error("the running set outlived a power cycle")
	}
	c.must("gain", "set 0 "+hexFloat(0.08))
	c.must("gain", "set 1 "+hexFloat(0.9))
	c.must("gain", "use "+crc)
	c.refused("gain", "store 0000", protocol.RefSetCRC)
	if got := c.must("gain", "store "+crc).Fields; got[1] != "1" {
		t.Errorf("%q", got)
	}
	c.r.PowerCycle()
	c.wait(200 * time.Millisecond)
	if got := c.must("gain", "crc run").Field(0); got != crc {
		t.Error("the stored set was lost")
	}
	if !c.happened("ev boot 44 power") {
		t.Errorf("%q", c.events)
	}
}

func TestClosedLoopSettles(t *testing.T) {
	for _, law := range []struct{ disc, windup, form string }{
		{"backward-euler", "clamp", "parallel"}, {"forward-euler", "none", "parallel"},
		{"tustin", "back-calculation", "ideal"}, {"incremental", "clamp", "series"},
	} {
		cfg := benchConfig()
		cfg.Board.Disc, cfg.Board.Windup, cfg.Board.Form = law.disc, law.windup, law.form
		cfg.Gains = GainSpec{Kp: 0.08, Ki: 0.9, Kc: 0.08, Ti: 0.08 / 0.9, B: 1, Tt: 0.1}
		c := newConsole(t, cfg)
		c.hold(nil)
		c.must("rate", "125 x tu")
		c.arm()
		for _, w := range []float64{100, 180, -120} {
			c.speed(1500*time.Millisecond, w)
			s := c.last()
			if math.Abs(float64(s.Speed)-w) > 2 || s.State != protocol.Looping || math.Abs(float64(s.Setpoint)-w) > 0.1 {
				t.Errorf("%v: %+v at setpoint %g", law, s, w)
			}
		}
	}
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

func TestRepeatedRequestIsAnsweredAgainAndNotDoneAgain(t *testing.T) { // P3.3
	c := newConsole(t, benchConfig())
	req := protocol.AppendRequest(nil, "nonce", 7, "")
	c.r.Receive(req)
	c.wait(10 * time.Millisecond)
	c.r.Receive(req)
	c.wait(10 * time.Millisecond)
	// The exchange knows neither answer; look at the board.
	if c.f.Stats.Lines != 3 { // boot event and two answers
		t.Errorf("%d lines", c.f.Stats.Lines)
	}
	if !c.r.board.arm.fresh {
		t.Error("no number")
	}
	n := c.r.board.arm.number
	c.r.Receive(req)
	if c.r.board.arm.number != n {
		t.Error("the repeat made a new number")
	}
	c.r.Receive(protocol.AppendRequest(nil, "nonce", 8, ""))
	if c.r.board.arm.number == n {
		t.Error("a new request did not make a new number")
	}
}

func TestBadLines(t *testing.T) { // P1.4, P3.1
	c := newConsole(t, benchConfig())
	n := c.f.Stats.Lines
	c.r.Receive([]byte("nonce 1;0000\nnonce 2;0000\n" + strings.Repeat("y", 200) + "\n"))
	c.wait(20 * time.Millisecond)
	if got := c.f.Stats.Lines - n; got != 1 {
		t.Errorf("%d answers to three bad lines at once, want 1", got)
	}
	c.r.Receive([]byte(strings.Repeat("y", 200) + "\n"))
	c.wait(20 * time.Millisecond)
	if got := c.f.Stats.Lines - n; got != 2 {
		t.Errorf("%d answers", got)
	}
	c.refused("dance", "", protocol.RefUnknown)
	c.refused("rate", "5000 d tu", protocol.RefLineFull)
	c.refused("rate", "200 q t", protocol.RefArgument)
	if got := c.must("rate", "300 x t").Field(0); got != "250" {
		t.Errorf("rate %s, want 250: every fourth loop period", got)
	}
}

func TestBytesArePacedByTheBaudRate(t *testing.T) {
	c := newConsole(t, benchConfig())
	c.wait(time.Second)
	c.r.Output()
	c.r.Receive([]byte("id\n"))
	start, total := c.now, 0
	for total < 600 {
		c.now += 100 * time.Microsecond
		c.r.Advance(c.now)
		total += len(c.r.Output())
		if most := (c.now - start).Seconds() * 11520; float64(total) > most+1e-6 {
			t.Fatalf("%d bytes after %v at 115200 baud", total, c.now-start)
		}
		if c.now-start > time.Second {
			t.Fatalf("only %d bytes in a second", total)
		}
	}
	if least := (c.now-start).Seconds()*11520 - 3; float64(total) < least {
		t.Errorf("%d bytes, the line carries %g", total, least)
	}
}

func TestCapture(t *testing.T) { // P10
	c := newConsole(t, benchConfig())
	c.hold(nil)
	c.must("cap", "arm 1 20 400")
	c.wait(100 * time.Millisecond)
	if got := c.must("cap", "state").Field(0); got != "wait" {
		t.Errorf("%s", got)
	}
	c.arm()
	c.volts(600*time.Millisecond, 8)
	c.r.Receive([]byte{protocol.Cut})
	st := c.must("cap", "state").Fields
	if st[0] != "full" || st[1] != "400" || st[3] != "1000" {
		t.Fatalf("%q", st)
	}
	var digits []byte
	for i := 0; i < 400; i += 8 {
		f := c.must("cap", "get "+strconv.Itoa(i)).Fields
		if len(f[1]) != 96 {
			t.Fatalf("piece of %d digits", len(f[1]))
		}
		digits = append(digits, f[1]...)
	}
	if got, want := c.must("cap", "crc").Field(0), hex16(protocol.CRC16(digits)); got != want {
		t.Errorf("crc %s, over the pieces %s", got, want)
	}
	word := func(i, part int) int16 {
		v, _ := protocol.ParseHex16(digits[12*i+4*part : 12*i+4*part+4])
		return int16(v)
	}
	if v := float64(word(19, 1)) * c.id.Scales.VoltsLSB; v != 0 {
		t.Errorf("%g V before the trigger", v)
	}
	// The first order leaves the pins 100 µs into its loop period, so the sample
	// after it has the mean of 0.1 of nothing and 0.9 of 8 V, and was the first
	// after the 20 of before.
	if v := float64(word(21, 1)) * c.id.Scales.VoltsLSB; math.Abs(v-0.9*8) > 0.02 {
		t.Errorf("%g V over the first loop period", v)
	}
	if v := float64(word(20, 1)) * c.id.Scales.VoltsLSB; v != 0 {
		t.Errorf("%g V at the trigger", v)
	}
	if v := float64(word(30, 1)) * c.id.Scales.VoltsLSB; math.Abs(v-8) > 0.02 {
		t.Errorf("%g V after the trigger", v)
	}
	if a, b := word(22, 0), word(399, 0); b-a < 1000 {
		t.Errorf("counts from %d to %d", a, b)
	}
	c.refused("cap", "now 1 2001", protocol.RefLimit)
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

func TestSameSeedSameBytes(t *testing.T) {
	run := func(seed uint64, step time.Duration) []byte {
		r := New(benchConfig(), seed)
		var out []byte
		r.Advance(100 * time.Millisecond)
		r.Receive(protocol.AppendRequest(nil, "rate", 1, "125 x tu"))
		r.Hand(0.3)
		for at := 100 * time.Millisecond; at < 3*time.Second; {
			at += step
			r.Advance(at)
			out = append(out, r.Output()...)
		}
		return out
	}
	a := run(5, time.Millisecond)
	if len(a) < 10_000 || !bytes.Equal(a, run(5, time.Millisecond)) {
		t.Error("not repeatable")
	}
	b := run(5, 700*time.Microsecond)
	if n := min(len(a), len(b)) - 200; !bytes.Equal(a[:n], b[:n]) {
		t.Error("the bytes depend on how often the rig is looked at")
	}
	if bytes.Equal(a, run(6, time.Millisecond)) {
		t.Error("another seed gives the same bytes")
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
