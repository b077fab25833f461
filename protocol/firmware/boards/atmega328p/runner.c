/* Runs an ATmega328P image under libsimavr.
 *
 *   avrrun IMAGE --pty-link PATH   in real time, UART 0 on a pseudo-terminal
 *   avrrun IMAGE --virtual         the orders B, R, X, H and Q of host/host.c; Q answers
 *                                  with the bytes of static data and of stack at its
 *                                  deepest, which the image has painted */
#define _GNU_SOURCE
#include <fcntl.h>
#include <poll.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

#include <simavr/avr_ioport.h>
#include <simavr/avr_uart.h>
#include <simavr/sim_avr.h>
#include <simavr/sim_elf.h>
#include <simavr/sim_time.h>

#define HZ 16000000u
#define RAM 0x100
#define PAINT 0xC5

static avr_t *avr;
static avr_irq_t *to_uart, *to_hand;
static avr_cycle_count_t hand_until; /* 0: no hand at the shaft */
static FILE *say; /* our standard output: the library chats on stdout */
static int open_in = 1; /* the UART's input has room */
static uint8_t in[1 << 16], out[1 << 20];
static size_t in_n, in_at, out_n;
static avr_cycle_count_t in_free; /* when the line in is free */

static void sent(struct avr_irq_t *irq, uint32_t v, void *p)
{
	(void)irq;
	(void)p;
	if (out_n < sizeof out)
		out[out_n++] = (uint8_t)v;
}

static void room(struct avr_irq_t *irq, uint32_t v, void *p)
{
	(void)irq;
	if (v)
		open_in = p != NULL;
}

/* Time is kept by whoever calls run, never by the library. */
static void no_sleep(avr_t *a, avr_cycle_count_t n)
{
	(void)a;
	(void)n;
}

static avr_cycle_count_t wake(avr_t *a, avr_cycle_count_t when, void *p)
{
	(void)a;
	(void)when;
	(void)p;
	return 0;
}

static void run(uint32_t us)
{
	avr_cycle_count_t end = avr->cycle + (avr_cycle_count_t)us * (HZ / 1000000u);

	while (avr->cycle < end) {
		avr_cycle_count_t slice = avr->cycle + HZ / 10000u;
		int state;

		if (slice > end)
			slice = end;
		if (hand_until != 0 && avr->cycle >= hand_until) {
			hand_until = 0;
			avr_raise_irq(to_hand, 0);
		}
		while (in_at < in_n && open_in && in_free <= avr->cycle) {
			in_free = (in_free + HZ / 10000u < avr->cycle ? avr->cycle : in_free) + HZ / 11520u;
			avr_raise_irq(to_uart, in[in_at++]);
		}
		avr_cycle_timer_register(avr, slice - avr->cycle, wake, NULL);
		while (avr->cycle < slice) {
			state = avr_run(avr);
			if (state == cpu_Done || state == cpu_Crashed) {
				fprintf(stderr, "avrrun: the image stopped\n");
				exit(1);
			}
		}
	}
}

static void give(const uint8_t *b, size_t n)
{
	if (in_at == in_n)
		in_at = in_n = 0;
	if (n > sizeof in - in_n)
		n = sizeof in - in_n;
	memcpy(in + in_n, b, n);
	in_n += n;
}

static int deepest; /* of the stack, also before the last reset, which paints anew */

/* memory finds the painted gap between static data and stack. */
static void memory(char *text, size_t n)
{
	int from = RAM, to, len = 0, best = 0;

	for (int i = RAM; i <= (int)avr->ramend; i++) {
		len = avr->data[i] == PAINT ? len + 1 : 0;
		if (len > best) {
			best = len;
			from = i - len + 1;
		}
	}
	to = from + best;
	if ((int)avr->ramend + 1 - to > deepest)
		deepest = (int)avr->ramend + 1 - to;
	snprintf(text, n, "static %d stack %d", from - RAM, deepest);
}

static int need(void *to, size_t n)
{
	return fread(to, 1, n, stdin) == n;
}

static void reply(const void *b, size_t n)
{
	uint8_t h[4] = {(uint8_t)n, (uint8_t)(n >> 8), (uint8_t)(n >> 16), (uint8_t)(n >> 24)};

	fwrite(h, 1, 4, say);
	fwrite(b, 1, n, say);
	fflush(say);
}

static int run_virtual(void)
{
	uint8_t head[5], piece[4096];
	char text[64];

	while (need(head, 5)) {
		uint32_t arg = (uint32_t)head[1] | (uint32_t)head[2] << 8 | (uint32_t)head[3] << 16 | (uint32_t)head[4] << 24;

		if (head[0] == 'B' && arg <= sizeof piece && need(piece, arg)) {
			give(piece, arg);
			reply("", 0);
		} else if (head[0] == 'R') {
			run(arg);
			reply(out, out_n);
			out_n = 0;
		} else if (head[0] == 'X') {
			in_n = in_at = 0;
			open_in = 1;
			memory(text, sizeof text);
			avr_reset(avr); /* RAM and EEPROM stay as they are */
			reply("", 0);
		} else if (head[0] == 'H') {
			hand_until = avr->cycle + 2u * HZ;
			avr_raise_irq(to_hand, 1);
			reply("", 0);
		} else if (head[0] == 'Q') {
			memory(text, sizeof text);
			reply(text, strlen(text));
		} else {
			return 2;
		}
	}
	return 0;
}

static uint64_t clock_us(void)
{
	struct timespec t;

	clock_gettime(CLOCK_MONOTONIC, &t);
	return (uint64_t)t.tv_sec * 1000000u + (uint64_t)t.tv_nsec / 1000u;
}

static int run_pty(const char *path)
{
	int fd = posix_openpt(O_RDWR | O_NOCTTY), slave;
	struct termios tio;
	uint64_t zero;
	uint8_t b[256];
	ssize_t n;

	if (fd < 0 || grantpt(fd) != 0 || unlockpt(fd) != 0 || (slave = open(ptsname(fd), O_RDWR | O_NOCTTY)) < 0) {
		perror("avrrun: pseudo-terminal");
		return 1;
	}
	tcgetattr(slave, &tio);
	cfmakeraw(&tio);
	tcsetattr(slave, TCSANOW, &tio);
	fcntl(fd, F_SETFL, O_NONBLOCK);
	unlink(path);
	if (symlink(ptsname(fd), path) != 0) {
		perror("avrrun: link");
		return 1;
	}
	fprintf(say, "%s\n", path);
	fflush(say);
	zero = clock_us();
	for (;;) {
		struct pollfd p = {.fd = fd, .events = POLLIN};
		uint64_t now;

		poll(&p, 1, 1);
		if ((p.revents & POLLIN) && (n = read(fd, b, sizeof b)) > 0)
			give(b, (size_t)n);
		now = (clock_us() - zero) * (HZ / 1000000u);
		if (now > avr->cycle)
			run((uint32_t)((now - avr->cycle) / (HZ / 1000000u)));
		if (out_n > 0 && (n = write(fd, out, out_n)) > 0) {
			memmove(out, out + n, out_n - (size_t)n);
			out_n -= (size_t)n;
		}
	}
}

int main(int argc, char **argv)
{
	elf_firmware_t f = {0};
	uint32_t flags = 0;
	int virtual = argc == 3 && strcmp(argv[2], "--virtual") == 0;

	if (!virtual && !(argc == 4 && strcmp(argv[2], "--pty-link") == 0)) {
		fprintf(stderr, "usage: avrrun IMAGE --virtual | --pty-link PATH\n");
		return 2;
	}
	say = fdopen(dup(1), "w");
	if (say == NULL || freopen("/dev/null", "w", stdout) == NULL)
		return 1;
	if (elf_read_firmware(argv[1], &f) != 0 || (avr = avr_make_mcu_by_name("atmega328p")) == NULL) {
		fprintf(stderr, "avrrun: cannot load %s\n", argv[1]);
		return 1;
	}
	avr_init(avr);
	f.frequency = HZ;
	avr_load_firmware(avr, &f);
	avr->frequency = HZ;
	avr->sleep = no_sleep;
	avr->log = LOG_ERROR;
	avr_ioctl(avr, AVR_IOCTL_UART_GET_FLAGS('0'), &flags);
	flags &= (uint32_t) ~(AVR_UART_FLAG_STDIO | AVR_UART_FLAG_POLL_SLEEP);
	avr_ioctl(avr, AVR_IOCTL_UART_SET_FLAGS('0'), &flags);
	to_hand = avr_io_getirq(avr, AVR_IOCTL_IOPORT_GETIRQ('B'), 0);
	to_uart = avr_io_getirq(avr, AVR_IOCTL_UART_GETIRQ('0'), UART_IRQ_INPUT);
	avr_irq_register_notify(avr_io_getirq(avr, AVR_IOCTL_UART_GETIRQ('0'), UART_IRQ_OUTPUT), sent, NULL);
	avr_irq_register_notify(avr_io_getirq(avr, AVR_IOCTL_UART_GETIRQ('0'), UART_IRQ_OUT_XON), room, avr);
	avr_irq_register_notify(avr_io_getirq(avr, AVR_IOCTL_UART_GETIRQ('0'), UART_IRQ_OUT_XOFF), room, NULL);
	return virtual ? run_virtual() : run_pty(argv[3]);
}
