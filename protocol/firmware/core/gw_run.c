/* Arming, driving, stopping, and the log of stops. */
#include "gw_int.h"

#define NONCE_GOOD_US 2000000u
#define LAPSE_US 60000000u

/* The log lies where a reset leaves it, with a CRC that says whether it did. */
static struct {
	uint16_t total;
	struct gw_stopped stop[GW_LOG];
	uint16_t crc;
} kept GW_NOINIT;

static uint16_t kept_crc(void)
{
	const uint8_t *p = (const uint8_t *)&kept;
	const uint8_t *end = (const uint8_t *)&kept.crc;
	uint16_t crc = 0x4757; /* not that of memory full of one value */

	while (p < end)
		crc = gw_crc(crc, *p++);
	return crc;
}

void gw_log_init(uint8_t cause)
{
	if (GW_LOG_SURVIVES && cause != GW_RESET_POWER && kept.crc == kept_crc())
		return;
	kept.total = 0;
	kept.crc = kept_crc();
}

static uint8_t on(uint8_t state)
{
	return state != GW_OFF_STATE && state != GW_TRIPPED;
}

/* gw_stop_locked switches the output off first and then sees what that ends. It
 * does nothing more where nothing was armed. The first cause stays. */
void gw_stop_locked(uint8_t cause, uint32_t seen)
{
	struct gw_stopped *s;
	uint32_t off;

	gw_port_off();
	off = gw_port_us();
	g.nonce_ok = 0;
	g.u1 = 0;
	g.u2 = 0;
	g.uv = 0;
	g.target = 0;
#if GW_EXPER
	gw_exper_end();
#endif
	if (!on(g.state))
		return;
	s = &kept.stop[kept.total % GW_LOG];
	s->cause = cause;
	s->seen = seen;
	s->beat = g.beat_us;
	s->off = off;
	s->speed = g.mrad;
	kept.total++;
	kept.crc = kept_crc();
#if GW_CAPTURE
	gw_cap_stop_locked();
#endif
	g.state = GW_OFF_STATE;
	if (cause >= GW_BEAT) {
		g.state = GW_TRIPPED;
		g.trip = cause;
	}
	g.ev_due |= 1;
	g.ev_cause = cause;
	g.ev_us = cause >= GW_BEAT ? seen : off;
}

uint8_t gw_inputs_cause(void)
{
	uint16_t in = gw_port_inputs();

	if ((in & GW_ESTOP_MASK) != GW_ESTOP_MASK)
		return GW_ESTOP;
	if ((in & GW_GUARD_MASK) != GW_GUARD_MASK)
		return GW_INTERLOCK;
	return GW_NONE;
}

uint8_t gw_at_rest(void)
{
	uint8_t rest;

	GW_LOCK();
	rest = g.rest;
	GW_UNLOCK();
	return rest;
}

/* mix is a one-to-one function over 32 bits: numbers that differ going in differ
 * coming out. */
static uint32_t mix(uint32_t x)
{
	x ^= x >> 16;
	x *= 0x45D9F3Bu;
	x ^= x >> 15;
	x *= 0x2C1B3C6Du;
	x ^= x >> 16;
	return x;
}

/* gw_nonce gives out a one-time number. Boot count and running number make it
 * differ from every other, also from those before a restart (P6.1). */
void gw_nonce(uint16_t n)
{
	uint32_t v, now = gw_port_us();

	g.nonce_seq++;
	v = mix(((uint32_t)g.boots << 16) | g.nonce_seq);
	GW_LOCK();
	g.nonce = v;
	g.nonce_us = now;
	g.nonce_ok = 1;
	GW_UNLOCK();
	gw_ok(n);
	gw_put(' ');
	gw_put_hex(v, 8);
	gw_end();
}

/* arm_locked arms if everything allows it and returns 0, or the refusal. */
static uint8_t arm_locked(uint32_t nonce, uint16_t crc)
{
	uint32_t now = gw_port_us();
	uint8_t good = g.nonce_ok && nonce == g.nonce && now - g.nonce_us <= NONCE_GOOD_US;
	uint16_t token;

	g.nonce_ok = 0; /* used, whatever comes of it */
	if (g.state == GW_TRIPPED)
		return REF_TRIPPED;
	if (g.state != GW_OFF_STATE)
		return REF_STATE;
	if (!good)
		return REF_NONCE;
	if (!g.limits_in || crc != gw_set_crc(g.lim_held, LIM_N))
		return REF_LIMITS;
	if (gw_inputs_cause() != GW_NONE || gw_port_fault() != 0)
		return REF_INTERLOCK;
	if (!g.rest)
		return REF_MOVING;
	token = (uint16_t)(nonce ^ (nonce >> 16));
	if (token == g.token)
		token++;
	g.token = token;
	g.k = 0;
	g.beat_us = now;
	g.lapse_us = now;
	g.target = 0;
	g.state = GW_ARMED;
	/* A sample that was latched before waits to be sent, and goes out after the
	 * answer: with the state of then a console would see an arm that has ended. */
	if (g.due)
		g.snap.flags = (uint8_t)((g.snap.flags & ~7u) | GW_ARMED);
	return 0;
}

void gw_arm(uint16_t n, char **f, uint8_t nf)
{
	uint32_t nonce, crc;
	uint8_t no;

	if (nf != 4 || !gw_hex(f[2], 8, &nonce) || !gw_hex(f[3], 4, &crc)) {
		gw_no(n, REF_ARG);
		return;
	}
	GW_LOCK();
	no = arm_locked(nonce, (uint16_t)crc);
	GW_UNLOCK();
	if (no != 0) {
		gw_no(n, no);
		return;
	}
	gw_ok(n);
	gw_put(' ');
	gw_put_hex(g.token, 4);
	gw_end();
}

/* accept_locked keeps the number and the time of a heartbeat. */
static void accept_locked(uint16_t k, uint32_t now, uint8_t drive)
{
	g.k = k;
	g.beat_us = now;
	if (drive)
		g.lapse_us = now;
}

#if GW_EXPER
#define EXPER_SIZE gw_exper_size()
#else
#define EXPER_SIZE 0
#endif

static void drive_locked(uint8_t state, int32_t value, uint16_t k, uint32_t now)
{
	uint32_t size = (uint32_t)(value < 0 ? -value : value);
	uint8_t volts = state == GW_DRIVING;
	int32_t low = value; /* the least that the output is asked for */

	if (g.state == GW_RAMPING) {
		accept_locked(k, now, 1); /* it comes to rest whatever is asked */
		return;
	}
	if (g.state != GW_ARMED && g.state != state)
		return; /* P6.5 */
	accept_locked(k, now, 1);
	if (volts) {
		size += (uint32_t)EXPER_SIZE;
		low -= EXPER_SIZE;
	}
	if (size > g.lim[volts ? LIM_V : LIM_W] || (GW_QUADRANTS < 4 && low < 0)) {
		gw_stop_locked(volts ? GW_VOLTS : GW_SPEED, now);
		return;
	}
	g.target = value;
	if (g.state == GW_ARMED) {
		g.run++;
		g.state = state;
#if GW_CAPTURE
		gw_cap_trigger_locked();
#endif
	}
}

/* gw_motion takes hb, dv and ds. Whatever is wrong with one, it is as if it had
 * not come (P6.3). */
void gw_motion(uint8_t verb, char **f, uint8_t nf)
{
	uint8_t state;
	uint16_t k;
	uint32_t token, now = gw_port_us();
	int32_t value = 0;

	if (verb == W_DV)
		state = GW_DRIVING;
	else if (verb == W_DS)
		state = GW_LOOPING;
	else if (verb == W_HB)
		state = GW_OFF_STATE;
	else
		return;
	if (nf != (state ? 4 : 3) || !gw_uint16(f[1], &k) || !gw_hex(f[2], 4, &token))
		return;
	if (state && !gw_int32(f[3], &value))
		return;
	GW_LOCK();
	if (on(g.state) && token == g.token && (uint16_t)(k - g.k - 1u) < 0x7FFFu) {
		if (state)
			drive_locked(state, value, k, now);
		else
			accept_locked(k, now, 0);
	}
	GW_UNLOCK();
}

void gw_disarm(uint16_t n)
{
	GW_LOCK();
	gw_stop_locked(GW_DISARMED, gw_port_us());
	GW_UNLOCK();
	gw_ok(n);
	gw_end();
}

static const char ramping[] GW_FLASH = " ramping";

void gw_ramp(uint16_t n, char **f, uint8_t nf)
{
	uint32_t token;
	uint8_t no = 0;

	if (!GW_RAMP) {
		gw_no(n, REF_ABSENT);
		return;
	}
	if (nf != 3 || !gw_hex(f[2], 4, &token)) {
		gw_no(n, REF_ARG);
		return;
	}
	GW_LOCK();
	if (g.state != GW_DRIVING && g.state != GW_LOOPING) {
		no = REF_STATE;
	} else if (token != g.token) {
		no = REF_TOKEN;
	} else {
#if GW_EXPER
		gw_exper_end();
#endif
		g.ramp_from = g.state;
		g.ramp_us = 0;
		g.state = GW_RAMPING;
	}
	GW_UNLOCK();
	if (no != 0) {
		gw_no(n, no);
		return;
	}
	gw_ok(n);
	gw_puts(ramping);
	gw_end();
}

/* gw_reset clears a latched trip once nothing of it is left (P7.6). */
void gw_reset(uint16_t n)
{
	uint8_t no = 0;

	GW_LOCK();
	if (g.state == GW_TRIPPED) {
		if (gw_inputs_cause() != GW_NONE || gw_port_fault() != 0 || gw_judge_rest() != GW_NONE)
			no = REF_INTERLOCK;
		else if (!g.rest)
			no = REF_MOVING;
		if (no == 0) {
			g.state = GW_OFF_STATE;
			g.trip = GW_NONE;
		}
	} else if (g.state != GW_OFF_STATE) {
		no = REF_STATE;
	}
	GW_UNLOCK();
	if (no != 0) {
		gw_no(n, no);
		return;
	}
	gw_ok(n);
	gw_end();
}

void gw_log(uint16_t n, char **f, uint8_t nf)
{
	uint16_t i, total;
	struct gw_stopped s;

	GW_LOCK();
	total = kept.total;
	GW_UNLOCK();
	if (nf != 3 || !gw_uint16(f[2], &i) || i >= GW_LOG || i >= total) {
		gw_no(n, REF_ARG);
		return;
	}
	GW_LOCK();
	total = kept.total;
	s = kept.stop[(uint16_t)(total - 1u - i) % GW_LOG];
	GW_UNLOCK();
	gw_ok(n);
	gw_put_u(i);
	gw_put_u(total);
	gw_put_u(s.cause);
	gw_put_u(s.seen);
	gw_put_u(s.beat);
	gw_put_u(s.off);
	gw_put_i(s.speed);
	gw_end();
}
