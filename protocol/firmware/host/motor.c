#include "motor.h"

static double sign(double x)
{
	return x < 0 ? -1 : 1;
}

/* The winding is taken implicitly, so that a small inductance cannot make it
 * unstable; the shaft then with the new current. Friction holds a shaft that is
 * at rest until the torque is over the static friction, and never turns it
 * round. */
void motor_step(struct motor *m, double dt, double volts, int open)
{
	double torque, friction, next;

	if (open)
		m->amps = 0;
	else
		m->amps = (m->amps * m->henry / dt + volts - m->k * m->speed) / (m->henry / dt + m->ohm);
	if (m->jammed) {
		m->speed = 0;
		return;
	}
	torque = m->k * m->amps - m->load;
	if (m->speed == 0) {
		if (torque <= m->still && torque >= -m->still)
			return;
		friction = m->coulomb * sign(torque);
		m->speed = dt / m->inertia * (torque - friction);
	} else {
		friction = m->coulomb * sign(m->speed) + m->viscous * m->speed;
		next = m->speed + dt / m->inertia * (torque - friction);
		m->speed = next * m->speed < 0 ? 0 : next;
	}
	m->angle += m->speed * dt;
}
