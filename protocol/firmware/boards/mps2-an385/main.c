/* The core on a Cortex-M3, the machine mps2-an385 of QEMU, with the motor
 * simulated in the image. Without any library but libgcc.
 *
 * With BOARD_STEPPED its time is given to it over the second UART, a byte an
 * order, so that a test can run it in a time of its own, the same way each time:
 *   80 hex and up   a control period, once as many bytes have come on the line as
 *                   the lower seven bits say, modulo 128; answered by a byte, the
 *                   number of bytes sent on the line, modulo 256
 *   01 to 10 hex     so many control periods, with no bytes on the line in them;
 *                   answered as one is
 *   h               a hand turns the shaft a turn, in two seconds; answered by h
 *   x               reset
 * After a start it sends r. An order waits for the answer of the one before. */
#include <stddef.h>

#include "gw.h"
#include "gw_defaults.h"
#include "motor.h"

#define REG(at) (*(volatile uint32_t *)(at))
#define UART_DATA REG(0x40004000u)
#define UART_STATE REG(0x40004004u)
#define UART_CTRL REG(0x40004008u)
#define UART_CLEAR REG(0x4000400Cu)
#define UART_DIV REG(0x40004010u)
#define STEP_DATA REG(0x40005000u)
#define STEP_STATE REG(0x40005004u)
#define STEP_CTRL REG(0x40005008u)
#define STEP_CLEAR REG(0x4000500Cu)
#define STEP_DIV REG(0x40005010u)
#define RESET_CTRL REG(0xE000ED0Cu)
#define TICK_CTRL REG(0xE000E010u)
#define TICK_LOAD REG(0xE000E014u)
#define TICK_NOW REG(0xE000E018u)
#define IRQ_ENABLE REG(0xE000E100u)
#define INT_STATE REG(0xE000ED04u)
#define TICK_PRIORITY REG(0xE000ED20u)

#define MHZ 25u
#define TICKS (MHZ * (uint32_t)GW_LOOP_US)
#define AWAKE 0x47570001u

static volatile uint32_t loops_us;
static volatile uint32_t tx_budget; /* bytes the line has room for, times 1000 */
static int32_t drive_mv;
static uint8_t lit;

static struct {
	uint32_t awake;
	uint8_t store[GW_STORE_SIZE];
} kept __attribute__((section(".noinit")));

static uint8_t cause;

#if BOARD_STEPPED
static volatile uint8_t rx_count;
static volatile uint16_t order; /* 0: none waits */
static uint8_t tx_count;
static uint16_t hand;           /* control periods that a hand goes on for */
#endif

/* The compiler may call these of its own accord. */
void *memset(void *to, int c, size_t n);
void *memcpy(void *restrict to, const void *restrict from, size_t n);

void *memset(void *to, int c, size_t n)
{
	volatile uint8_t *t = to;

	while (n-- > 0)
		*t++ = (uint8_t)c;
	return to;
}

void *memcpy(void *restrict to, const void *restrict from, size_t n)
{
	volatile uint8_t *t = to;
	const uint8_t *f = from;

	while (n-- > 0)
		*t++ = *f++;
	return to;
}

/* ---- The functions of gw.h, part 2 ---- */

void gw_port_off(void)
{
	lit = 0;
	drive_mv = 0;
}

int32_t gw_port_drive(int32_t mv)
{
	lit = 1;
	drive_mv = mv;
	return mv;
}

#if BOARD_STEPPED
uint32_t gw_port_us(void) { return loops_us; }
#else
uint32_t gw_port_us(void)
{
	uint32_t us, now, mask;

	__asm volatile("mrs %0, primask\n\tcpsid i" : "=r"(mask) : : "memory");
	us = loops_us;
	now = TICK_NOW;
	if (INT_STATE & (1u << 26)) { /* the tick has come and was not served yet */
		us += (uint32_t)GW_LOOP_US;
		now = TICK_NOW;
	}
	__asm volatile("msr primask, %0" : : "r"(mask) : "memory");
	return us + (TICKS - 1u - now) / MHZ;
}
#endif

uint16_t gw_port_counts(void) { return board_motor_counts(); }
int32_t gw_port_current_ma(void) { return board_motor_ma(); }
int32_t gw_port_bus_mv(void) { return 24000; }
int16_t gw_port_temp(void) { return GW_NO_TEMP; }
void gw_port_tx_start(void) {}
uint16_t gw_port_inputs(void) { return 3; }
uint8_t gw_port_fault(void) { return 0; }
uint32_t gw_port_serial(void) { return 0x00000385; }
uint8_t gw_port_reset_cause(void) { return cause; }

/* Memory that a reset leaves alone, and the end of the machine does not. */
int gw_port_store_read(uint16_t at, uint8_t *to, uint8_t n)
{
	memcpy(to, kept.store + at, n);
	return 1;
}

int gw_port_store_write(uint16_t at, const uint8_t *from, uint8_t n)
{
	memcpy(kept.store + at, from, n);
	return 1;
}

/* ---- Start and interrupts ---- */

static void received(uint8_t b)
{
	gw_rx_byte(b);
#if BOARD_STEPPED
	rx_count++;
#endif
}

static void uart_rx(void)
{
	UART_CLEAR = 2u; /* first: a byte that comes after the last look asks again */
	while (UART_STATE & 2u)
		received((uint8_t)UART_DATA);
}

static void tick(void)
{
	loops_us += (uint32_t)GW_LOOP_US;
	/* The machine sends as fast as it is told: the rate of the line is kept here. */
	tx_budget += (uint32_t)GW_BAUD / 10u * (uint32_t)GW_LOOP_US / 1000u;
	if (tx_budget > 40000u)
		tx_budget = 40000u;
	board_motor_step(drive_mv, !lit, GW_LOOP_US / 2);
	board_motor_step(drive_mv, !lit, GW_LOOP_US / 2);
	gw_loop();
}

static void send(void)
{
	int b;

	while (tx_budget >= 1000u && !(UART_STATE & 1u) && (b = gw_tx_byte()) >= 0) {
		UART_DATA = (uint32_t)b;
#if BOARD_STEPPED
		tx_count++;
#endif
		__asm volatile("cpsid i" : : : "memory");
		tx_budget -= 1000u;
		__asm volatile("cpsie i" : : : "memory");
	}
}

#if BOARD_STEPPED
static void step_rx(void)
{
	STEP_CLEAR = 2u;
	if (STEP_STATE & 2u)
		order = (uint16_t)(0x100u | (STEP_DATA & 0xFFu));
}

static void step_say(uint8_t b)
{
	while (STEP_STATE & 1u)
		;
	STEP_DATA = b;
}

/* period is a control period, and what the board does beside it. */
static void period(void)
{
	board_motor_hand(hand > 0);
	if (hand > 0)
		hand--;
	tick();
	for (uint8_t i = 0; i < 10; i++) {
		gw_poll();
		send();
	}
}

/* obey does what the order in hand says, once it can. */
static void obey(void)
{
	uint8_t o = (uint8_t)order;

	if (order == 0)
		return;
	if (o == 'x') {
		RESET_CTRL = 0x05FA0004u;
		for (;;)
			;
	}
	if (o & 0x80u) {
		if (((rx_count ^ o) & 0x7Fu) != 0)
			return;
		period();
		order = 0;
		step_say(tx_count);
		return;
	}
	if (o <= 16u) {
		for (; o > 0; o--)
			period();
		order = 0;
		step_say(tx_count);
		return;
	}
	if (o == 'h')
		hand = 2000000u / GW_LOOP_US;
	order = 0;
	step_say(o);
}
/* The timer does nothing here but to have the emulator look at its pipes: it asks
 * whether a byte can be taken when something happens, and nothing else does. */
static void on_timer(void) {}
#else
static void step_rx(void) {}
static void on_timer(void) { tick(); }
#endif

static void board_main(void)
{
	cause = kept.awake == AWAKE ? GW_RESET_PIN : GW_RESET_POWER;
	kept.awake = AWAKE;
	gw_init();
	UART_DIV = MHZ * 1000000u / (uint32_t)GW_BAUD;
	UART_CTRL = 1u | 2u | 8u; /* both ways, interrupt on receiving */
	TICK_PRIORITY = 0x80000000u; /* the tick below the receiver */
	TICK_LOAD = TICKS - 1u;
	TICK_NOW = 0;
	TICK_CTRL = 7u;
#if BOARD_STEPPED
	STEP_DIV = MHZ * 1000000u / (uint32_t)GW_BAUD;
	STEP_CTRL = 1u | 2u | 8u;
	IRQ_ENABLE = 1u | 4u;
	step_say('r');
#else
	IRQ_ENABLE = 1u;
#endif
	__asm volatile("cpsie i" : : : "memory");
#if BOARD_STEPPED
	for (;;) {
		obey();
		__asm volatile("cpsid i" : : : "memory");
		if (order == 0)
			__asm volatile("wfi");
		__asm volatile("cpsie i" : : : "memory");
	}
#else
	for (;;) {
		gw_poll();
		send();
		__asm volatile("cpsid i" : : : "memory");
		if (gw_idle())
			__asm volatile("wfi");
		__asm volatile("cpsie i" : : : "memory");
	}
#endif
}

extern uint32_t data_start, data_end, data_from, bss_start, bss_end, stack_top;

void board_reset(void);
static void stuck(void);

void board_reset(void)
{
	uint32_t *from = &data_from;

	__asm volatile("cpsid i" : : : "memory");
	for (uint32_t *to = &data_start; to < &data_end;)
		*to++ = *from++;
	for (uint32_t *to = &bss_start; to < &bss_end;)
		*to++ = 0;
	board_main();
}

/* A fault of the program: the output goes off, and stays off. */
static void stuck(void)
{
	gw_port_off();
	for (;;)
		;
}

typedef void (*vector)(void);

static const struct {
	uint32_t *stack;
	vector v[15 + 3];
} vectors __attribute__((section(".vectors"), used)) = {
	&stack_top,
	{board_reset, stuck, stuck, stuck, stuck, stuck, 0, 0, 0, 0, stuck, stuck, 0, stuck, on_timer, uart_rx, stuck, step_rx},
};
