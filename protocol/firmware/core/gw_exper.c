/* Experiments that the loop drives itself (power exper, P13): a relay with
 * hysteresis, a maximal-length binary sequence and a square wave, all about the drive
 * line's volts. They only change what the output is asked for: limits, heartbeat, cut
 * and arming are those of any run. */
#include "gw_int.h"

#if GW_EXPER

enum { PHASE_NONE, PHASE_RELAY, PHASE_PRBS, PHASE_STEPS, PHASE_DONE };

static struct {
	uint8_t phase, fresh, high;
	int32_t amp;          /* mV */
	int32_t middle, hyst; /* mrad/s */
	uint16_t todo, count; /* switchings wanted and made */
	uint16_t taps, shift; /* register */
	uint32_t left;        /* bits or steps that are still to come */
	uint16_t every, tick; /* loops each */
	uint8_t stages;
} x;

/* Taps of maximal-length registers of 3 to 16 stages, bit 0 the stage that goes
 * out: P. Alfke, Xilinx application note 052 (1996), table 3 (from memory), stage k of n as
 * bit n-k. */
static const uint16_t taps[] = { 0x3, 0x3, 0x5, 0x3, 0x3, 0x1D, 0x11, 0x9, 0x5, 0x941, 0x1601, 0x2A01, 0x3, 0x100B };

void gw_exper_end(void)
{
	x.phase = PHASE_NONE;
	x.amp = 0;
}

int32_t gw_exper_size(void)
{
	return x.amp;
}

static void finish(void)
{
	x.phase = PHASE_DONE;
	x.amp = 0;
}

static void relay(void)
{
	uint8_t high = x.high;

	if (x.fresh)
		high = g.mrad < x.middle;
	else if (high && g.mrad >= x.middle + x.hyst)
		high = 0;
	else if (!high && g.mrad <= x.middle - x.hyst)
		high = 1;
	if (!x.fresh && high != x.high) {
		x.count++;
		if (x.count == x.todo)
			finish();
	}
	x.fresh = 0;
	x.high = high;
}

/* next_bit is the bit that the register has out, which it shifts. */
static uint8_t next_bit(void)
{
	uint16_t v;
	uint8_t odd = 0, out = x.shift & 1u;

	for (v = x.shift & x.taps; v != 0; v &= (uint16_t)(v - 1u))
		odd ^= 1u;
	x.shift = (uint16_t)((x.shift >> 1) | ((uint32_t)odd << (x.stages - 1u)));
	return out;
}

/* levels goes on with the sequence or the square wave. */
static void levels(void)
{
	uint8_t high;

	if (x.tick != 0) {
		x.tick--;
		return;
	}
	if (x.left == 0) {
		finish();
		return;
	}
	x.left--;
	x.tick = (uint16_t)(x.every - 1u);
	high = x.phase == PHASE_PRBS ? next_bit() : (uint8_t)(x.fresh || !x.high);
	if (!x.fresh && high != x.high)
		x.count++;
	x.fresh = 0;
	x.high = high;
}

/* gw_exper_loop is called once a loop period of an open-loop run and returns what
 * the output is to be about the drive line's volts, in mV. */
int32_t gw_exper_loop(int32_t mv)
{
	if (x.phase == PHASE_RELAY)
		relay();
	else if (x.phase == PHASE_PRBS || x.phase == PHASE_STEPS)
		levels();
	return x.high ? mv + x.amp : mv - x.amp;
}

static uint8_t positive(const char *s, int32_t most, int32_t *v)
{
	return gw_int32(s, v) && *v >= 1 && *v <= most;
}

/* begin_locked starts the experiment unless something is against it. */
static uint8_t begin_locked(uint32_t token, int32_t amp)
{
	int32_t size = g.target < 0 ? -g.target : g.target;

	if (g.state != GW_DRIVING)
		return REF_STATE;
	if (token != g.token)
		return REF_TOKEN;
	if ((uint32_t)(size + amp) > g.lim[LIM_V] || (GW_QUADRANTS < 4 && g.target < amp))
		return REF_HARD;
	gw_exper_end();
	x.amp = amp;
	x.fresh = 1;
	x.count = 0;
	x.tick = 0;
	return 0;
}

static uint8_t start_relay(char **f, uint8_t nf)
{
	int32_t amp, hyst, middle, todo;
	uint32_t token;
	uint8_t no;

	if (nf != 8 || !gw_hex(f[3], 4, &token) || !positive(f[4], 100000, &amp) || !positive(f[5], 100000000, &hyst) ||
	    !gw_int32(f[6], &middle) || middle > 100000000 || middle < -100000000 || !positive(f[7], 10000, &todo))
		return REF_ARG;
	GW_LOCK();
	no = begin_locked(token, amp);
	if (no == 0) {
		x.hyst = hyst;
		x.middle = middle;
		x.todo = (uint16_t)todo;
		x.phase = PHASE_RELAY;
	}
	GW_UNLOCK();
	return no;
}

static uint8_t start_prbs(char **f, uint8_t nf)
{
	int32_t amp, stages, every, seed;
	uint32_t token;
	uint8_t no;

	if (nf != 8 || !gw_hex(f[3], 4, &token) || !positive(f[4], 100000, &amp) || !positive(f[5], 16, &stages) || stages < 3 ||
	    !positive(f[6], 10000, &every) || !positive(f[7], (int32_t)((1uL << stages) - 1u), &seed))
		return REF_ARG;
	GW_LOCK();
	no = begin_locked(token, amp);
	if (no == 0) {
		x.stages = (uint8_t)stages;
		x.taps = taps[stages - 3];
		x.shift = (uint16_t)seed;
		x.left = (uint32_t)((1uL << stages) - 1u);
		x.every = (uint16_t)every;
		x.phase = PHASE_PRBS;
	}
	GW_UNLOCK();
	return no;
}

static uint8_t start_steps(char **f, uint8_t nf)
{
	int32_t amp, every, steps;
	uint32_t token;
	uint8_t no;

	if (nf != 7 || !gw_hex(f[3], 4, &token) || !positive(f[4], 100000, &amp) || !positive(f[5], 10000, &every) ||
	    !positive(f[6], 10000, &steps))
		return REF_ARG;
	GW_LOCK();
	no = begin_locked(token, amp);
	if (no == 0) {
		x.left = (uint32_t)steps;
		x.every = (uint16_t)every;
		x.phase = PHASE_STEPS;
	}
	GW_UNLOCK();
	return no;
}

static const char phases[] GW_FLASH = "none|run|run|run|done";

static void tell_state(uint16_t n)
{
	uint8_t phase;
	uint16_t count;

	GW_LOCK();
	phase = x.phase;
	count = phase == PHASE_NONE ? 0 : x.count;
	GW_UNLOCK();
	gw_ok(n);
	gw_put(' ');
	gw_put_at(phases, phase);
	gw_put_u(count);
	gw_end();
}

void gw_exper(uint16_t n, char **f, uint8_t nf)
{
	uint8_t no = REF_ARG, what = nf < 3 ? W_NONE : gw_word(f[2]);

	if (what == W_STATE && nf == 3) {
		tell_state(n);
		return;
	}
	if (what == W_RELAY)
		no = start_relay(f, nf);
	else if (what == W_PRBS)
		no = start_prbs(f, nf);
	else if (what == W_STEPS)
		no = start_steps(f, nf);
	if (no != 0) {
		gw_no(n, no);
		return;
	}
	gw_ok(n);
	gw_end();
}

#else
typedef int gw_no_experiments;
#endif
