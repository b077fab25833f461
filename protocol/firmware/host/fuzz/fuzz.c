/* Coverage-guided fuzzing of the core. The input is a list of orders, a byte each:
 *   below 128   the length of a piece that follows, received as it stands
 *   128..191    the same, taken as the body of a line whose CRC is added
 *   192..249    so many control periods pass
 *   250, 251    an input opens or closes
 *   252         the shaft turns by as many counts as the next byte says
 *   253         limits are put in use and the board is armed as it should be
 *   254         a motion line with the right token; the next two bytes say which
 *   255         the board restarts
 * Whatever comes, the output is on only in a state of motion, a cut byte switches
 * it off before the next byte, and nothing is armed without a one-time number. */
#include <stdint.h>
#include <stddef.h>
#include <stdlib.h>

#include "gw.h"
#include "gw_defaults.h"

static uint32_t us;
static int32_t out;
static uint16_t counts, inputs;
static uint8_t store[GW_STORE_SIZE];
static uint8_t column, len;
static char last[128]; /* the line sent last */
static uint16_t beats;

void gw_port_off(void) { out = 0; }
uint32_t gw_port_us(void) { return us; }
uint16_t gw_port_counts(void) { return counts; }
void gw_port_tx_start(void) {}
uint16_t gw_port_inputs(void) { return inputs; }
uint8_t gw_port_fault(void) { return 0; }
int32_t gw_port_current_ma(void) { return out / 10; }
int32_t gw_port_bus_mv(void) { return 24000; }
int16_t gw_port_temp(void) { return GW_NO_TEMP; }
uint32_t gw_port_serial(void) { return 1; }
uint8_t gw_port_reset_cause(void) { return GW_RESET_SOFT; }

static void check(int good)
{
	if (!good)
		abort();
}

int32_t gw_port_drive(int32_t mv)
{
	check(mv <= 24000 && mv >= -24000);
	out = mv;
	return mv;
}

int gw_port_store_read(uint16_t at, uint8_t *to, uint8_t n)
{
	check(at + n <= (int)sizeof store);
	for (uint8_t i = 0; i < n; i++)
		to[i] = store[at + i];
	return 1;
}

int gw_port_store_write(uint16_t at, const uint8_t *from, uint8_t n)
{
	check(at + n <= (int)sizeof store && out == 0);
	for (uint8_t i = 0; i < n; i++)
		store[at + i] = from[i];
	return 1;
}

static unsigned long moved; /* periods in which it was driven */

static uint8_t moving(void)
{
	return gw_state() == GW_DRIVING || gw_state() == GW_LOOPING || gw_state() == GW_RAMPING;
}

static void rest(void)
{
	int b;

	for (uint8_t i = 0; i < 3; i++)
		gw_poll();
	while ((b = gw_tx_byte()) >= 0) {
		check(b == '\n' || (b >= 0x20 && b < 0x7F));
		check(column < 127 || b == '\n');
		if (b == '\n')
			len = column;
		else
			last[column] = (char)b;
		column = b == '\n' ? 0 : (uint8_t)(column + 1);
	}
	check(out == 0 || moving());
	moved += out != 0;
}

static void receive(uint8_t b)
{
	gw_rx_byte(b);
	if (b == GW_CUT_BYTE)
		check(out == 0 && !moving() && gw_state() != GW_ARMED);
}

static uint16_t crc_of(const uint8_t *p, size_t n)
{
	uint16_t r = 0xFFFF;

	for (; n > 0; n--, p++) {
		r = (uint16_t)(r ^ (uint16_t)(*p << 8));
		for (uint8_t k = 0; k < 8; k++)
			r = (uint16_t)((uint16_t)(r << 1) ^ (r & 0x8000u ? 0x1021u : 0u));
	}
	return r;
}

static void restart(void)
{
	inputs = 3;
	column = 0;
	out = 0;
	gw_init();
}

static void line(const uint8_t *p, size_t n)
{
	static const char hex[] = "0123456789ABCDEF";
	uint16_t crc = crc_of(p, n);

	for (size_t i = 0; i < n; i++)
		receive(p[i]);
	receive(';');
	for (int8_t s = 12; s >= 0; s = (int8_t)(s - 4))
		receive((uint8_t)hex[(crc >> s) & 15]);
	receive('\n');
}

static void say(const char *s)
{
	size_t n = 0;

	while (s[n] != 0)
		n++;
	line((const uint8_t *)s, n);
	for (uint8_t i = 0; i < 8; i++)
		rest();
}

static char token[5];

/* arm does what a console does: limits, one-time number, token. */
static void arm(void)
{
	char use[] = "lim 60001 use 0000", ask[] = "arm 60003 00000000 0000";

	receive('\n');
	say("rate 60005 0 x t");
	say("reset 60004");
	say("lim 60000 crc");
	if (len != 21)
		return;
	for (uint8_t i = 0; i < 4; i++)
		use[14 + i] = ask[19 + i] = last[9 + i];
	say(use);
	say("nonce 60002");
	for (uint8_t i = 0; i < 8; i++)
		ask[10 + i] = last[9 + i];
	say(ask);
	for (uint8_t i = 0; i < 4; i++)
		token[i] = last[9 + i];
	beats = 0;
}

/* experiment asks for one that the token allows, with a request number of its own. */
static void experiment(uint8_t which)
{
	static const char relay[] = "exp 30000 relay 0000 900 9 9 3", prbs[] = "exp 30000 prbs 0000 900 4 2 9";
	char s[40];
	uint8_t n = 0, at = which & 32 ? 16 : 15;

	for (const char *from = which & 32 ? relay : prbs; *from != 0; from++)
		s[n++] = *from;
	s[n] = 0;
	for (uint8_t i = 0; i < 4; i++)
		s[at + i] = token[i];
	s[7] = (char)('0' + beats / 10 % 10);
	s[8] = (char)('0' + beats % 10);
	say(s);
}

static void drive(uint8_t which, uint8_t value)
{
	char s[24] = "dv ";
	uint8_t n = 3;
	uint16_t u = beats < 98 ? ++beats : beats;

	s[0] = which % 4 == 3 ? 'h' : 'd';
	s[1] = which % 4 == 3 ? 'b' : which % 4 == 2 ? 's' : 'v';
	if (u >= 10)
		s[n++] = (char)('0' + u / 10 % 10);
	s[n++] = (char)('0' + u % 10);
	s[n++] = ' ';
	for (uint8_t i = 0; i < 4; i++)
		s[n++] = token[i];
	if (s[0] == 'd') {
		s[n++] = ' ';
		s[n++] = (char)('1' + value % 9);
		s[n++] = '0';
		s[n++] = '0';
		if (value & 128)
			s[n++] = '0';
	}
	s[n] = 0;
	say(s);
	if (which & 16)
		experiment(which);
}

int LLVMFuzzerTestOneInput(const uint8_t *p, size_t n);

int LLVMFuzzerTestOneInput(const uint8_t *p, size_t n)
{
	const uint8_t *end = p + n;

	us = 0;
	counts = 0;
	for (size_t i = 0; i < sizeof store; i++)
		store[i] = 0xFF;
	restart();
	rest();
	while (p < end) {
		uint8_t op = *p++;
		size_t left = (size_t)(end - p), piece = op & (op < 128 ? 127u : 63u);

		piece = piece > left ? left : piece;
		if (op < 192) {
			if (op >= 128)
				line(p, piece);
			else
				for (size_t i = 0; i < piece; i++)
					receive(p[i]);
			p += piece;
		} else if (op < 250) {
			for (uint8_t i = 192; i <= op; i++) {
				us += GW_LOOP_US;
				gw_loop();
				rest();
			}
		} else if (op < 252) {
			inputs ^= (uint16_t)(1u << (op - 250));
		} else if (op == 252) {
			counts = (uint16_t)(counts + (left > 0 ? *p : 0));
		} else if (op == 253) {
			arm();
		} else if (op == 254) {
			if (left > 1)
				drive(p[0], p[1]);
		} else {
			restart();
		}
		rest();
	}
	return 0;
}

#ifdef FUZZ_MAIN
/* Without a fuzzer: runs the files it is given, or so many inputs made of a
 * seeded generator: fuzz -n COUNT SEED. */
#include <stdio.h>
#include <string.h>

static uint32_t seed;

static uint32_t next(void)
{
	seed ^= seed << 13;
	seed ^= seed >> 17;
	seed ^= seed << 5;
	return seed;
}

static const char *const words[] = {"id 1", "tel 2", "stop 3", "nonce 4", "dis 5", "reset 6", "lim 7 crc", "lim 8 set 0 41200000", "lim 9 use 0000",
	"gain 10 crc run", "gain 11 set 0 3F800000", "gain 12 store 0000", "cap 13 now 1 20", "cap 14 get 0", "cap 15 state", "log 16 0", "in 17", "rate 18 200 x t",
	"rate 19 50 d tu", "arm 20 00000000 0000", "dv 1 0000 1000", "ds 2 0000 1000", "hb 3 0000", "ramp 21 0000", "cap 22 arm 1 5 20", "cap 23 crc",
	"exp 24 state", "exp 25 relay 0000 500 100 0 3", "exp 26 prbs 0000 500 5 3 7"};

int main(int argc, char **argv)
{
	static uint8_t in[1 << 16];

	if (argc == 4 && strcmp(argv[1], "-n") == 0) {
		seed = (uint32_t)atol(argv[3]) * 2654435761u + 1;
		for (long k = atol(argv[2]); k > 0; k--) {
			size_t n = 0;

			while (n < 400) {
				const char *w = words[next() % (sizeof words / sizeof *words)];
				size_t size = strlen(w);

				if (next() % 8 == 0)
					in[n++] = 253;
				for (uint32_t i = next() % 4; i > 0; i--) {
					in[n++] = 254;
					in[n++] = (uint8_t)(next() % 192);
					in[n++] = (uint8_t)(192 + next() % 58);
				}
				in[n++] = (uint8_t)(128 + size);
				memcpy(in + n, w, size);
				while (next() % 4 == 0)
					in[n + next() % size] = (uint8_t)next();
				n += size;
				in[n++] = (uint8_t)(next() % 3 == 0 ? 192 + next() % 64 : 192);
			}
			LLVMFuzzerTestOneInput(in, n);
		}
		printf("driven %lu\n", moved);
		return 0;
	}
	for (int i = 1; i < argc; i++) {
		FILE *f = fopen(argv[i], "rb");

		if (f == NULL)
			return 1;
		LLVMFuzzerTestOneInput(in, fread(in, 1, sizeof in, f));
		fclose(f);
	}
	return 0;
}
#endif
