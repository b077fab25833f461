/* The limits and the gains: staged one by one, put in use as a whole. */
#include "gw_int.h"

#define POSITIVE 1u /* 0 is refused */
#define UNJUDGED 2u /* 0 means not judged, and is the value after a start */

const char gw_lim_names[] GW_FLASH = "vmax|wmax|"
#if GW_HAS_CURRENT
	"imax|"
#endif
#if GW_HAS_BUS
	"bmax|bmin|"
#endif
	"amax|turns|stall|wrong|nocnt|vbreak|"
#if GW_HAS_CURRENT
	"heat|"
#endif
	"run|beat|slew";

const char gw_gain_names[] GW_FLASH = "kp|ki|"
#if GW_PID
	"kd|tf|"
#endif
	"b|kv|ks";

/* What a limit may be, and by how much it is multiplied to be judged. */
static const struct row {
	float max;
	uint32_t by;
	uint8_t zero;
	uint16_t per;
} rows[LIM_N] GW_FLASH = {
	[LIM_V] = {GW_VMAX, 1000u, POSITIVE, 1},
	[LIM_W] = {GW_WMAX, 1000u, POSITIVE, 1},
#if GW_HAS_CURRENT
	[LIM_I] = {GW_IMAX > 0 ? GW_IMAX : 1000.0f, 1000u, 0, 1},
	[LIM_HEAT] = {(float)(2e9 * 1024e-12 * GW_LOOP_US), (uint32_t)(1e12 / 1024 / GW_LOOP_US), UNJUDGED, 1},
#endif
#if GW_HAS_BUS
	[LIM_BMAX] = {GW_BUS_HARD_MAX, 1000u, 0, 1},
	[LIM_BMIN] = {GW_BUS_HARD_MAX, 1000u, UNJUDGED, 1},
#endif
	[LIM_A] = {1e8f, (uint32_t)GW_WIN * (uint32_t)GW_LOOP_US, UNJUDGED, 1000},
	[LIM_TURNS] = {1e6f, (uint32_t)(GW_TURN_COUNTS * 16.0f), UNJUDGED, 16},
	[LIM_STALL] = {60.0f, 1000000u, POSITIVE, 1},
	[LIM_WRONG] = {60.0f, 1000000u, POSITIVE, 1},
	[LIM_NOCNT] = {60.0f, 1000000u, POSITIVE, 1},
	[LIM_BREAK] = {GW_VMAX, 1000u, UNJUDGED, 1},
	[LIM_RUN] = {3600.0f, 1000000u, POSITIVE, 1},
	[LIM_BEAT] = {(float)GW_BEAT_MAX_MS * 1e-3f, 1000000u, POSITIVE, 1},
	[LIM_SLEW] = {1e6f, (uint32_t)GW_LOOP_US, UNJUDGED, 1},
};

static struct row row_of(uint8_t slot)
{
	struct row r;

	gw_from_flash(&r, &rows[slot], sizeof r);
	return r;
}

static uint32_t max_bits(uint8_t slot)
{
	return gw_float_bits(&rows[slot].max);
}

/* judged turns a limit into the integer that the loop compares. A current or
 * bus limit of 0 leaves the board's own hard limit in force. */
static uint32_t judged(uint8_t slot, uint32_t bits)
{
	struct row r = row_of(slot);
	uint32_t v = gw_scaled(bits, r.by);

#if GW_HAS_CURRENT
	if (slot == LIM_I && bits == 0 && GW_IMAX > 0)
		v = gw_scaled(max_bits(slot), r.by);
#endif
#if GW_HAS_BUS
	if (slot == LIM_BMAX && bits == 0)
		v = gw_scaled(max_bits(slot), r.by);
#endif
	if (bits != 0 && v < r.per)
		return 1; /* a limit that is set never becomes "not judged" */
	return v / r.per;
}

void gw_sets_init(void)
{
	uint16_t writes;

	for (uint8_t i = 0; i < LIM_N; i++) {
		g.lim_held[i] = row_of(i).zero == UNJUDGED ? 0 : max_bits(i);
		g.lim_staged[i] = g.lim_held[i];
		g.lim[i] = judged(i, g.lim_held[i]);
	}
	gw_store_load(g.gain_run, &writes);
	for (uint8_t i = 0; i < G_N; i++)
		g.gain_staged[i] = g.gain_run[i];
	gw_law_use();
}

static void answer_slot(uint16_t n, uint16_t slot)
{
	gw_ok(n);
	gw_put_u(slot);
}

static void answer_value(uint16_t n, uint16_t slot, const char *names, uint32_t bits)
{
	answer_slot(n, slot);
	gw_put(' ');
	gw_put_at(names, (uint8_t)slot);
	gw_put(' ');
	gw_put_hex(bits, 8);
	gw_end();
}

static void answer_crc(uint16_t n, uint16_t crc, uint32_t last)
{
	gw_ok(n);
	gw_put(' ');
	gw_put_hex(crc, 4);
	gw_put_u(last);
	gw_end();
}

static uint8_t is_finite(uint32_t bits)
{
	return (bits & 0x7F800000u) != 0x7F800000u;
}

/* limit_refusal is why a value cannot be a limit, or 0. Binary32 that are not
 * negative are in the order of their bits. */
static uint8_t limit_refusal(uint16_t slot, uint32_t bits)
{
	const float beat_min[] = {(float)GW_BEAT_MIN_MS * 1e-3f};

	if (!is_finite(bits) || (bits & 0x80000000u) || (bits == 0 && row_of((uint8_t)slot).zero == POSITIVE))
		return REF_ARG;
	if (bits > max_bits((uint8_t)slot))
		return REF_HARD;
	if (slot == LIM_BEAT && gw_scaled(bits, 1000000u) < (uint32_t)(beat_min[0] * 1e6f))
		return REF_HARD;
	return 0;
}

static void limit_use(uint16_t n, uint32_t crc)
{
	uint32_t v[LIM_N];

	if (g.state != GW_OFF_STATE) {
		gw_no(n, REF_STATE);
		return;
	}
	if (crc != gw_set_crc(g.lim_staged, LIM_N)) {
		gw_no(n, REF_SET);
		return;
	}
	for (uint8_t i = 0; i < LIM_N; i++)
		v[i] = judged(i, g.lim_staged[i]);
	GW_LOCK();
	for (uint8_t i = 0; i < LIM_N; i++) {
		g.lim_held[i] = g.lim_staged[i];
		g.lim[i] = v[i];
	}
	g.limits_in = 1;
	GW_UNLOCK();
	answer_crc(n, (uint16_t)crc, LIM_N);
}

/* gw_limit works off "lim": P7.2, P7.3. */
void gw_limit(uint16_t n, char **f, uint8_t nf)
{
	uint32_t v;
	uint8_t what = nf < 3 ? (uint8_t)W_NONE : gw_word(f[2]);
	uint16_t slot;
	uint8_t no;

	if (what == W_CRC && nf == 3) {
		answer_crc(n, gw_set_crc(g.lim_held, LIM_N), LIM_N);
	} else if (what == W_USE && nf == 4 && gw_hex(f[3], 4, &v)) {
		limit_use(n, v);
	} else if (nf < 4 || !gw_uint16(f[3], &slot) || slot >= LIM_N) {
		gw_no(n, REF_ARG);
	} else if (what == W_GET && nf == 4) {
		answer_value(n, slot, gw_lim_names, g.lim_held[slot]);
	} else if (what == W_SET && nf == 5 && gw_hex(f[4], 8, &v)) {
		no = g.state != GW_OFF_STATE ? (uint8_t)REF_STATE : limit_refusal(slot, v);
		if (no != 0) {
			gw_no(n, no);
			return;
		}
		g.lim_staged[slot] = v;
		answer_slot(n, slot);
		gw_end();
	} else {
		gw_no(n, REF_ARG);
	}
}

/* still is why gains cannot be changed now, or 0 (P8.4). */
static uint8_t still(void)
{
	if (g.state != GW_OFF_STATE)
		return REF_STATE;
	return gw_at_rest() ? 0 : REF_MOVING;
}

static void gain_set(uint16_t n, uint16_t slot, uint32_t v)
{
	uint8_t no = still();

	if (no == 0 && !is_finite(v))
		no = REF_ARG;
#if GW_PID
	if (no == 0 && slot == G_TF && (v & 0x80000000u))
		no = REF_ARG;
#endif
	if (no != 0) {
		gw_no(n, no);
		return;
	}
	g.gain_staged[slot] = v;
	answer_slot(n, slot);
	gw_end();
}

static void gain_use(uint16_t n, uint32_t crc)
{
	uint8_t no = still();

	if (no == 0 && crc != gw_set_crc(g.gain_staged, G_N))
		no = REF_SET;
	if (no != 0) {
		gw_no(n, no);
		return;
	}
	/* Off and at rest, so the loop does not use them meanwhile. */
	GW_LOCK();
	for (uint8_t i = 0; i < G_N; i++)
		g.gain_run[i] = g.gain_staged[i];
	GW_UNLOCK();
	gw_law_use();
	answer_crc(n, (uint16_t)crc, G_N);
}

static void gain_store(uint16_t n, uint32_t crc)
{
	uint16_t writes = 0;
	uint8_t no = still();

	if (no == 0 && crc != gw_set_crc(g.gain_run, G_N))
		no = REF_SET;
	if (no == 0 && !gw_store_save(g.gain_run, &writes))
		no = REF_MEMORY;
	if (no != 0)
		gw_no(n, no);
	else
		answer_crc(n, (uint16_t)crc, writes);
}

/* gw_gain works off "gain": P8.3, P8.4. */
void gw_gain(uint16_t n, char **f, uint8_t nf)
{
	uint32_t v;
	uint8_t what = nf < 4 ? (uint8_t)W_NONE : gw_word(f[2]), where;
	uint32_t stored[G_N];
	const uint32_t *set = g.gain_run;
	uint16_t slot, writes;

	if (nf < 4) {
		gw_no(n, REF_ARG);
		return;
	}
	if (what == W_GET || what == W_CRC) {
		where = gw_word(f[3]);
		if (where == W_STORE) {
			gw_store_load(stored, &writes);
			set = stored;
		} else if (where != W_RUN) {
			gw_no(n, REF_ARG);
			return;
		}
		if (what == W_CRC && nf == 4)
			answer_crc(n, gw_set_crc(set, G_N), G_N);
		else if (what == W_GET && nf == 5 && gw_uint16(f[4], &slot) && slot < G_N)
			answer_value(n, slot, gw_gain_names, set[slot]);
		else
			gw_no(n, REF_ARG);
	} else if (what == W_SET && nf == 5 && gw_uint16(f[3], &slot) && slot < G_N && gw_hex(f[4], 8, &v)) {
		gain_set(n, slot, v);
	} else if (what == W_USE && nf == 4 && gw_hex(f[3], 4, &v)) {
		gain_use(n, v);
	} else if (what == W_STORE && nf == 4 && gw_hex(f[3], 4, &v)) {
		gain_store(n, v);
	} else {
		gw_no(n, REF_ARG);
	}
}
