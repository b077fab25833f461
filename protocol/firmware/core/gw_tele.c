/* Telemetry, both forms, and the lines that nobody asked for. */
#include "gw_int.h"

#define TEXT_MAX 64u /* longest decimal line, P5.5 */
#define HEX_MAX 24u
#define SLOW_A_SECOND 4u

static const char states[] GW_FLASH = "off|armed|driving|looping|ramping|tripped";

static int16_t lsbs(int32_t v, int16_t lsb)
{
	v = (v < 0 ? v - lsb / 2 : v + lsb / 2) / lsb;
	if (v > 32767)
		return 32767;
	return v < -32767 ? -32767 : (int16_t)v;
}

static int16_t held16(int32_t v)
{
	if (v > 32767)
		return 32767;
	return v < -32767 ? -32767 : (int16_t)v;
}

/* gw_snap_locked fills a sample with what the latest latch gave, and starts the
 * means anew. */
void gw_snap_locked(struct gw_snap *s)
{
	int32_t mean = g.volts_n == 0 ? 0 : g.volts_sum / (int32_t)g.volts_n;

	g.seq++;
	s->seq = g.seq;
	s->flags = (uint8_t)(g.state | (g.sat ? 8u : 0u) | (g.trip != GW_NONE ? 16u : 0u));
	s->us = g.us & 0xFFFFFFu;
	s->speed = held16(g.raw);
	s->volts = lsbs(mean, GW_VOLTS_LSB_MV);
#if GW_HAS_CURRENT
	s->current = lsbs(g.amps, GW_CURRENT_LSB_MA);
#endif
#if GW_HAS_BUS
	s->bus = lsbs(g.bus, GW_BUS_LSB_MV);
#endif
	s->set = 0;
	if (g.state == GW_LOOPING || (g.state == GW_RAMPING && g.ramp_from == GW_LOOPING))
		s->set = held16(gw_mul(g.target, gw_float_bits(gw_lsb_a_mrad)));
	s->counts = g.ring[g.ring_at];
	g.sat = 0;
	g.volts_sum = 0;
	g.volts_n = 0;
}

static void put_mrad(int16_t lsb)
{
	gw_put_i(gw_mul(lsb, gw_float_bits(gw_speed_lsb_mrad)));
}

void gw_send_t(const struct gw_snap *s, uint8_t text)
{
	gw_begin();
	if (!text) {
		gw_put('T');
		gw_put_hex(s->seq, 2);
		gw_put_hex(s->us, 6);
		gw_put_hex(s->flags, 2);
		gw_put_hex((uint16_t)s->speed, 4);
		gw_put_hex((uint16_t)s->volts, 4);
		gw_end_hex();
		return;
	}
	gw_put('t');
	gw_put_u(s->seq);
	gw_put_u(s->us);
	gw_put(' ');
	gw_put_at(states, s->flags & 7u);
	put_mrad(s->speed);
	gw_put_i((int32_t)s->volts * GW_VOLTS_LSB_MV);
	gw_put(' ');
	gw_put_hex(s->flags, 2);
	gw_end();
}

void gw_send_u(const struct gw_snap *s, uint8_t text)
{
	gw_begin();
	if (!text) {
		gw_put('U');
		gw_put_hex(s->seq, 2);
		gw_put_hex((uint16_t)s->current, 4);
		gw_put_hex((uint16_t)s->bus, 4);
		gw_put_hex((uint16_t)s->set, 4);
		gw_put_hex(s->counts, 4);
		gw_end_hex();
		return;
	}
	gw_put('u');
	gw_put_u(s->seq);
	gw_put_i((int32_t)s->current * GW_CURRENT_LSB_MA);
	gw_put_i((int32_t)s->bus * GW_BUS_LSB_MV);
	put_mrad(s->set);
	gw_put_u(s->counts);
	gw_end();
}

/* heat_percent is the share of the heat budget that is used. */
static uint8_t heat_percent(void)
{
#if GW_HAS_CURRENT
	uint32_t heat;

	GW_LOCK();
	heat = g.heat;
	GW_UNLOCK();
	if (g.lim[LIM_HEAT] >= 100u) {
		heat /= g.lim[LIM_HEAT] / 100u;
		return (uint8_t)(heat > 254u ? 254u : heat);
	}
#endif
	return 0xFF;
}

static void send_v(uint8_t seq)
{
	gw_begin();
	gw_put('V');
	gw_put_hex(seq, 2);
	gw_put_hex((uint16_t)gw_port_temp(), 4);
	gw_put_hex(gw_port_inputs(), 4);
	gw_put_hex(g.trip, 2);
	gw_put_hex(heat_percent(), 2);
	gw_put_hex(g.boots, 4);
	gw_end_hex();
}

/* gw_tele_loop runs in the loop: it keeps a sample when one is due. A sample that
 * was not sent in time is lost, which its number shows. */
void gw_tele_loop(void)
{
	if (g.every == 0)
		return;
	if (g.slow_tick == 0) {
		g.slow_tick = g.slow_every;
		g.slow_due = 1;
	}
	g.slow_tick--;
	if (g.tick > 0) {
		g.tick--;
		return;
	}
	g.tick = (uint16_t)(g.every - 1u);
	GW_LOCK();
	if (g.due)
		g.seq++;
	else
		gw_snap_locked(&g.snap);
	g.due = 1;
	GW_UNLOCK();
}

static void send_sample(void)
{
	uint8_t slow = g.slow_due && !g.text;
	uint8_t need = (uint8_t)((g.text ? TEXT_MAX : HEX_MAX) * (1u + g.extra) + (slow ? HEX_MAX : 0u));

	if (gw_room(need)) {
		if (slow) {
			g.slow_due = 0;
			send_v(g.snap.seq);
		}
		if (g.extra)
			gw_send_u(&g.snap, g.text);
		gw_send_t(&g.snap, g.text);
	}
	g.due = 0;
}

static void put_event(char a, char b)
{
	gw_begin();
	gw_put(a);
	gw_put(b);
}

static const char ev_boot[] GW_FLASH = " boot";
static const char ev_trip[] GW_FLASH = " trip";
static const char ev_off[] GW_FLASH = " off";

static void send_event(uint8_t due, uint8_t cause, uint32_t us)
{
	if (due & 2u)
		gw_blank();
	put_event('e', 'v');
	if (due & 2u) {
		gw_puts(ev_boot);
		gw_put_boot();
	} else {
		gw_puts(cause >= GW_BEAT ? ev_trip : ev_off);
		gw_put_u(cause);
		gw_put_u(us);
	}
	gw_end();
}

/* gw_tele_poll sends what is due: answers to cuts first. */
void gw_tele_poll(void)
{
	uint8_t due, cause;
	uint16_t cuts;
	uint32_t us;

	if (g.cut_due && gw_room(40)) {
		GW_LOCK();
		g.cut_due = 0;
		cuts = g.cuts;
		us = g.cut_us;
		GW_UNLOCK();
		put_event('c', 'u');
		gw_put('t');
		gw_put_u(cuts);
		gw_put_u(us);
		gw_end();
	}
	if (g.ev_due && gw_room(40)) {
		GW_LOCK();
		due = g.ev_due & 2u ? 2u : 1u;
		g.ev_due = (uint8_t)(g.ev_due & ~due);
		cause = g.ev_cause;
		us = g.ev_us;
		GW_UNLOCK();
		send_event(due, cause, us);
	}
	if (g.due)
		send_sample();
}

/* gw_rate works off "rate": P5.6. */
void gw_rate(uint16_t n, char **f, uint8_t nf)
{
	const uint32_t loops_a_second = 1000000u / (uint32_t)GW_LOOP_US;
	uint16_t hz;
	uint8_t text, extra;
	uint32_t every, rate, bytes;

	if (nf != 5 || !gw_uint16(f[2], &hz) || f[3][0] == 0 || f[3][1] != 0 || (f[3][0] != 'd' && f[3][0] != 'x') ||
		f[4][0] != 't' || (f[4][1] != 0 && (f[4][1] != 'u' || f[4][2] != 0))) {
		gw_no(n, REF_ARG);
		return;
	}
	text = f[3][0] == 'd';
	extra = f[4][1] == 'u';
	every = hz == 0 ? 0 : (loops_a_second + hz - 1u) / hz;
	rate = every == 0 ? 0 : (loops_a_second + every / 2u) / every;
	bytes = rate * (text ? TEXT_MAX : HEX_MAX) * (1u + extra) + (text || rate == 0 ? 0u : SLOW_A_SECOND * HEX_MAX);
	if (bytes * 10u > (uint32_t)GW_BAUD / 10u * 7u) {
		gw_no(n, REF_FULL);
		return;
	}
	GW_LOCK();
	g.every = (uint16_t)every;
	g.tick = 0;
	g.slow_every = (uint16_t)(loops_a_second / SLOW_A_SECOND);
	g.slow_tick = 0;
	g.text = text;
	g.extra = extra;
	g.due = 0;
	g.volts_sum = 0;
	g.volts_n = 0;
	GW_UNLOCK();
	gw_ok(n);
	gw_put_u(rate);
	gw_end();
}
