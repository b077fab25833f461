/* Numbers in and out, CRC, and lines on their way to the transmitter. */
#include "gw_int.h"

static uint8_t tx[GW_TX_SIZE];
static volatile uint16_t tx_in, tx_out;
static char answer[GW_ANSWER_SIZE];
static uint16_t line_crc;
static uint8_t keep; /* the line being written is the answer to keep */

/* CRC-16/CCITT-FALSE, one byte; P1.2. */
uint16_t gw_crc(uint16_t crc, uint8_t c)
{
	uint8_t x = (uint8_t)((crc >> 8) ^ c);

	x = (uint8_t)(x ^ (x >> 4));
	return (uint16_t)((crc << 8) ^ ((uint16_t)x << 12) ^ ((uint16_t)x << 5) ^ x);
}

static char digit(uint8_t d)
{
	return (char)(d < 10 ? '0' + d : 'A' - 10 + d);
}

uint16_t gw_set_crc(const uint32_t *v, uint8_t n)
{
	uint16_t crc = 0xFFFF;

	for (; n > 0; n--, v++)
		for (int8_t s = 28; s >= 0; s = (int8_t)(s - 4))
			crc = gw_crc(crc, (uint8_t)digit((uint8_t)((*v >> s) & 15u)));
	return crc;
}

/* gw_int32 reads a decimal integer as P1.3 spells it. A value of up to ten
 * digits that does not fit is held at the end of the range, so that a limit
 * still sees it. */
uint8_t gw_int32(const char *s, int32_t *v)
{
	uint8_t neg = *s == '-';
	uint8_t n = 0;
	uint32_t u = 0, was;

	s += neg;
	if (*s == '0' && (s[1] != 0 || neg))
		return 0;
	for (; *s != 0; s++) {
		uint8_t d = (uint8_t)(*s - '0');

		if (d > 9 || ++n > 10)
			return 0;
		was = u;
		u = u * 10u + d;
		if (was > 214748364u || u > 0x7FFFFFFFu)
			u = 0x7FFFFFFFu;
	}
	*v = neg ? -(int32_t)u : (int32_t)u;
	return n > 0;
}

uint8_t gw_uint16(const char *s, uint16_t *v)
{
	int32_t x;

	if (!gw_int32(s, &x) || x < 0 || x > 65535)
		return 0;
	*v = (uint16_t)x;
	return 1;
}

/* gw_hex reads exactly so many upper-case digits. */
uint8_t gw_hex(const char *s, uint8_t digits, uint32_t *v)
{
	uint32_t u = 0;

	for (; digits > 0; digits--, s++) {
		uint8_t c = (uint8_t)*s;

		if (c >= '0' && c <= '9')
			c = (uint8_t)(c - '0');
		else if (c >= 'A' && c <= 'F')
			c = (uint8_t)(c - 'A' + 10);
		else
			return 0;
		u = (u << 4) | c;
	}
	*v = u;
	return *s == 0;
}

static const char words[] GW_FLASH = "id|tel|stop|rate|nonce|arm|dis|ramp|reset|lim|gain|log|in|cap|dv|ds|hb|"
	"get|set|use|crc|store|run|state|now|"
#if GW_EXPER
	"exp|relay|prbs|steps|"
#endif
	;

/* gw_word is the number of a word in that list, W_NONE where it is not there. */
uint8_t gw_word(const char *s)
{
	const char *p = s, *list = words;
	uint8_t n = 1;
	char c;

	for (; (c = (char)GW_FLASH_BYTE(list)) != 0; list++) {
		if (c == '|') {
			if (p != 0 && *p == 0)
				return n;
			n++;
			p = s;
		} else if (p != 0) {
			p = *p == c ? p + 1 : 0;
		}
	}
	return W_NONE;
}

void gw_tx_reset(void)
{
	tx_in = 0;
	tx_out = 0;
}

/* gw_room says whether n more bytes fit in the transmit ring. */
uint8_t gw_room(uint8_t n)
{
	uint16_t used, in = tx_in, out;

	GW_LOCK();
	out = tx_out;
	GW_UNLOCK();
	used = (uint16_t)(in >= out ? in - out : in + (uint16_t)GW_TX_SIZE - out);
	return (uint16_t)(used + n) < GW_TX_SIZE;
}

int gw_tx_byte(void)
{
	uint16_t out = tx_out;
	uint8_t b;

	if (out == tx_in)
		return -1;
	b = tx[out];
	out++;
	tx_out = out == GW_TX_SIZE ? 0 : out;
	return b;
}

static void emit(char c)
{
	uint16_t in = tx_in;

	tx[in] = (uint8_t)c;
	in++;
	if (in == GW_TX_SIZE)
		in = 0;
	GW_LOCK();
	tx_in = in;
	GW_UNLOCK();
	if (keep && g.answer_n < GW_ANSWER_SIZE) {
		answer[g.answer_n] = c;
		g.answer_n++;
	}
}

void gw_put(char c)
{
	line_crc = gw_crc(line_crc, (uint8_t)c);
	emit(c);
}

void gw_begin(void)
{
	line_crc = 0xFFFF;
	keep = 0;
}

/* gw_begin_answer begins a line that is kept, to be repeated (P3.3). */
void gw_begin_answer(uint16_t n)
{
	gw_begin();
	if (n != 0) {
		keep = 1;
		g.answer_n = 0;
	}
}

void gw_end_hex(void)
{
	uint16_t crc = line_crc;

	gw_put_hex(crc, 4);
	emit('\n');
	keep = 0;
	gw_port_tx_start();
}

void gw_end(void)
{
	emit(';');
	gw_end_hex();
}

/* gw_blank sends an LF, which ends what was left half sent before a restart. */
void gw_blank(void)
{
	keep = 0;
	emit('\n');
}

/* gw_again sends the answer that was kept. */
void gw_again(void)
{
	keep = 0;
	for (uint8_t i = 0; i < g.answer_n; i++)
		emit(answer[i]);
	gw_port_tx_start();
}

void gw_puts(const char *s)
{
	char c;

	while ((c = (char)GW_FLASH_BYTE(s)) != 0) {
		gw_put(c);
		s++;
	}
}

/* gw_put_at writes word number index of a list of words that are separated by
 * bars. */
void gw_put_at(const char *s, uint8_t index)
{
	char c;

	for (; (c = (char)GW_FLASH_BYTE(s)) != 0; s++) {
		if (c == '|') {
			if (index == 0)
				return;
			index--;
		} else if (index == 0) {
			gw_put(c);
		}
	}
}

/* gw_put_all writes such a list, a space before each word. */
void gw_put_all(const char *s)
{
	char c;

	gw_put(' ');
	for (; (c = (char)GW_FLASH_BYTE(s)) != 0; s++)
		gw_put(c == '|' ? ' ' : c);
}

void gw_put_hex(uint32_t v, uint8_t digits)
{
	while (digits > 0) {
		digits--;
		gw_put(digit((uint8_t)((v >> (4 * digits)) & 15u)));
	}
}

/* gw_put_count writes a decimal number. */
void gw_put_count(uint32_t v)
{
	char b[10];
	uint8_t n = 0;

	do {
		b[n++] = (char)('0' + (char)(v % 10u));
		v /= 10u;
	} while (v > 0);
	while (n > 0)
		gw_put(b[--n]);
}

/* gw_put_u writes a space and a number, gw_put_i one that may be negative. */
void gw_put_u(uint32_t v)
{
	gw_put(' ');
	gw_put_count(v);
}

void gw_put_i(int32_t v)
{
	gw_put(' ');
	if (v < 0)
		gw_put('-');
	gw_put_count(v < 0 ? 0u - (uint32_t)v : (uint32_t)v);
}

/* gw_ok begins the answer "ok <n>"; the caller adds to it and ends it. */
void gw_ok(uint16_t n)
{
	gw_begin_answer(n);
	gw_put('o');
	gw_put('k');
	gw_put_u(n);
}

static const char refusals[] GW_FLASH =
	"-|bad crc|line too long|unknown verb|bad argument|wrong state|old number|wrong token|over a hard limit|line too full|moving|"
	"interlock open|tripped|not on this board|set differs|memory failed|limits differ|busy";

/* gw_no sends the whole answer "no <n> <code> <words>". */
void gw_no(uint16_t n, uint8_t code)
{
	gw_begin_answer(n);
	gw_put('n');
	gw_put('o');
	gw_put_u(n);
	gw_put_u(code);
	gw_put(' ');
	gw_put_at(refusals, code);
	gw_end();
}
