/* The control law (P8.2), parallel form, backward Euler, clamped integral. It is
 * computed in binary32, or in integers where GW_FIXED is set; the gains on the
 * wire and in memory are the same either way. */
#include "gw_int.h"

#if !GW_FIXED

static float kp, ki_t, b, kv, ks; /* ki times the period */
static float lsb;                 /* rad/s */
static float integral;
#if GW_PID
static float d_keep, d_new, d, y_was; /* D = d_keep·D − d_new·(y − y_was) */
#endif

static float value(uint8_t slot)
{
	float v;

	gw_copy(&v, &g.gain_run[slot], 4);
	return v;
}

void gw_law_use(void)
{
	const float t = (float)GW_LOOP_US * 1e-6f;
	uint32_t bits = gw_float_bits(gw_speed_lsb_mrad);

	gw_copy(&lsb, &bits, 4);
	lsb *= 1e-3f;
	kp = value(G_KP);
	ki_t = value(G_KI) * t;
	b = value(G_B);
	kv = value(G_KV);
	ks = value(G_KS);
#if GW_PID
	d_keep = value(G_TF) / (value(G_TF) + t);
	d_new = value(G_KD) / (value(G_TF) + t);
#endif
	gw_law_reset();
}

void gw_law_reset(void)
{
	integral = 0;
#if GW_PID
	d = 0;
	y_was = (float)g.raw * lsb;
#endif
}

int32_t gw_law_step(int32_t set_mrad, int32_t lo_mv, int32_t hi_mv, uint8_t *sat)
{
	const float r = (float)set_mrad * 1e-3f, y = (float)g.raw * lsb;
	const float hi = (float)hi_mv * 1e-3f, lo = (float)lo_mv * 1e-3f;
	float next = integral + ki_t * (r - y);
	float u = kp * (b * r - y) + kv * r + next;

#if GW_PID
	d = d_keep * d - d_new * (y - y_was);
	y_was = y;
	u += d;
#endif
	if (set_mrad != 0)
		u += set_mrad > 0 ? ks : -ks;
	if (u > hi) {
		*sat = 1;
		u = hi;
		if (next > integral)
			next = integral;
	} else if (u < lo) {
		*sat = 1;
		u = lo;
		if (next < integral)
			next = integral;
	} else if (!(u >= lo)) { /* not a number: gains beyond all reason */
		*sat = 1;
		u = 0;
		next = 0;
	}
	integral = next;
	u *= 1000.0f;
	return (int32_t)(u < 0 ? u - 0.5f : u + 0.5f);
}

#else

/* Units: setpoint and speed in mrad/s; the output in mV times 2^8, the integral
 * in mV times 2^24. A gain in V/(rad/s) is one in mV/(mrad/s). */
#define OUT_BITS 8
#define INT_BITS 24

static struct gw_scale kp, ki_t, b, kv, ks;
static int64_t integral;
#if GW_PID
static struct gw_scale d_keep, d_new;
static int32_t d, y_was;
#endif

/* shrink makes a scale of m / 2^s with a mantissa of at most 24 bits. */
static struct gw_scale shrink(uint64_t m, int16_t s, uint8_t neg)
{
	struct gw_scale k;

	while (m >= 0x1000000u || s > 62) {
		m = (m + 1u) >> 1;
		s--;
	}
	if (s < 1) {
		s = 1;
		m = 0xFFFFFFu;
	}
	k.m = neg ? -(int32_t)m : (int32_t)m;
	k.s = (uint8_t)s;
	return k;
}

/* raised multiplies by 2^bits. */
static struct gw_scale raised(struct gw_scale k, uint8_t bits)
{
	if (k.s > bits) {
		k.s = (uint8_t)(k.s - bits);
	} else if (k.m != 0) {
		k.m = k.m < 0 ? -0xFFFFFF : 0xFFFFFF;
		k.s = 1;
	}
	return k;
}

/* ratio is the gain in slot, times by, divided by per. */
static struct gw_scale ratio(uint8_t slot, uint32_t by, uint32_t per)
{
	struct gw_scale k = gw_scale_of(g.gain_run[slot]);
	uint64_t m = (uint64_t)(k.m < 0 ? -k.m : k.m) * by;
	int16_t s = k.s;

	while (m != 0 && m < ((uint64_t)1 << 60)) {
		m <<= 1;
		s++;
	}
	return shrink(m / per, s, k.m < 0);
}

void gw_law_use(void)
{
#if GW_PID
	const uint32_t t_ns = (uint32_t)GW_LOOP_US * 1000u;
	uint32_t tf_ns = gw_scaled(g.gain_run[G_TF], 1000000u);

	tf_ns = tf_ns > 4000000u ? 4000000000u : tf_ns * 1000u; /* held at 4 s */
	d_keep = shrink(((uint64_t)tf_ns << 24) / ((uint64_t)tf_ns + t_ns), 24, 0);
	/* kd/(tf + t), in steps that stay inside 32 bits: 1e9/(tf + t) first. */
	d_new = ratio(G_KD, 1000000000u, tf_ns + t_ns);
	d_new = raised(d_new, OUT_BITS);
#endif
	kp = raised(gw_scale_of(g.gain_run[G_KP]), OUT_BITS);
	ki_t = raised(ratio(G_KI, (uint32_t)GW_LOOP_US, 1000000u), INT_BITS);
	b = gw_scale_of(g.gain_run[G_B]);
	kv = raised(gw_scale_of(g.gain_run[G_KV]), OUT_BITS);
	ks = raised(gw_scale_of(g.gain_run[G_KS]), OUT_BITS);
	gw_law_reset();
}

void gw_law_reset(void)
{
	integral = 0;
#if GW_PID
	d = 0;
	y_was = g.mrad;
#endif
}

int32_t gw_law_step(int32_t set_mrad, int32_t lo_mv, int32_t hi_mv, uint8_t *sat)
{
	const int64_t hi = (int64_t)hi_mv << OUT_BITS, lo = -((int64_t)-lo_mv << OUT_BITS);
	const int64_t end = (int64_t)1 << 55; /* far beyond any drive, far from overflow */
	int64_t next = integral + gw_times(gw_clip((int64_t)set_mrad - g.mrad), ki_t);
	int64_t u = gw_times(gw_clip(gw_times(set_mrad, b) - g.mrad), kp) + gw_times(set_mrad, kv) + (next >> (INT_BITS - OUT_BITS));

	if (next > end || next < -end)
		next = next > end ? end : -end;
#if GW_PID
	d = gw_clip(gw_times(d, d_keep) - gw_times(gw_clip((int64_t)g.mrad - y_was), d_new));
	y_was = g.mrad;
	u += d;
#endif
	if (set_mrad != 0)
		u += gw_times(set_mrad > 0 ? 1000 : -1000, ks);
	if (u > hi) {
		*sat = 1;
		u = hi;
		if (next > integral)
			next = integral;
	} else if (u < lo) {
		*sat = 1;
		u = lo;
		if (next < integral)
			next = integral;
	}
	integral = next;
	return (int32_t)((u + (1 << (OUT_BITS - 1))) >> OUT_BITS);
}

#endif
