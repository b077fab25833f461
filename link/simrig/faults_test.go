package simrig

import (
	"math"
	"strconv"
	"testing"
	"time"

	"gainwright/protocol"
)

// with is the bench rig with one fault.
func with(t *testing.T, kind string, value float64) *console {
	cfg := benchConfig()
	cfg.Faults = []FaultSpec{{Kind: kind, Value: value}}
	return newConsole(t, cfg)
}

func TestBoardFaults(t *testing.T) {
	t.Run(FaultNoTimeout, func(t *testing.T) {
		c := with(t, FaultNoTimeout, 0)
		c.hold(nil)
		c.arm()
		c.volts(200*time.Millisecond, 5)
		c.wait(3 * time.Second)
		if !c.r.Powered() {
			t.Error("it stopped by itself")
		}
		c.r.Receive([]byte{protocol.Cut})
		if c.r.Powered() {
			t.Error("it ignores the cut byte too")
		}
	})
	t.Run(FaultIgnoresCut, func(t *testing.T) {
		c := with(t, FaultIgnoresCut, 0)
		c.hold(nil)
		c.arm()
		c.volts(200*time.Millisecond, 5)
		c.r.Receive([]byte{protocol.Cut})
		c.wait(20 * time.Millisecond)
		if !c.r.Powered() || c.happened("cut ") {
			t.Error("it was cut")
		}
		c.wait(400 * time.Millisecond)
		if c.r.Powered() {
			t.Error("it ignores its timeout too")
		}
	})
	t.Run(FaultGainsDiffer, func(t *testing.T) {
		c := with(t, FaultGainsDiffer, 0)
		c.identify()
		c.wait(150 * time.Millisecond)
		crc := c.must("gain", "crc run").Field(0)
		c.must("gain", "store "+crc)
		if got := c.must("gain", "crc store").Field(0); got == crc {
			t.Error("stored equal")
		}
	})
	t.Run(FaultLimitsLie, func(t *testing.T) {
		c := with(t, FaultLimitsLie, 0)
		c.hold(map[string]float64{"vmax": 4, "wmax": 20})
		c.must("lim", "set 0 "+hexFloat(1000))
		c.arm()
		c.volts(500*time.Millisecond, 10)
		if !c.r.Powered() || c.r.Speed() < 100 {
			t.Errorf("it keeps its limits: %q", c.events)
		}
		c.wait(300 * time.Millisecond)
		if c.r.Powered() {
			t.Error("it does not keep its timeout either")
		}
	})
	t.Run(FaultOldNumber, func(t *testing.T) {
		c := with(t, FaultOldNumber, 0)
		c.hold(nil)
		c.wait(100 * time.Millisecond)
		n, crc := c.must("nonce", "").Field(0), c.must("lim", "crc").Field(0)
		c.must("arm", n+" "+crc)
		c.must("dis", "")
		c.must("arm", n+" "+crc)
	})
	t.Run(FaultStaleSequence, func(t *testing.T) {
		c := with(t, FaultStaleSequence, 0)
		c.identify()
		c.must("rate", "100 x t")
		c.wait(time.Second)
		if c.f.Stats.Stale < 5 {
			t.Errorf("%+v", c.f.Stats)
		}
	})
	t.Run(FaultWrongCRC, func(t *testing.T) {
		c := with(t, FaultWrongCRC, 0)
		c.r.Receive([]byte("id\ntel\n"))
		c.wait(200 * time.Millisecond)
		if len(c.bad) < 20 || c.f.Stats.Lines != 0 || c.f.Stats.Samples != 0 {
			t.Errorf("%+v, %d bad", c.f.Stats, len(c.bad))
		}
	})
	t.Run(FaultResetsItself, func(t *testing.T) {
		c := with(t, FaultResetsItself, 2)
		c.wait(7 * time.Second)
		for n := 42; n <= 45; n++ {
			if !c.happened("ev boot " + strconv.Itoa(n)) {
				t.Errorf("no start %d in %q", n, c.events)
			}
		}
	})
	t.Run(FaultRestarts, func(t *testing.T) {
		c := newConsole(t, benchConfig())
		c.hold(nil)
		c.arm()
		c.volts(200*time.Millisecond, 5)
		c.r.Inject(FaultRestarts, 0)
		c.volts(200*time.Millisecond, 5)
		if c.r.Powered() || !c.happened("ev boot 43 brownout") {
			t.Errorf("powered %v, %q", c.r.Powered(), c.events)
		}
	})
	t.Run(FaultMute, func(t *testing.T) {
		c := with(t, FaultMute, 0)
		c.r.Receive([]byte("id\n"))
		c.wait(200 * time.Millisecond)
		if c.f.Stats.Lines != 0 {
			t.Error("it speaks")
		}
	})
	t.Run(FaultDeaf, func(t *testing.T) {
		c := newConsole(t, benchConfig())
		c.hold(nil)
		c.arm()
		c.volts(200*time.Millisecond, 5)
		c.r.Inject(FaultDeaf, 0)
		c.r.Receive([]byte{protocol.Cut})
		if !c.r.Powered() {
			t.Error("it heard the cut byte")
		}
		c.volts(300*time.Millisecond, 5)
		if c.r.Powered() {
			t.Error("its timeout did not work")
		}
	})
}

func TestRigFaults(t *testing.T) {
	drive := func(kind string, value float64) *console {
		c := with(t, kind, value)
		c.hold(map[string]float64{"vbreak": 0})
		c.must("rate", "100 x tu")
		c.arm()
		c.volts(800*time.Millisecond, 10)
		return c
	}
	healthy := newConsole(t, benchConfig())
	healthy.hold(nil)
	healthy.arm()
	healthy.volts(800*time.Millisecond, 10)
	w := healthy.r.Speed()

	if c := drive(FaultSlip, 0.25); math.Abs(float64(c.last().Speed)-0.75*c.r.Speed()) > 2 || math.Abs(c.r.Speed()-w) > 1 {
		t.Errorf("slipping: board %g, shaft %g, healthy %g", c.last().Speed, c.r.Speed(), w)
	}
	if c := drive(FaultDeadEncoder, 0); c.last().Speed != 0 || math.Abs(c.r.Speed()-w) > 1 {
		t.Errorf("dead encoder: board %g, shaft %g", c.last().Speed, c.r.Speed())
	}
	if c := drive(FaultStalled, 0); c.r.Speed() != 0 || math.Abs(float64(c.last().Current)-9.8/2.6) > 0.2 {
		t.Errorf("stalled: %g rad/s, %g A", c.r.Speed(), c.last().Current)
	}
	// 9.8 V over 2.6 Ω warm copper from a supply that gives 0.4 A at most.
	if c := drive(FaultSupplyFolds, 0.4); c.last().Bus > 20 {
		t.Errorf("folding supply: bus %g V", c.last().Bus)
	}
	cfg := benchConfig()
	cfg.Faults = []FaultSpec{{Kind: FaultReversed}}
	c := newConsole(t, cfg)
	c.hold(map[string]float64{"wrong": 0.3})
	c.must("rate", "100 x tu")
	c.arm()
	c.volts(250*time.Millisecond, 10)
	if c.last().Speed > -50 || c.r.Speed() < 50 || c.r.Truth(50).Gain >= 0 {
		t.Errorf("reversed: board %g, shaft %g", c.last().Speed, c.r.Speed())
	}
}

// A load that comes off or pushes, and limits that are no longer judged.
func TestFaultsOfTheLoad(t *testing.T) {
	speed := func(kind string, value float64, more map[string]float64) (*console, float64) {
		c := newConsole(t, benchConfig())
		c.hold(more)
		c.arm()
		c.r.Inject(kind, value)
		c.volts(40*time.Millisecond, 10)
		return c, c.r.Speed()
	}
	healthy := newConsole(t, benchConfig())
	healthy.hold(nil)
	healthy.arm()
	healthy.volts(40*time.Millisecond, 10)
	w := healthy.r.Speed()
	if _, got := speed(FaultLoose, 0.25, nil); got < 2*w {
		t.Errorf("a quarter of the inertia: %g rad/s after 40 ms, whole load %g", got, w)
	}
	if _, got := speed(FaultPushed, 0.05, nil); got < 1.1*w {
		t.Errorf("pushed: %g rad/s after 40 ms, healthy %g", got, w)
	}
	c, _ := speed(FaultUnjudged, 0, map[string]float64{"wmax": 20})
	c.volts(500*time.Millisecond, 10)
	if !c.r.Powered() || c.r.Speed() < 100 {
		t.Errorf("it judges its limits: %q", c.events)
	}
	if c.wait(400 * time.Millisecond); c.r.Powered() {
		t.Error("the timeout is gone as well")
	}
}

func TestEveryFaultIsTested(t *testing.T) {
	if len(FaultKinds()) != 20 {
		t.Errorf("%d kinds of fault: test the new one and count it here", len(FaultKinds()))
	}
}

func TestOneQuadrantDoesNotBrake(t *testing.T) {
	cfg := benchConfig()
	cfg.Driver.Quadrants = 1
	c := newConsole(t, cfg)
	c.hold(nil)
	c.arm()
	c.volts(600*time.Millisecond, 10)
	from := c.r.Speed()
	c.volts(50*time.Millisecond, 2)
	coast := c.r.Speed()
	c.volts(100*time.Millisecond, -5)
	if e := c.r.Extremes(); e.Volts > 10 || c.r.plant.shaft.i < 0 {
		t.Errorf("negative drive reached the winding: %+v", e)
	}
	full := newConsole(t, benchConfig())
	full.hold(nil)
	full.arm()
	full.volts(600*time.Millisecond, 10)
	full.volts(50*time.Millisecond, 2)
	if lost, braked := from-coast, from-full.r.Speed(); lost > braked/2 || lost <= 0 {
		t.Errorf("one quadrant lost %g rad/s, four %g", lost, braked)
	}
}

// A board that ignores its inputs goes on with its guard open, and says so.
func TestIgnoredInputsAreReportedAndNotJudged(t *testing.T) {
	for _, ignores := range []bool{false, true} {
		cfg := benchConfig()
		cfg.Board.Inputs = []string{"guard"}
		c := newConsole(t, cfg)
		if ignores {
			c.r.Inject(FaultIgnoresInputs, 0)
		}
		c.hold(nil)
		c.must("rate", "125 x tu")
		c.arm()
		c.volts(200*time.Millisecond, 6)
		c.r.SetInput("guard", false)
		c.volts(300*time.Millisecond, 6)
		if c.r.Powered() != ignores {
			t.Errorf("ignores %v: powered %v", ignores, c.r.Powered())
		}
		if in := c.last().Slow; !in.Seen || in.Inputs&1 != 0 {
			t.Errorf("ignores %v: inputs %+v", ignores, in)
		}
	}
}

// P6.3: the first line after an arm carries 1; a line with 0 is not newer, so it is
// no heartbeat and no drive.
func TestTheFirstNumberAfterAnArm(t *testing.T) {
	c := newConsole(t, benchConfig())
	c.hold(nil)
	c.arm()
	c.r.Receive(protocol.AppendDriveVolts(nil, 0, c.token, 5))
	c.wait(50 * time.Millisecond)
	if c.r.Powered() {
		t.Error("number 0 drives")
	}
	c.r.Receive(protocol.AppendDriveVolts(nil, 1, c.token, 5))
	c.wait(50 * time.Millisecond)
	if !c.r.Powered() {
		t.Error("number 1 does not")
	}
}
