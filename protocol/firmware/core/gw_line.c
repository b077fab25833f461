/* Bytes in, lines, and which function works off which verb. */
#include "gw_int.h"

#define FIELDS 8u /* no request has more; further ones make it a bad argument */
#define ERROR_PAUSE_US 10000u

struct gw_all g;

static volatile uint8_t rx[GW_RX_SIZE];
static volatile uint16_t rx_in, rx_out;
static volatile uint8_t rx_lost;


/* cut_locked is what the cut byte and the line stop do (P2). */
static void cut_locked(void)
{
	gw_stop_locked(GW_CUT, gw_port_us());
	g.cut_us = gw_port_us();
	g.cuts++;
	g.cut_due = 1;
}

void gw_rx_byte(uint8_t b)
{
	uint16_t in, next;

	GW_LOCK();
	if (b == GW_CUT_BYTE)
		cut_locked();
	in = rx_in;
	next = (uint16_t)(in + 1u);
	if (next == GW_RX_SIZE)
		next = 0;
	if (next == rx_out) {
		rx_lost = 1;
	} else {
		rx[in] = b;
		rx_in = next;
	}
	GW_UNLOCK();
}

/* take returns the next received byte, or -1. After bytes were lost, what is
 * left of them is thrown away with the line in hand. */
static int take(void)
{
	int b = -1;

	GW_LOCK();
	if (rx_lost) {
		rx_lost = 0;
		rx_out = rx_in;
		g.dirty = 1;
	} else if (rx_out != rx_in) {
		b = rx[rx_out];
		rx_out = (uint16_t)(rx_out + 1u == GW_RX_SIZE ? 0u : rx_out + 1u);
	}
	GW_UNLOCK();
	return b;
}

static void line_reset(void)
{
	g.n = 0;
	g.over = 0;
	g.dirty = 0;
}

/* complain answers a line that cannot be a request, seldom enough (P1.4). */
static void complain(uint8_t code)
{
	uint32_t now = gw_port_us();

	if ((g.err_any && now - g.err_us < ERROR_PAUSE_US) || !gw_room(48))
		return;
	g.err_any = 1;
	g.err_us = now;
	gw_no(0, code);
}

static void stop_line(void)
{
	GW_LOCK();
	cut_locked();
	GW_UNLOCK();
}

static void job_start(uint8_t job, uint16_t n)
{
	g.job = job;
	g.job_n = n;
	g.job_step = 0;
}

static void tel_poll(void)
{
	if (!gw_room(72))
		return;
	if (g.job_step == 0) {
		GW_LOCK();
		gw_snap_locked(&g.job_snap);
		GW_UNLOCK();
		gw_send_u(&g.job_snap, 1);
	} else if (g.job_step == 1) {
		gw_send_t(&g.job_snap, 1);
		if (g.job_n == 0)
			g.job = JOB_NONE;
	} else {
		gw_ok(g.job_n);
		gw_end();
		g.job = JOB_NONE;
	}
	g.job_step++;
}

/* request works off one numbered request whose line was good. */
static void request(uint8_t verb, uint16_t n, uint16_t crc, char **f, uint8_t nf)
{
	uint8_t again = g.answered && n == g.last_n && crc == g.last_crc;

	g.answered = 1;
	g.last_n = n;
	g.last_crc = crc;
	switch (verb) { /* these may be done again at any time */
	case W_ID:
		job_start(JOB_ID, n);
		return;
	case W_TEL:
		job_start(JOB_TEL, n);
		return;
	case W_STOP:
		stop_line();
		gw_ok(n);
		gw_end();
		return;
	default:
		break;
	}
	if (again) {
		gw_again();
		return;
	}
	switch (verb) {
	case W_RATE:
		gw_rate(n, f, nf);
		break;
	case W_NONCE:
		gw_nonce(n);
		break;
	case W_ARM:
		gw_arm(n, f, nf);
		break;
	case W_DIS:
		gw_disarm(n);
		break;
	case W_RAMP:
		gw_ramp(n, f, nf);
		break;
	case W_RESET:
		gw_reset(n);
		break;
	case W_LIM:
		gw_limit(n, f, nf);
		break;
	case W_GAIN:
		gw_gain(n, f, nf);
		break;
	case W_LOG:
		gw_log(n, f, nf);
		break;
	case W_IN:
		gw_ok(n);
		gw_put(' ');
		gw_put_hex(gw_port_inputs(), 4);
		gw_end();
		break;
	case W_CAP:
#if GW_CAPTURE
		gw_cap(n, f, nf);
#else
		gw_no(n, REF_ABSENT);
#endif
		break;
#if GW_EXPER
	case W_EXP:
		gw_exper(n, f, nf);
		break;
#endif
	default:
		gw_no(n, REF_VERB);
		break;
	}
}

/* split cuts the line at single spaces, in place. */
static uint8_t split(char *s, char **f)
{
	uint8_t n = 1;

	f[0] = s;
	for (; *s != 0; s++) {
		if (*s != ' ')
			continue;
		*s = 0;
		if (n == FIELDS)
			return FIELDS + 1u;
		f[n] = s + 1;
		n++;
	}
	return n;
}

/* bare takes the three lines that need no CRC (P1.5). */
static uint8_t bare(void)
{
	switch (gw_word(g.line)) {
	case W_STOP:
		stop_line();
		return 1;
	case W_ID:
		if (g.job == JOB_NONE)
			job_start(JOB_ID, 0);
		return 1;
	case W_TEL:
		if (g.job == JOB_NONE)
			job_start(JOB_TEL, 0);
		return 1;
	default:
		return 0;
	}
}

/* work looks at the complete line in hand. It returns 0 where the line has to
 * wait until the answer before it is out. */
static uint8_t work(void)
{
	char *f[FIELDS];
	uint8_t nf, body, stop;
	uint16_t crc = 0xFFFF, n;
	uint32_t sent;
	uint8_t verb;

	if (g.n == 0 && !g.over && !g.dirty)
		return 1;
	if (g.over || g.dirty) {
		complain(g.over ? REF_LONG : REF_CRC);
		return 1;
	}
	if (bare())
		return 1;
	body = (uint8_t)(g.n < 5 ? 0 : g.n - 5);
	for (uint8_t i = 0; i < body; i++)
		crc = gw_crc(crc, (uint8_t)g.line[i]);
	if (g.n < 5 || g.line[body] != ';' || !gw_hex(g.line + body + 1, 4, &sent) || sent != crc) {
		complain(REF_CRC);
		return 1;
	}
	/* Heartbeats and stops never wait for an answer to get out. */
	if (body > 3 && g.line[2] == ' ' && (g.line[0] == 'd' || g.line[0] == 'h')) {
		g.line[body] = 0;
		nf = split(g.line, f);
		if (nf <= FIELDS)
			gw_motion(gw_word(f[0]), f, nf);
		return 1;
	}
	stop = g.line[0] == 's' && g.line[1] == 't' && g.line[2] == 'o' && g.line[3] == 'p' && g.line[4] == ' ';
	if (stop && !gw_room(GW_ANSWER_SIZE)) {
		GW_LOCK();
		gw_stop_locked(GW_CUT, gw_port_us());
		GW_UNLOCK();
		return 0; /* off at once; counted and answered when there is room */
	}
	if (!gw_room(GW_ANSWER_SIZE) || (g.job != JOB_NONE && !stop))
		return 0;
	g.line[body] = 0;
	nf = split(g.line, f);
	if (nf < 2 || !gw_uint16(f[1], &n) || n == 0)
		return 1;
	verb = gw_word(f[0]);
	if (nf > FIELDS) {
		g.answered = 1;
		g.last_n = n;
		g.last_crc = crc;
		gw_no(n, REF_ARG);
		return 1;
	}
	request(verb, n, crc, f, nf);
	return 1;
}

/* collect takes received bytes until a line is complete. */
static void collect(void)
{
	int b;

	while (!g.held && (b = take()) >= 0) {
		if (b == (int)GW_CUT_BYTE) {
			/* The output went off when the byte came in. Lines that came
			 * before it and were worked off since count for nothing. */
			GW_LOCK();
			gw_stop_locked(GW_CUT, gw_port_us());
			GW_UNLOCK();
			line_reset();
		} else if (b == '\n') {
			g.line[g.n] = 0;
			g.held = 1;
		} else if (b == '\r') {
			continue;
		} else if (g.n == sizeof g.line - 1) {
			g.over = 1;
		} else {
			if (b < 0x20 || b > 0x7E)
				g.dirty = 1;
			g.line[g.n] = (char)b;
			g.n++;
		}
	}
}

void gw_poll(void)
{
	gw_tele_poll();
	if (g.job == JOB_ID)
		gw_id_poll();
	else if (g.job == JOB_TEL)
		tel_poll();
	collect();
	if (g.held && work()) {
		g.held = 0;
		line_reset();
	}
}

void gw_init(void)
{
	uint8_t cause = gw_port_reset_cause();

	gw_port_off();
	for (uint16_t i = 0; i < sizeof g; i++)
		((uint8_t *)&g)[i] = 0;
	rx_in = 0;
	rx_out = 0;
	rx_lost = 0;
	gw_tx_reset();
	gw_log_init(cause);
	g.boots = gw_store_boot();
	gw_sets_init();
	gw_loop_init();
#if GW_CAPTURE
	gw_cap_init();
#endif
#if GW_EXPER
	gw_exper_end();
#endif
	g.reset_cause = cause;
	g.ev_due = 2; /* ev boot */
}

uint8_t gw_idle(void)
{
	return rx_in == rx_out && !rx_lost && !g.held && g.job == JOB_NONE && !g.due && !g.cut_due && !g.ev_due;
}

uint8_t gw_state(void)
{
	return g.state;
}

int32_t gw_drive_mv(void)
{
	return g.u1;
}
