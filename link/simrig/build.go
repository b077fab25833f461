package simrig

import (
	"math"
	"math/rand/v2"
)

// newPlant makes the physics of c, at rest, bus charged, winding at ambient.
func newPlant(c *Config) plant {
	g := c.Load.Gear
	m := motor{
		r: c.Motor.Ohms, l: c.Motor.Henry, k: c.Motor.K,
		j:       c.Motor.Inertia + c.Load.Inertia/(g*g),
		fwd:     c.Friction.Forward.side(),
		rev:     c.Friction.Reverse.side(),
		load:    c.Load.Torque / g,
		gravity: c.Load.Gravity / g,
		gear:    g,
	}
	p := plant{
		motor: m,
		driver: driver{
			deadBand: c.Driver.DeadBand, delay: int64(math.Round(c.Driver.DeadTime * 1e9)),
			step: c.Driver.DutyStep, shorts: c.Driver.Off == "short", blocks: c.Driver.Quadrants == 1,
		},
		supply: supply{
			volts: c.Supply.Volts, ohms: c.Supply.Ohms, limit: c.Supply.Limit, fold: c.Supply.Fold,
			farads: c.Supply.Farads, sinks: c.Supply.Sinks, standby: c.Supply.Rest,
		},
		winding: winding{
			ambient: c.Motor.Ambient, perWatt: c.Motor.PerWatt, tau: c.Motor.ThermalS,
			ohms25: c.Motor.Ohms, celsius: c.Motor.Ambient,
		},
		limits: c.Nameplate.bounds(),
	}
	if k := c.Load.Coupling / (g * g); k > 0 {
		p.joint = coupling{spring: k, damp: c.Load.Damping / (g * g), gap: c.Load.LostMotion * g, j: m.j - c.Motor.Inertia, rub: c.Load.Rub / g}
		p.motor.j = c.Motor.Inertia
		p.shaft.free = true
	}
	if c.Driver.Quadrants == 4 {
		p.driver.least = -1
	}
	p.supply.bus = p.supply.idle()
	p.motor.r = p.winding.ohms()
	return p
}

func (s *SideSpec) side() side {
	return side{coulomb: s.Coulomb, static: s.Static, viscous: s.Viscous, stribeck: s.Stribeck}
}

// bind makes the shaft turn with the plant's own motor, wherever the plant lies.
func (p *plant) bind() { p.shaft.m = &p.motor }

// jam locks the shaft at once.
func (p *plant) jam() {
	p.shaft.locked = true
	p.shaft.w, p.shaft.dir = 0, 0
}

func newEncoder(c *Config, rng *rand.Rand) encoder {
	per := float64(c.Encoder.PerTurn) / (2 * math.Pi)
	if c.Encoder.Side == "load" {
		per /= c.Load.Gear
	}
	return encoder{perRad: per, onLoad: c.Encoder.Side == "load", phase: rng.Float64(),
		edges: misplaced(c.Encoder.Edge, c.Encoder.PerTurn, rng)}
}
