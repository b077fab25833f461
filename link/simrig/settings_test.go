package simrig

import (
	"bytes"
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
)

// The paragraphs cited are those of protocol/SPEC.md.
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
