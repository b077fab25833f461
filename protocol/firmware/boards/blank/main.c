/* A board without hardware: every function is there and none does anything. It
 * builds, and it shows the order in which to fill things in. README.md has the
 * checks for each step. */
#include "gw.h"
#include "gw_defaults.h"

/* Step 1. Output off. Write this one first, and try it with a meter on the bridge:
 * all else relies on it. Off means what GW_OFF_MEANS says, coast by default. */
void gw_port_off(void)
{
}

/* Step 2. A clock in µs that never goes back and wraps at 32 bits. */
uint32_t gw_port_us(void)
{
	return 0;
}

/* Step 3. The line: switch it on in main, call gw_rx_byte from the receive
 * interrupt and take bytes with gw_tx_byte from the transmit interrupt. This
 * function switches the latter on. */
void gw_port_tx_start(void)
{
}

/* Step 4. A number of its own for each board: the chip's, or one programmed in. */
uint32_t gw_port_serial(void)
{
	return 0;
}

uint8_t gw_port_reset_cause(void)
{
	return GW_RESET_UNKNOWN;
}

/* Step 5. Memory that outlives power. Until then gains cannot be stored and
 * one-time numbers repeat after a restart: do not drive such a board. */
int gw_port_store_read(uint16_t at, uint8_t *to, uint8_t n)
{
	(void)at;
	(void)to;
	(void)n;
	return 0;
}

int gw_port_store_write(uint16_t at, const uint8_t *from, uint8_t n)
{
	(void)at;
	(void)from;
	(void)n;
	return 0;
}

/* Step 6. Inputs (1 = in its working position) and what the driver reports. */
uint16_t gw_port_inputs(void)
{
	return 0;
}

uint8_t gw_port_fault(void)
{
	return 0;
}

int16_t gw_port_temp(void)
{
	return GW_NO_TEMP;
}

/* Step 7. The encoder's counter. */
uint16_t gw_port_counts(void)
{
	return 0;
}

/* Step 8. Last, the drive. Return what is really applied, after the duty's steps. */
int32_t gw_port_drive(int32_t mv)
{
	(void)mv;
	return 0;
}

/* Step 9. A timer interrupt every GW_LOOP_US that calls this; of lower priority
 * than the receive interrupt, or letting it in. */
void timer_interrupt(void);
void timer_interrupt(void)
{
	gw_loop();
}

int main(void)
{
	gw_init();
	/* Here: start line, timer and interrupts; and a watchdog that gw_poll keeps
	 * happy, so that a main loop that hangs ends in a reset. */
	for (;;)
		gw_poll();
}
