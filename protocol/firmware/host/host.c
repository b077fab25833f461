/* The core behind a pseudo-terminal, or under a driver that owns the time.
 *
 *   gwhost --pty-link PATH [--store FILE] [--seconds N]
 *       real time; prints the pseudo-terminal's name on the first line and makes
 *       PATH a link to it. The first words on standard input that begin with a
 *       letter of "set" below change the rig (see README.md).
 *   gwhost --virtual
 *       reads orders from standard input, five bytes each (a letter and a
 *       little-endian number), and answers each with a length and so many bytes:
 *       B n + n bytes  queue bytes, received at the line's rate   -> nothing
 *       D n + n bytes  receive bytes this instant                 -> nothing
 *       R µs           let time pass                              -> bytes sent
 *       X cause        restart                                    -> nothing
 *       H 0            a hand turns the shaft a turn, in two s    -> nothing
 *       S key + number change the rig                             -> nothing
 *       Q 0            -> text: state, mV driven, mV commanded, speed in mrad/s,
 *                         mA, time in µs, time of the last off in µs */
#define _GNU_SOURCE
#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

#include "gw.h"
#include "gw_defaults.h"
#include "motor.h"

#define STEP_US 20u
#define POLL_US 100u
#define BYTE_NS (10000000000ull / GW_BAUD)
#define PI 3.14159265358979323846

enum { SET_JAM, SET_ENCODER, SET_INPUTS, SET_LOAD, SET_SUPPLY, SET_FAULT, SET_STORE, SET_HANG, SET_KICK };

static struct {
	struct motor motor;
	uint64_t us;
	double supply;
	int encoder; /* 0 works, 1 dead, 2 reversed */
	double stuck; /* angle that a dead encoder shows */
	uint16_t inputs;
	uint8_t fault, store_fails, hangs, cause;
	int driven, waiting; /* the bridge is on; a drive waits for its delay */
	int32_t mv, next_mv;
	uint64_t next_us, off_us;
	uint64_t hand_until; /* µs; a hand turns the shaft until then */
	uint64_t rx_ns, tx_ns; /* when the line is free */
	uint8_t *rx;
	size_t rx_n, rx_at, rx_cap;
	uint8_t store[GW_STORE_SIZE];
	const char *store_file;
} rig;

/* ---- The functions of gw.h, part 2 ---- */

void gw_port_off(void)
{
	if (rig.driven || rig.waiting)
		rig.off_us = rig.us;
	rig.driven = 0;
	rig.waiting = 0;
	rig.mv = 0;
}

int32_t gw_port_drive(int32_t mv)
{
	rig.waiting = 1;
	rig.next_mv = mv;
	rig.next_us = rig.us + GW_DELAY_US;
	return mv;
}

uint32_t gw_port_us(void) { return (uint32_t)rig.us; }

uint16_t gw_port_counts(void)
{
	double a = rig.encoder == 1 ? rig.stuck : rig.motor.angle;
	long long n = (long long)floor(a / (2 * PI) * (double)GW_TURN_COUNTS);

	return (uint16_t)(rig.encoder == 2 ? -n : n);
}

void gw_port_tx_start(void) {}
uint16_t gw_port_inputs(void) { return rig.inputs; }
uint8_t gw_port_fault(void) { return rig.fault; }
int32_t gw_port_current_ma(void) { return (int32_t)lrint(rig.motor.amps * 1000); }
int16_t gw_port_temp(void) { return 250; }
uint32_t gw_port_serial(void) { return 0x00C0FFEE; }
uint8_t gw_port_reset_cause(void) { return rig.cause; }

static double bus(void)
{
	double share = rig.driven && rig.supply > 0 ? rig.mv / 1000.0 / rig.supply : 0;

	return rig.supply - 0.05 * rig.motor.amps * share;
}

int32_t gw_port_bus_mv(void) { return (int32_t)lrint(bus() * 1000); }

int gw_port_store_read(uint16_t at, uint8_t *to, uint8_t n)
{
	if (at + n > (int)sizeof rig.store)
		return 0;
	memcpy(to, rig.store + at, n);
	return 1;
}

int gw_port_store_write(uint16_t at, const uint8_t *from, uint8_t n)
{
	FILE *f;

	if (rig.store_fails || at + n > (int)sizeof rig.store)
		return 0;
	memcpy(rig.store + at, from, n);
	if (rig.store_file == NULL)
		return 1;
	f = fopen(rig.store_file, "wb");
	if (f == NULL || fwrite(rig.store, 1, sizeof rig.store, f) != sizeof rig.store) {
		if (f != NULL)
			fclose(f);
		return 0;
	}
	return fclose(f) == 0;
}

/* ---- Time ---- */

static void order_rx(const uint8_t *b, size_t n)
{
	if (rig.rx_at == rig.rx_n)
		rig.rx_at = rig.rx_n = 0;
	if (rig.rx_n + n > rig.rx_cap) {
		rig.rx_cap = 2 * (rig.rx_n + n);
		rig.rx = realloc(rig.rx, rig.rx_cap);
		if (rig.rx == NULL)
			abort();
	}
	if (n > 0)
		memcpy(rig.rx + rig.rx_n, b, n);
	rig.rx_n += n;
}

/* taken is when the line is free again after a byte that begins now, or began
 * within the last step. */
static uint64_t taken(uint64_t line_free, uint64_t now)
{
	return (line_free + 1000u * STEP_US < now ? now : line_free) + BYTE_NS;
}

static void line_in(void)
{
	uint64_t now = rig.us * 1000u;

	while (rig.rx_at < rig.rx_n && rig.rx_ns <= now) {
		rig.rx_ns = taken(rig.rx_ns, now);
		gw_rx_byte(rig.rx[rig.rx_at++]);
	}
}

static size_t line_out(uint8_t *out, size_t cap)
{
	uint64_t now = rig.us * 1000u;
	size_t n = 0;
	int b;

	while (n < cap && rig.tx_ns <= now && (b = gw_tx_byte()) >= 0) {
		rig.tx_ns = taken(rig.tx_ns, now);
		out[n++] = (uint8_t)b;
	}
	return n;
}

/* step lets STEP_US pass and returns the number of bytes sent in it. */
static size_t step(uint8_t *out, size_t cap)
{
	double top = bus();
	double volts = fmax(-top, fmin(top, rig.mv / 1000.0));

	if (rig.us < rig.hand_until) {
		rig.motor.angle += PI * STEP_US * 1e-6;
		rig.motor.speed = 0;
	} else {
		motor_step(&rig.motor, STEP_US * 1e-6, volts, !rig.driven);
	}
	rig.us += STEP_US;
	line_in();
	if (rig.waiting && rig.us >= rig.next_us) {
		rig.waiting = 0;
		rig.driven = 1;
		rig.mv = rig.next_mv;
	}
	if (rig.us % GW_LOOP_US == 0)
		gw_loop();
	if (rig.us % POLL_US == 0 && !rig.hangs)
		gw_poll();
	return line_out(out, cap);
}

static void set(uint32_t key, int32_t v)
{
	switch (key) {
	case SET_JAM: rig.motor.jammed = v; break;
	case SET_ENCODER:
		rig.encoder = v;
		rig.stuck = rig.motor.angle;
		break;
	case SET_INPUTS: rig.inputs = (uint16_t)v; break;
	case SET_LOAD: rig.motor.load = v * 1e-6; break;   /* µN·m */
	case SET_SUPPLY: rig.supply = v * 1e-3; break;     /* mV */
	case SET_FAULT: rig.fault = (uint8_t)v; break;
	case SET_STORE: rig.store_fails = v != 0; break;
	case SET_HANG: rig.hangs = v != 0; break;
	case SET_KICK: rig.motor.speed = v * 1e-3; break;  /* mrad/s */
	default: break;
	}
}

static void start(uint8_t cause)
{
	rig.cause = cause;
	rig.driven = 0;
	rig.waiting = 0;
	rig.rx_at = rig.rx_n = 0;
	gw_init();
}

static void rig_make(void)
{
	/* A small 24 V motor with a disc: 6.9 ms electrical would be slow, 0.5 ms is
	 * usual; 45 ms mechanical time constant. */
	rig.motor = (struct motor){.ohm = 1.1, .henry = 0.5e-3, .k = 0.05, .inertia = 1e-4, .viscous = 2e-5, .coulomb = 0.01, .still = 0.014};
	rig.supply = 24;
	rig.inputs = 3;
	memset(rig.store, 0xFF, sizeof rig.store);
}

/* ---- Under a driver ---- */

static void need(void *to, size_t n)
{
	if (fread(to, 1, n, stdin) != n)
		exit(0);
}

static uint32_t need32(void)
{
	uint8_t b[4];

	need(b, 4);
	return (uint32_t)b[0] | (uint32_t)b[1] << 8 | (uint32_t)b[2] << 16 | (uint32_t)b[3] << 24;
}

static void reply(const uint8_t *b, size_t n)
{
	uint8_t h[4] = {(uint8_t)n, (uint8_t)(n >> 8), (uint8_t)(n >> 16), (uint8_t)(n >> 24)};

	fwrite(h, 1, 4, stdout);
	if (n > 0)
		fwrite(b, 1, n, stdout);
	fflush(stdout);
}

static uint8_t big[1u << 20];

static void run_virtual(void)
{
	for (;;) {
		uint8_t op;
		uint32_t arg;
		size_t n = 0;

		need(&op, 1);
		arg = need32();
		if ((op == 'B' || op == 'D') && arg <= sizeof big) {
			need(big, arg);
			if (op == 'B')
				order_rx(big, arg);
			for (uint32_t i = 0; op == 'D' && i < arg; i++)
				gw_rx_byte(big[i]);
		} else if (op == 'R') {
			for (uint32_t t = 0; t < arg; t += STEP_US)
				n += step(big + n, sizeof big - n);
		} else if (op == 'X') {
			start((uint8_t)arg);
		} else if (op == 'H') {
			rig.hand_until = rig.us + 2000000u;
		} else if (op == 'S') {
			set(arg, (int32_t)need32());
		} else if (op == 'Q') {
			n = (size_t)snprintf((char *)big, sizeof big, "%d %d %d %ld %ld %llu %llu", gw_state(), rig.driven ? (int)rig.mv : 0,
				(int)gw_drive_mv(), lrint(rig.motor.speed * 1000), lrint(rig.motor.amps * 1000),
				(unsigned long long)rig.us, (unsigned long long)rig.off_us);
		} else {
			exit(2);
		}
		reply(big, n);
	}
}

/* ---- In real time ---- */

static const char *link_path;

static void ended(int s)
{
	(void)s;
	if (link_path != NULL)
		unlink(link_path);
	_exit(0);
}

static uint64_t clock_us(void)
{
	struct timespec t;

	clock_gettime(CLOCK_MONOTONIC, &t);
	return (uint64_t)t.tv_sec * 1000000u + (uint64_t)t.tv_nsec / 1000u;
}

/* orders reads "KEY VALUE" lines, such as "0 1" for a jammed shaft, "x CAUSE" to
 * restart. Returns 0 at the end of input. */
static int orders(void)
{
	char line[80];
	long key, v;
	int n = (int)read(0, line, sizeof line - 1);

	if (n <= 0)
		return 0;
	line[n] = 0;
	if (line[0] == 'x')
		start((uint8_t)atoi(line + 1));
	else if (sscanf(line, "%ld %ld", &key, &v) == 2)
		set((uint32_t)key, (int32_t)v);
	return 1;
}

static void run_pty(double seconds)
{
	int fd = posix_openpt(O_RDWR | O_NOCTTY), slave, listen = 1;
	struct termios tio;
	uint64_t zero = clock_us() - rig.us;
	uint8_t in[256], out[256];
	size_t out_n = 0;

	if (fd < 0 || grantpt(fd) != 0 || unlockpt(fd) != 0 || (slave = open(ptsname(fd), O_RDWR | O_NOCTTY)) < 0) {
		perror("gwhost: pseudo-terminal");
		exit(1);
	}
	tcgetattr(slave, &tio);
	cfmakeraw(&tio);
	tcsetattr(slave, TCSANOW, &tio); /* kept open: the master never sees an end */
	fcntl(fd, F_SETFL, O_NONBLOCK);
	if (link_path != NULL) {
		unlink(link_path);
		if (symlink(ptsname(fd), link_path) != 0) {
			perror("gwhost: link");
			exit(1);
		}
	}
	printf("%s\n", link_path != NULL ? link_path : ptsname(fd));
	fflush(stdout);
	while (seconds <= 0 || (double)rig.us < seconds * 1e6) {
		struct pollfd p[2] = {{.fd = fd, .events = POLLIN}, {.fd = listen ? 0 : -1, .events = POLLIN}};
		ssize_t n;

		poll(p, 2, 1);
		if (p[1].revents != 0)
			listen = orders();
		if ((p[0].revents & POLLIN) && (n = read(fd, in, sizeof in)) > 0)
			order_rx(in, (size_t)n);
		while (zero + rig.us + STEP_US <= clock_us()) {
			out_n += step(out + out_n, sizeof out - out_n);
			if (out_n > 0 && (n = write(fd, out, out_n)) > 0) {
				memmove(out, out + n, out_n - (size_t)n);
				out_n -= (size_t)n;
			}
		}
	}
	ended(0);
}

int main(int argc, char **argv)
{
	int virtual = 0;
	double seconds = 0;
	FILE *f;

	rig_make();
	for (int i = 1; i < argc; i++) {
		if (strcmp(argv[i], "--virtual") == 0)
			virtual = 1;
		else if (strcmp(argv[i], "--pty-link") == 0 && i + 1 < argc)
			link_path = argv[++i];
		else if (strcmp(argv[i], "--store") == 0 && i + 1 < argc)
			rig.store_file = argv[++i];
		else if (strcmp(argv[i], "--seconds") == 0 && i + 1 < argc)
			seconds = atof(argv[++i]);
		else {
			fprintf(stderr, "gwhost: %s: use --virtual, --pty-link PATH, --store FILE, --seconds N\n", argv[i]);
			return 2;
		}
	}
	if (rig.store_file != NULL && (f = fopen(rig.store_file, "rb")) != NULL) {
		if (fread(rig.store, 1, sizeof rig.store, f) != sizeof rig.store)
			memset(rig.store, 0xFF, sizeof rig.store);
		fclose(f);
	}
	signal(SIGTERM, ended);
	signal(SIGINT, ended);
	start(GW_RESET_POWER);
	if (virtual)
		run_virtual();
	else
		run_pty(seconds);
	return 0;
}
