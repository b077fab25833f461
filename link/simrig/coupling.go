package simrig

import "math"

// coupling joins rotor and load by a spring with damping and lost motion, all
// referred to the motor shaft. A zero spring is a rigid joint: there is then no
// load of its own.
type coupling struct {
	spring float64 // N·m/rad
	damp   float64 // N·m·s/rad, acting while engaged
	gap    float64 // rad of free play, from stop to stop
	j      float64 // kg·m² of the load
	rub    float64 // N·m of Coulomb friction on the load

	th, w  float64 // rad, rad/s of the load
	torque float64 // N·m on the load now
}

// at sets the torque for the angle th of the rotor: nothing inside the gap. A
// joint pushes from the stop it lies on; its damping never pulls.
func (c *coupling) at(th, w float64) {
	twist := th - c.th
	switch half := c.gap / 2; {
	case twist > half:
		c.torque = c.spring*(twist-half) + c.damp*(w-c.w)
		if c.gap > 0 {
			c.torque = max(c.torque, 0)
		}
	case twist < -half:
		c.torque = c.spring*(twist+half) + c.damp*(w-c.w)
		if c.gap > 0 {
			c.torque = min(c.torque, 0)
		}
	default:
		c.torque = 0
	}
}

// joined carries rotor and load over one step: half a step of the angles, a step
// of the speeds under the torque that they give, half a step of the angles
// (Störmer–Verlet, second order, and it does not feed a resonance). The rotor's
// own step stays exact, sticking and slipping included.
func (p *plant) joined(pr *pair, v float64, open bool) {
	c, s := &p.joint, &p.shaft
	c.th += pr.h / 2 * c.w
	c.at(s.th+pr.h/2*s.w, s.w)
	s.twist = c.torque
	s.step(pr, v, open)
	c.w += pr.h / c.j * (c.torque - p.motor.pull(c.th))
	if rub := pr.h / c.j * c.rub; math.Abs(c.w) <= rub {
		c.w = 0
	} else {
		c.w -= math.Copysign(rub, c.w)
	}
	c.th += pr.h / 2 * c.w
}

// slack reports whether load and joint rest: the friction of the load holds
// what the joint and the pull leave, or there is nothing to speak of, far below
// one count of any encoder.
func (p *plant) slack() bool {
	c := &p.joint
	if c.spring == 0 {
		return true
	}
	c.at(p.shaft.th, 0)
	p.shaft.twist = c.torque
	if math.Abs(c.w) > 1e-5 || math.Abs(c.torque-p.motor.pull(c.th)) > c.rub+1e-6*c.spring {
		return false
	}
	c.w = 0
	return true
}
