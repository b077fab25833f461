/* The control period: measure, judge, drive. */
#include "gw_int.h"

#define REST_LOOPS (GW_WIN > 5 ? GW_WIN : 5)
#define RAMP_SPARE_US 1000000u

static uint32_t raw_to_mrad; /* bits */
static uint8_t rest_n;

void gw_loop_init(void)
{
	raw_to_mrad = gw_float_bits(gw_speed_lsb_mrad);
	for (uint16_t i = 0; i < 2 * GW_WIN + 1; i++)
		g.ring[i] = gw_port_counts();
	g.us = gw_port_us();
	g.rest = 0;
	rest_n = 0;
	gw_tele_loop();
}

/* counts_ago is the count that was latched so many loops ago, up to two windows. */
static uint16_t counts_ago(uint16_t loops)
{
	uint16_t at = g.ring_at;

	at = (uint16_t)(at >= loops ? at - loops : at + (2 * GW_WIN + 1) - loops);
	return g.ring[at];
}

static int32_t raw_speed(int16_t counts)
{
	return (int32_t)counts * (1 << GW_SPEED_SHIFT);
}

/* measure latches and returns the speed one window ago, in LSBs. */
static int32_t measure(void)
{
	uint16_t c = gw_port_counts(), was = counts_ago(0), mid;

	g.ring_at = (uint16_t)(g.ring_at == 2 * GW_WIN ? 0 : g.ring_at + 1);
	g.ring[g.ring_at] = c;
	g.position += (int16_t)(uint16_t)(c - was);
	mid = counts_ago(GW_WIN);
	g.raw = raw_speed((int16_t)(uint16_t)(c - mid));
	g.mrad = gw_mul(g.raw, raw_to_mrad);
#if GW_HAS_CURRENT
	g.amps = gw_port_current_ma();
#endif
#if GW_HAS_BUS
	g.bus = gw_port_bus_mv();
#endif
	if (g.raw != 0)
		rest_n = 0;
	else if (rest_n < REST_LOOPS)
		rest_n++;
	g.rest = rest_n == REST_LOOPS;
	return raw_speed((int16_t)(uint16_t)(mid - counts_ago(2 * GW_WIN)));
}

static uint32_t size_of(int32_t v)
{
	return v < 0 ? 0u - (uint32_t)v : (uint32_t)v;
}

#if GW_HAS_CURRENT
/* heat follows the budget of i² over time, which empties again with the time
 * constant GW_HEAT_TAU_S. The unit is 1024 mA² for a loop period. */
static void heat(void)
{
	uint32_t ma = size_of(g.amps) > 65535u ? 65535u : size_of(g.amps);

	g.heat += ma * ma / 1024u;
	if (g.heat > 0x7FFFFFFFu)
		g.heat = 0x7FFFFFFFu;
	g.heat_tick++;
	if (g.heat_tick == 64) {
		g.heat_tick = 0;
		g.heat -= g.heat / (uint32_t)(GW_HEAT_TAU_S * 1000000L / (64L * GW_LOOP_US));
	}
}
#endif

/* gw_judge_rest judges what does not need motion: also asked before a trip is
 * cleared. */
uint8_t gw_judge_rest(void)
{
#if GW_HAS_CURRENT
	if (g.lim[LIM_I] != 0 && size_of(g.amps) > g.lim[LIM_I])
		return GW_CURRENT;
	if (g.lim[LIM_HEAT] != 0 && g.heat > g.lim[LIM_HEAT])
		return GW_HEAT;
#endif
#if GW_HAS_BUS
	if (g.lim[LIM_BMAX] != 0 && g.bus > (int32_t)g.lim[LIM_BMAX])
		return GW_BUS_HIGH;
	if (g.lim[LIM_BMIN] != 0 && g.bus < (int32_t)g.lim[LIM_BMIN])
		return GW_BUS_LOW;
#endif
	return GW_NONE;
}

/* held adds a loop period to a timer while a condition lasts. */
static uint8_t held(uint32_t *timer, uint8_t lasts, uint32_t limit)
{
	if (!lasts) {
		*timer = 0;
		return 0;
	}
	*timer += (uint32_t)GW_LOOP_US;
	return *timer >= limit;
}

/* judge_turning judges whether the shaft does what the drive asks of it. moved
 * says that a count came in this period. */
static uint8_t judge_turning(uint8_t moved)
{
	uint32_t drive = size_of(g.u1);
	uint8_t driven = drive > g.lim[LIM_BREAK];
	int32_t against = g.u1 > 0 ? -g.mrad : g.mrad; /* speed against the drive */

	if (held(&g.nocnt_us, (uint8_t)(driven && g.lim[LIM_BREAK] != 0 && !moved), g.lim[LIM_NOCNT]))
		return GW_NO_COUNTS;
	if (size_of(g.position - g.stall_ref) > 2) {
		g.stall_ref = g.position;
		g.stall_us = 0;
	}
	if (held(&g.stall_us, driven, g.lim[LIM_STALL]))
		return GW_STALL;
	/* Braking turns against the drive too, but slower and slower: the time
	 * counts only while that speed does not fall. One count a window is no speed. */
	if (g.u1 == 0 || against <= 0 || size_of(g.raw) <= (1u << GW_SPEED_SHIFT)) {
		g.wrong_us = 0;
		g.wrong_ref = 0;
	} else if (against < g.wrong_ref || g.wrong_ref == 0) {
		g.wrong_us = 0;
		g.wrong_ref = against;
	} else if (held(&g.wrong_us, 1, g.lim[LIM_WRONG])) {
		return GW_WRONG_WAY;
	}
	return GW_NONE;
}

/* judge_motion judges the run; raw_ago is the speed one window ago. */
static uint8_t judge_motion(int32_t raw_ago, uint8_t moved)
{
	uint32_t change;

	if (size_of(g.mrad) > g.lim[LIM_W])
		return GW_SPEED;
	if (g.lim[LIM_A] != 0) {
		/* Two counts more or less are the encoder's steps, not a change. */
		change = size_of(g.raw - raw_ago);
		change = change > (2u << GW_SPEED_SHIFT) ? change - (2u << GW_SPEED_SHIFT) : 0;
		if (size_of(gw_mul((int32_t)change, raw_to_mrad)) > g.lim[LIM_A])
			return GW_ACCEL;
	}
	if (g.lim[LIM_TURNS] != 0 && size_of(g.position) > g.lim[LIM_TURNS])
		return GW_TURNS;
	if (held(&g.run_us, 1, g.lim[LIM_RUN]))
		return GW_RUN_TIME;
	return judge_turning(moved);
}

static uint8_t judge(uint8_t state, int32_t raw_ago, uint8_t moved)
{
	uint8_t cause = gw_inputs_cause();

	if (cause == GW_NONE)
		cause = gw_port_fault();
	if (cause == GW_NONE && state != GW_ARMED)
		cause = gw_judge_rest();
	if (cause == GW_NONE && state != GW_ARMED)
		cause = judge_motion(raw_ago, moved);
	return cause;
}

static void run_begin(void)
{
	g.run_seen = g.run;
	g.position = 0;
	g.stall_ref = 0;
	g.wrong_ref = 0;
	g.run_us = 0;
	g.stall_us = 0;
	g.wrong_us = 0;
	g.nocnt_us = 0;
	gw_law_reset();
}

#if GW_RAMP
/* ramp brings the target down, the whole range in a second, and returns the
 * cause that ends the run, if any. */
static uint8_t ramp(int32_t *target)
{
	uint32_t whole = g.lim[g.ramp_from == GW_DRIVING ? LIM_V : LIM_W];
	int32_t step = (int32_t)(whole / (1000000u / (uint32_t)GW_LOOP_US)) + 1;

	if (*target > step)
		*target -= step;
	else if (*target < -step)
		*target += step;
	else
		*target = 0;
	g.ramp_us += (uint32_t)GW_LOOP_US;
	if (*target == 0 && g.rest)
		return GW_RAMPED;
	return g.ramp_us > 1000000u + RAMP_SPARE_US ? GW_NOT_AT_REST : GW_NONE;
}
#endif

/* slewed holds the drive inside the slew limit and returns it in mV. */
static int32_t slewed(int32_t mv)
{
	int32_t step = g.lim[LIM_SLEW] > 0x3FFFFFFFu ? 0x3FFFFFFF : (int32_t)g.lim[LIM_SLEW];
	int32_t uv = mv * 1000;

	if (step != 0 && uv > g.uv + step) {
		uv = g.uv + step;
		g.sat = 1;
	} else if (step != 0 && uv < g.uv - step) {
		uv = g.uv - step;
		g.sat = 1;
	}
	g.uv = uv;
	return uv / 1000;
}

/* drive works out the output of this period, in mV. */
static int32_t drive(uint8_t mode, int32_t target)
{
	int32_t hi = (int32_t)g.lim[LIM_V], lo, mv = target;
	uint8_t sat = 0;

#if GW_HAS_BUS
	if (hi > g.bus)
		hi = g.bus < 0 ? 0 : g.bus;
#endif
	lo = GW_QUADRANTS == 4 ? -hi : 0;
	if (mode == GW_LOOPING) {
		mv = gw_law_step(target, lo, hi, &sat);
	} else if (mv > hi || mv < lo) {
		mv = mv > hi ? hi : lo;
		sat = 1;
	}
	g.sat |= sat;
	return slewed(mv);
}

/* lapsed is the cause by which a missing heartbeat or drive line ends an arm. */
static uint8_t lapsed_locked(uint32_t now)
{
	if (now - g.beat_us > g.lim[LIM_BEAT])
		return GW_BEAT;
	if (g.state != GW_RAMPING && now - g.lapse_us > 60000000u)
		return GW_DISARMED;
	return GW_NONE;
}

/* applied is the mean drive since the latch before, in mV: what was set then
 * came into force GW_DELAY_US after it. */
static int32_t applied(void)
{
#if GW_DELAY_US > 0
	return g.u1 + (int32_t)(((int64_t)(g.u2 - g.u1) * GW_DELAY_US) / GW_LOOP_US);
#else
	return g.u1;
#endif
}

void gw_loop(void)
{
	uint32_t now = gw_port_us();
	int32_t raw_ago = measure(), target, mean, mv = 0;
	uint8_t state, run, cause = GW_NONE, live;
	uint8_t moved = counts_ago(0) != counts_ago(1);

	GW_LOCK();
	g.us = now;
	mean = applied();
	g.u2 = g.u1;
	state = g.state;
	live = state != GW_OFF_STATE && state != GW_TRIPPED;
	if (live)
		cause = lapsed_locked(gw_port_us());
	run = g.run;
	target = g.target;
	GW_UNLOCK();
	g.volts_sum += mean;
	g.volts_n++;
#if GW_HAS_CURRENT
	heat();
#endif
	if (run != g.run_seen)
		run_begin();
	if (live && cause == GW_NONE)
		cause = judge(state, raw_ago, moved);
#if GW_RAMP
	if (state == GW_RAMPING && cause == GW_NONE)
		cause = ramp(&target);
#endif
#if GW_EXPER
	if (state == GW_DRIVING)
		target = gw_exper_loop(target);
#endif
	if (state == GW_DRIVING || state == GW_LOOPING || state == GW_RAMPING)
		mv = drive(state == GW_RAMPING ? g.ramp_from : state, target);
	GW_LOCK();
	if (cause != GW_NONE) {
		gw_stop_locked(cause, now);
	} else if (g.state == state && g.run == run && live && state != GW_ARMED) {
		if (state == GW_RAMPING)
			g.target = target;
		g.u1 = gw_port_drive(mv);
	}
	GW_UNLOCK();
#if GW_CAPTURE
	gw_cap_loop(mean);
#endif
	gw_tele_loop();
}
