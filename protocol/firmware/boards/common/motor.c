#include "motor.h"

#define OHM 1.1f
#define K 0.05f           /* V·s/rad */
#define PER_INERTIA 1e4f  /* 1/(kg·m²) */
#define VISCOUS 2e-5f     /* N·m·s/rad */
#define COULOMB 0.010f    /* N·m */
#define STILL 0.014f      /* N·m at rest */
#define COUNTS_PER_RAD 318.309886f

static float speed, fraction; /* rad/s; part of a count */
static float amps;
static uint16_t counts;
static uint8_t by_hand;

void board_motor_hand(uint8_t turning)
{
	by_hand = turning;
}

/* turned goes on counting at the speed that there is. */
static void turned(float dt)
{
	float whole;

	fraction += speed * dt * COUNTS_PER_RAD;
	whole = (float)(int16_t)fraction;
	fraction -= whole;
	counts = (uint16_t)(counts + (uint16_t)(int16_t)whole);
}

void board_motor_step(int32_t mv, uint8_t open, uint16_t us)
{
	const float dt = (float)us * 1e-6f;
	float torque, friction, next;

	if (by_hand) {
		speed = 3.14159265f;
		turned(dt);
		speed = 0; /* a hand lets go at rest */
		return;
	}
	amps = open ? 0 : ((float)mv * 1e-3f - K * speed) / OHM;
	torque = K * amps;
	friction = VISCOUS * speed;
	if (speed == 0) {
		if (torque <= STILL && torque >= -STILL)
			return;
		friction += torque > 0 ? COULOMB : -COULOMB;
	} else {
		friction += speed > 0 ? COULOMB : -COULOMB;
	}
	next = speed + dt * PER_INERTIA * (torque - friction);
	speed = next * speed < 0 ? 0 : next;
	turned(dt);
}

uint16_t board_motor_counts(void)
{
	return counts;
}

int32_t board_motor_ma(void)
{
	return (int32_t)(amps * 1000.0f);
}
