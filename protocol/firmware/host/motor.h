/* A brushed permanent-magnet motor with a load, in SI units, for the host build. */
#ifndef MOTOR_H
#define MOTOR_H

struct motor {
	/* What it is. */
	double ohm, henry, k; /* Ω, H, V·s/rad = N·m/A */
	double inertia;       /* kg·m² */
	double viscous;       /* N·m·s/rad */
	double coulomb, still; /* N·m, turning and at rest */
	double load;          /* N·m against positive rotation, active */
	int jammed;
	/* Where it is. */
	double amps, speed, angle; /* A, rad/s, rad */
};

/* motor_step goes on by dt seconds, at most some 50 µs, with volts across the
 * winding, or with the winding open. */
void motor_step(struct motor *m, double dt, double volts, int open);

#endif
