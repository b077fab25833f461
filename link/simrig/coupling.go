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
	c.th += pr.h / 2 * c.w
}

// slack reports whether the load rests and the joint carries nothing to speak
// of, and makes it so: what is left is far below one count of any encoder.
func (c *coupling) slack(th float64) bool {
	if c.spring == 0 {
		return true
	}
	c.at(th, 0)
	if math.Abs(c.w) > 1e-5 || math.Abs(c.torque) > 1e-6*c.spring {
		return false
	}
	c.w, c.torque = 0, 0
	return true
}
