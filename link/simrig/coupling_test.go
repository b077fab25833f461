package simrig

import (
	"math"
	"testing"
	"time"
)

// elastic is the bench rig with a spring between rotor and disc.
func elastic(spring, damp, gap float64) Config {
	c := benchConfig()
	c.Load.Coupling, c.Load.Damping, c.Load.LostMotion = spring, damp, gap
	return c
}

// TestResonance lets rotor and load swing against each other without friction
// and compares the period with 2π/√(k(1/Jm + 1/Jl)), the textbook two-mass
// formula, and the energy with itself.
func TestResonance(t *testing.T) {
	c := elastic(5, 0, 0)
	c.Friction.Forward = SideSpec{Stribeck: 1}
	c.Friction.Reverse = &c.Friction.Forward
	p := newPlant(&c)
	p.bind()
	p.joint.th = 0.02 // wound up
	pr := p.motor.pair(50e-6)
	jm, jl := c.Motor.Inertia, c.Load.Inertia
	energy := func() float64 {
		d := p.shaft.th - p.joint.th
		return jm*p.shaft.w*p.shaft.w/2 + jl*p.joint.w*p.joint.w/2 + 5*d*d/2
	}
	e0, last, turns, first, at := energy(), 0.0, 0, 0.0, 0.0
	for k := range 40_000 {
		p.joined(&pr, 0, true)
		d := p.shaft.th - p.joint.th
		if last < 0 && d >= 0 {
			now := float64(k) + last/(last-d)
			if turns == 0 {
				first = now
			}
			at = now
			turns++
		}
		last = d
	}
	period := (at - first) / float64(turns-1) * 50e-6
	near(t, "period", period, 2*math.Pi/math.Sqrt(5*(1/jm+1/jl)), 2e-3)
	near(t, "resonance", New(c, 1).Truth(100).Resonance, 2*math.Pi/period, 2e-3)
	near(t, "energy after 2 s", energy(), e0, 0.02)
}

// TestStiffCouplingIsRigid compares a stiff joint with none.
func TestStiffCouplingIsRigid(t *testing.T) {
	run := func(cfg Config) float64 {
		c := newConsole(t, cfg)
		c.hold(nil)
		c.arm()
		c.volts(80*time.Millisecond, 8)
		c.volts(80*time.Millisecond, 2)
		return c.r.Speed()
	}
	rigid, stiff := run(benchConfig()), run(elastic(200, 0.02, 0))
	near(t, "speed", stiff, rigid, 2e-3)
}

// TestLostMotion reverses by hand-sized steps: the rotor crosses the gap before
// the load follows.
func TestLostMotion(t *testing.T) {
	const gap = 0.2
	c := newConsole(t, elastic(50, 0.02, gap))
	c.hold(nil)
	c.arm()
	c.volts(300*time.Millisecond, 3)
	c.volts(time.Second, 0)
	j := &c.r.plant.joint
	between := func() float64 { return c.r.Angle() - j.th }
	if d := between(); math.Abs(d) > gap/2+0.01 {
		t.Fatalf("rotor %g rad ahead of the load, the gap allows %g", d, gap/2)
	}
	c.volts(300*time.Millisecond, -3)
	if d := between(); math.Abs(d+gap/2) > 0.01 {
		t.Errorf("rotor %g rad ahead of the load, want %g: on the other stop", d, -gap/2)
	}
	c.volts(500*time.Millisecond, 3)
	if d := between(); math.Abs(d-gap/2) > 0.01 {
		t.Errorf("rotor %g rad ahead of the load, want %g", d, gap/2)
	}
}
