/* Hands the core's own arithmetic one case a line from standard input, and prints
 * what it makes of it:
 *   crc TEXT        the CRC of a line
 *   set HEX…        the CRC of a set of values
 *   int WORD        the integer, or no
 *   newer K LAST    whether a motion line of number K is taken after LAST: yes, no */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "gw_int.h"

void gw_port_off(void) {}
int32_t gw_port_drive(int32_t mv) { return mv; }
uint32_t gw_port_us(void) { return 0; }
uint16_t gw_port_counts(void) { return 0; }
void gw_port_tx_start(void) {}
uint16_t gw_port_inputs(void) { return 3; }
uint8_t gw_port_fault(void) { return 0; }
int32_t gw_port_current_ma(void) { return 0; }
int32_t gw_port_bus_mv(void) { return 24000; }
int16_t gw_port_temp(void) { return GW_NO_TEMP; }
uint32_t gw_port_serial(void) { return 1; }
uint8_t gw_port_reset_cause(void) { return GW_RESET_POWER; }

int gw_port_store_read(uint16_t at, uint8_t *to, uint8_t n)
{
	(void)at;
	memset(to, 0xFF, n);
	return 1;
}

int gw_port_store_write(uint16_t at, const uint8_t *from, uint8_t n)
{
	(void)at;
	(void)from;
	(void)n;
	return 0;
}

static void set(char *words)
{
	uint32_t v[64];
	uint8_t n = 0;

	for (char *w = strtok(words, " "); w != NULL && n < 64; w = strtok(NULL, " "))
		if (!gw_hex(w, 8, &v[n++]))
			exit(2);
	printf("%04X\n", gw_set_crc(v, n));
}

static void newer(char *words)
{
	char *k = strtok(words, " "), *last = strtok(NULL, " "), token[] = "1F2E", beat[] = "hb";
	char *f[3] = {beat, k, token};
	uint16_t number;

	if (k == NULL || last == NULL || !gw_uint16(last, &g.k) || !gw_uint16(k, &number))
		exit(2);
	g.state = GW_ARMED;
	g.token = 0x1F2E;
	g.beat_us = 1; /* a line that is taken brings it to now, which is 0 */
	gw_motion(W_HB, f, 3);
	printf("%s\n", g.beat_us == 0 && g.k == number ? "yes" : "no");
}

int main(void)
{
	char line[256];
	int32_t v;
	uint16_t crc;

	gw_init();
	while (fgets(line, sizeof line, stdin) != NULL) {
		line[strcspn(line, "\n")] = 0;
		if (strncmp(line, "crc ", 4) == 0) {
			crc = 0xFFFF;
			for (const char *c = line + 4; *c != 0; c++)
				crc = gw_crc(crc, (uint8_t)*c);
			printf("%04X\n", crc);
		} else if (strncmp(line, "set ", 4) == 0) {
			set(line + 4);
		} else if (strncmp(line, "int ", 4) == 0) {
			if (gw_int32(line + 4, &v))
				printf("%ld\n", (long)v);
			else
				printf("no\n");
		} else if (strncmp(line, "newer ", 6) == 0) {
			newer(line + 6);
		} else {
			return 2;
		}
	}
	return 0;
}
