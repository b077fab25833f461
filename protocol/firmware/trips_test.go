package firmware_test

import (
	"math"
	"testing"

	"gainwright/protocol"
)

// Each limit is provoked on the simulated rig, and each must stop it for its own
// cause. The motor is that of host/host.c: 0.05 V·s/rad, 1.1 Ω, 1e-4 kg·m².
func TestTrips(t *testing.T) {
	for _, c := range []struct {
		name   string
		limits map[string]float64
		volts  float64
		then   func(*board) // after 400 ms of drive
		cause  protocol.Cause
		within int // ms
	}{
		{"speed", map[string]float64{"wmax": 100}, 8, nil, protocol.CauseSpeed, 500},
		{"current", map[string]float64{"imax": 5}, 8, nil, protocol.CauseCurrent, 100},
		{"bus high", nil, 3, func(b *board) { b.set(setSupply, 31000) }, protocol.CauseBusHigh, 50},
		{"bus low", nil, 3, func(b *board) { b.set(setSupply, 17000) }, protocol.CauseBusLow, 50},
		{"acceleration", map[string]float64{"amax": 2000}, 8, nil, protocol.CauseAccel, 100},
		{"turns", map[string]float64{"turns": 3}, 4, nil, protocol.CauseTurns, 1000},
		{"stall", map[string]float64{"nocnt": 5}, 4, func(b *board) { b.set(setJam, 1) }, protocol.CauseStall, 600},
		{"no counts", nil, 4, func(b *board) { b.set(setEncoder, 1) }, protocol.CauseNoCounts, 400},
		{"wrong way", nil, 4, nil, protocol.CauseWrongWay, 400},
		{"overhauled", nil, 3, func(b *board) { b.set(setLoad, 300_000) }, protocol.CauseWrongWay, 800},
		{"heat", map[string]float64{"heat": 1}, 4, func(b *board) { b.set(setJam, 1) }, protocol.CauseHeat, 400},
		{"run time", map[string]float64{"run": 1}, 3, nil, protocol.CauseRunTime, 1100},
		{"guard", nil, 3, func(b *board) { b.set(setInputs, 1) }, protocol.CauseInterlock, 20},
		{"E-stop", nil, 3, func(b *board) { b.set(setInputs, 2) }, protocol.CauseEStop, 20},
		{"temperature", nil, 3, func(b *board) { b.set(setFault, int32(protocol.CauseTemp)) }, protocol.CauseTemp, 20},
		{"volts", nil, 3, func(b *board) { b.volts(20.001); b.run(10) }, protocol.CauseVolts, 20},
	} {
		t.Run(c.name, func(t *testing.T) {
			b := ready(t, c.limits)
			if c.cause == protocol.CauseWrongWay && c.then == nil {
				b.set(setEncoder, 2)
				b.run(20)
			}
			b.volts(c.volts)
			if c.then != nil {
				for range 8 {
					b.run(50)
					b.volts(c.volts)
				}
				b.run(20)
				if x := b.truth(); x.State != protocol.Driving {
					t.Fatalf("stopped before its time: %+v %+v", x, b.stopLog(0))
				}
				c.then(b)
			}
			b.wantTrip(c.cause, c.within)
			b.volts(c.volts)
			b.run(20)
			if x := b.truth(); x.Driven != 0 {
				t.Errorf("driven again after the trip: %+v", x)
			}
		})
	}
}

// The same runs at the same limits, without what provokes them, do not trip.
func TestNoTripWithoutCause(t *testing.T) {
	b := ready(t, map[string]float64{"wmax": 200, "imax": 9, "amax": 1e5, "turns": 500, "heat": 200})
	for i := range 100 {
		v := 8.0
		if i%20 >= 10 {
			v = 2
		}
		b.volts(v)
		b.run(50)
	}
	b.volts(0)
	b.run(200)
	if x := b.truth(); x.State != protocol.Driving {
		t.Errorf("%+v %+v", x, b.stopLog(0))
	}
}

// Braking turns against the drive for a while, and that is no wrong way.
func TestReversalIsNotTheWrongWay(t *testing.T) {
	b := ready(t, map[string]float64{"wrong": 0.01})
	for i := range 40 {
		v := 5.0
		if i/10%2 == 1 {
			v = -5
		}
		b.volts(v)
		b.run(50)
		if x := b.truth(); x.State != protocol.Driving {
			t.Fatalf("after %d ms %+v %+v", i*50, x, b.stopLog(0))
		}
	}
}

func TestSpeedSetpointOverLimit(t *testing.T) {
	b := ready(t, map[string]float64{"wmax": 100})
	b.speed(100)
	b.run(20)
	if x := b.truth(); x.State != protocol.Looping {
		t.Fatalf("a setpoint at the limit: %+v", x)
	}
	b.speed(100.001)
	b.wantTrip(protocol.CauseSpeed, 50)
}

func TestResetIsRefusedWhileTheCauseIsThere(t *testing.T) {
	b := ready(t, nil)
	b.volts(4)
	b.run(200)
	b.set(setInputs, 1)
	b.run(20)
	b.must("no 11", "reset", "")
	b.set(setInputs, 3)
	b.must("no 10", "reset", "")
	b.send([]byte{protocol.Cut}) // a cut clears no trip: P2.2
	b.run(20)
	if x := b.truth(); x.State != protocol.Tripped {
		t.Errorf("%+v", x)
	}
	b.run(2500)
	b.must("ok", "reset", "")
	b.must("ok", "reset", "")
	if x := b.truth(); x.State != protocol.Off {
		t.Errorf("%+v", x)
	}
}

func TestSlewLimit(t *testing.T) {
	b := ready(t, map[string]float64{"slew": 20})
	b.volts(10)
	b.run(100)
	if x := b.truth(); math.Abs(float64(x.Wanted)-2000) > 100 {
		t.Errorf("%d mV after 0.1 s at 20 V/s", x.Wanted)
	}
	b.volts(10)
	b.run(450)
}

func TestRampAndCut(t *testing.T) {
	b := ready(t, nil)
	b.putGainsOff(map[string]float64{"kp": 0.05, "ki": 1, "b": 1})
	for range 20 {
		b.speed(150)
		b.run(50)
	}
	b.must("no 7", "ramp", "0000")
	b.must("ok ramping", "ramp", hex16(b.token))
	b.alive(100)
	if x := b.truth(); x.State != protocol.Ramping || x.Speed > 148_000 {
		t.Errorf("%+v", x)
	}
	b.alive(1000)
	if x, s := b.truth(), b.stopLog(0); x.State != protocol.Off || s.Cause != protocol.CauseRamped || s.Speed != 0 {
		t.Errorf("%+v %+v", x, s)
	}
	b.must("no 5", "ramp", hex16(b.token))

	b.arm()
	b.volts(4)
	b.run(200)
	b.must("ok ramping", "ramp", hex16(b.token))
	b.set(setLoad, -200_000) // it pulls on: the ramp cannot bring it to rest
	b.alive(2300)
	if x, s := b.truth(), b.stopLog(0); x.State != protocol.Tripped || s.Cause != protocol.CauseNotAtRest {
		t.Errorf("%+v %+v", x, s)
	}
}
