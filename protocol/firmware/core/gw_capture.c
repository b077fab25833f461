/* Capture (P10): samples at loop rate in memory, read out in pieces. */
#include "gw_int.h"

#if GW_CAPTURE

#define PIECE 8u /* samples in an answer */

enum { IDLE, WAIT, RUN, FULL };

static struct sample {
	uint16_t counts;
	int16_t volts, current;
} mem[GW_CAPTURE];

static struct {
	volatile uint8_t state;
	uint8_t hit; /* the drive line was accepted */
	uint16_t every, tick;
	uint32_t before, size; /* asked for */
	uint32_t at;           /* where the next sample goes */
	uint32_t seen;         /* samples written, held at size */
	uint32_t n;            /* samples of the capture */
	uint32_t last_us;
	int32_t sum;
	uint16_t sum_n;
} cap;

void gw_cap_init(void)
{
	cap.state = IDLE;
	cap.n = 0;
}

void gw_cap_trigger_locked(void)
{
	cap.hit = 1;
}

/* gw_cap_stop_locked ends a capture that runs; one that waits goes on waiting. */
void gw_cap_stop_locked(void)
{
	if (cap.state == RUN || (cap.state == WAIT && cap.hit))
		cap.state = FULL;
}

static int16_t lsbs(int32_t v, int32_t lsb)
{
	v = (v < 0 ? v - lsb / 2 : v + lsb / 2) / lsb;
	return (int16_t)(v > 32767 ? 32767 : v < -32767 ? -32767 : v);
}

/* gw_cap_loop takes the mean drive of the period that ends now, in mV. */
void gw_cap_loop(int32_t mv)
{
	struct sample *s;

	if (cap.state != WAIT && cap.state != RUN)
		return;
	cap.sum += mv;
	cap.sum_n++;
	if (cap.tick > 0) {
		cap.tick--;
		return;
	}
	cap.tick = (uint16_t)(cap.every - 1u);
	s = &mem[cap.at];
	s->counts = g.ring[g.ring_at];
	s->volts = lsbs(cap.sum / (int32_t)cap.sum_n, GW_VOLTS_LSB_MV);
	s->current = 0;
#if GW_HAS_CURRENT
	s->current = lsbs(g.amps, GW_CURRENT_LSB_MA);
#endif
	cap.sum = 0;
	cap.sum_n = 0;
	cap.last_us = g.us;
	cap.at = cap.at + 1u == cap.size ? 0 : cap.at + 1u;
	if (cap.seen < cap.size)
		cap.seen++;
	if (cap.state == WAIT && cap.hit) {
		/* This sample is the first one after the line. */
		cap.n = (cap.seen - 1u < cap.before ? cap.seen - 1u : cap.before);
		cap.state = RUN;
	}
	if (cap.state == RUN) {
		cap.n++;
		if (cap.n == cap.size)
			cap.state = FULL;
	}
}

static const struct sample *sample_at(uint32_t i)
{
	uint32_t at = cap.at + cap.size - cap.n + i;

	return &mem[at >= cap.size ? at - cap.size : at];
}

static void begin(uint16_t n, uint16_t every, uint16_t before, uint16_t size, uint8_t now)
{
	if (every == 0 || size == 0) {
		gw_no(n, REF_ARG);
		return;
	}
	if (size > GW_CAPTURE || before >= size) {
		gw_no(n, REF_HARD);
		return;
	}
	cap.state = IDLE;
	cap.hit = 0;
	cap.every = every;
	cap.tick = 0;
	cap.before = before;
	cap.size = size;
	cap.at = 0;
	cap.seen = 0;
	cap.n = 0;
	cap.sum = 0;
	cap.sum_n = 0;
	GW_LOCK();
	cap.state = now ? RUN : WAIT;
	GW_UNLOCK();
	gw_ok(n);
	gw_end();
}

static const char words[] GW_FLASH = "idle|wait|run|full";

static void say_state(uint16_t n)
{
	uint8_t state;
	uint32_t have, first, step = (uint32_t)cap.every * (uint32_t)GW_LOOP_US;

	GW_LOCK();
	state = cap.state;
	have = cap.n;
	first = have == 0 ? 0 : cap.last_us - (have - 1u) * step;
	GW_UNLOCK();
	gw_ok(n);
	gw_put(' ');
	gw_put_at(words, state);
	gw_put_u(have);
	gw_put_u(first);
	gw_put_u(step);
	gw_end();
}

static void say_piece(uint16_t n, uint16_t index)
{
	if (index >= cap.n) {
		gw_no(n, REF_ARG);
		return;
	}
	gw_ok(n);
	gw_put_u(index);
	gw_put(' ');
	for (uint32_t i = index; i < cap.n && i < index + PIECE; i++) {
		const struct sample *s = sample_at(i);

		gw_put_hex(s->counts, 4);
		gw_put_hex((uint16_t)s->volts, 4);
		gw_put_hex((uint16_t)s->current, 4);
	}
	gw_end();
}

static void say_crc(uint16_t n)
{
	uint16_t crc = 0xFFFF;

	for (uint32_t i = 0; i < cap.n; i++) {
		const struct sample *s = sample_at(i);
		const uint16_t v[3] = {s->counts, (uint16_t)s->volts, (uint16_t)s->current};

		for (uint8_t k = 0; k < 3; k++)
			for (int8_t sh = 12; sh >= 0; sh = (int8_t)(sh - 4)) {
				uint8_t d = (uint8_t)((v[k] >> sh) & 15u);

				crc = gw_crc(crc, (uint8_t)(d < 10 ? '0' + d : 'A' - 10 + d));
			}
	}
	gw_ok(n);
	gw_put(' ');
	gw_put_hex(crc, 4);
	gw_end();
}

/* gw_cap works off "cap". */
void gw_cap(uint16_t n, char **f, uint8_t nf)
{
	uint8_t what = nf < 3 ? (uint8_t)W_NONE : gw_word(f[2]);
	uint16_t a, b, c;

	if (what == W_STATE && nf == 3) {
		say_state(n);
	} else if (what == W_ARM && nf == 6 && gw_uint16(f[3], &a) && gw_uint16(f[4], &b) && gw_uint16(f[5], &c)) {
		begin(n, a, b, c, 0);
	} else if (what == W_NOW && nf == 5 && gw_uint16(f[3], &a) && gw_uint16(f[4], &b)) {
		begin(n, a, 0, b, 1);
	} else if ((what == W_GET && nf == 4 && gw_uint16(f[3], &a)) || (what == W_CRC && nf == 3)) {
		if (cap.state != FULL)
			gw_no(n, REF_STATE);
		else if (nf == 4)
			say_piece(n, a);
		else
			say_crc(n);
	} else {
		gw_no(n, REF_ARG);
	}
}

#endif
