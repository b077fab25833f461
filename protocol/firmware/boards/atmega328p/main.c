/* The core on an ATmega328P at 16 MHz. With BOARD_SIM the motor is simulated in
 * the image; without it the bridge hangs on OC0A (positive) and OC0B (negative),
 * the encoder on INT0 and INT1, the E-stop contact on PC0, the guard on PC1.
 * The second way has been built, not run. */
#include <avr/eeprom.h>
#include <avr/interrupt.h>
#include <avr/io.h>
#include <avr/sleep.h>
#include <avr/wdt.h>

#include "gw.h"
#include "gw_defaults.h"
#if BOARD_SIM
#include "motor.h"
#endif

static volatile uint32_t loops_us; /* µs at the last start of timer 1 */
static volatile uint8_t looping, lit;
static int16_t drive_mv;
static uint8_t reset_flags __attribute__((section(".noinit")));

/* The stack is painted before anything runs, so that a runner can see how deep it
 * went; the reset flags are kept and the watchdog switched off. */
void board_first(void) __attribute__((naked, used, section(".init3")));
void board_first(void)
{
	extern uint8_t _end;

	reset_flags = MCUSR;
	MCUSR = 0;
	wdt_disable();
	for (uint8_t *p = &_end; p < (uint8_t *)(RAMEND - 1); p++)
		*p = 0xC5;
}

/* ---- The functions of gw.h, part 2 ---- */

void gw_port_off(void)
{
	TCCR0A = 0; /* both pins low */
	PORTD &= (uint8_t) ~(_BV(PORTD5) | _BV(PORTD6));
	lit = 0;
	drive_mv = 0;
}

int32_t gw_port_drive(int32_t mv)
{
	uint8_t duty = (uint8_t)(((mv < 0 ? -mv : mv) * 255 + 12000) / 24000);

	if (mv < 0) {
		OCR0B = duty;
		TCCR0A = _BV(COM0B1) | _BV(WGM00);
	} else {
		OCR0A = duty;
		TCCR0A = _BV(COM0A1) | _BV(WGM00);
	}
	lit = 1;
	drive_mv = (int16_t)((int32_t)duty * 24000 / 255);
	if (mv < 0)
		drive_mv = (int16_t)-drive_mv;
	return drive_mv;
}

uint32_t gw_port_us(void)
{
	uint32_t us;
	uint16_t t;
	uint8_t sreg = SREG;

	cli();
	t = TCNT1;
	us = loops_us;
	if ((TIFR1 & _BV(OCF1A)) && t < 2000)
		us += GW_LOOP_US;
	SREG = sreg;
	return us + t / 2;
}

#if BOARD_SIM
uint16_t gw_port_counts(void)
{
	return board_motor_counts();
}
#else
static volatile uint16_t counts;

uint16_t gw_port_counts(void)
{
	uint16_t c;
	uint8_t sreg = SREG;

	cli();
	c = counts;
	SREG = sreg;
	return c;
}

/* edge counts by the two channels before and now. */
static void edge(void)
{
	static uint8_t was;
	uint8_t now = (uint8_t)((PIND >> 2) & 3);
	uint8_t both = (uint8_t)(now ^ (now >> 1));
	uint8_t by = (uint8_t)((both - was) & 3);

	was = both;
	if (by == 1)
		counts++;
	else if (by == 3)
		counts--;
}

ISR(INT0_vect) { edge(); }
ISR(INT1_vect) { edge(); }
#endif

void gw_port_tx_start(void)
{
	UCSR0B |= _BV(UDRIE0);
}

uint16_t gw_port_inputs(void)
{
#if BOARD_SIM
	return 3;
#else
	return PINC & 3;
#endif
}

uint8_t gw_port_fault(void)
{
	return 0;
}

#if GW_CURRENT_LSB_MA
int32_t gw_port_current_ma(void)
{
	return board_motor_ma();
}
#endif

#if GW_BUS_LSB_MV
int32_t gw_port_bus_mv(void)
{
	return 24000;
}
#endif

int16_t gw_port_temp(void)
{
	return GW_NO_TEMP;
}

int gw_port_store_read(uint16_t at, uint8_t *to, uint8_t n)
{
	eeprom_read_block(to, (const void *)at, n);
	return 1;
}

int gw_port_store_write(uint16_t at, const uint8_t *from, uint8_t n)
{
	eeprom_update_block(from, (void *)at, n);
	return 1;
}

uint32_t gw_port_serial(void)
{
	return 0x00000328; /* this chip has no number of its own: give each board one */
}

uint8_t gw_port_reset_cause(void)
{
	if (reset_flags & _BV(PORF))
		return GW_RESET_POWER;
	if (reset_flags & _BV(WDRF))
		return GW_RESET_WATCHDOG;
	if (reset_flags & _BV(BORF))
		return GW_RESET_BROWNOUT;
	return reset_flags & _BV(EXTRF) ? GW_RESET_PIN : GW_RESET_UNKNOWN;
}

/* ---- Interrupts ---- */

ISR(USART_RX_vect)
{
	gw_rx_byte(UDR0);
}

ISR(USART_UDRE_vect)
{
	int b = gw_tx_byte();

	if (b < 0)
		UCSR0B &= (uint8_t)~_BV(UDRIE0);
	else
		UDR0 = (uint8_t)b;
}

/* The loop lets the receive interrupt in, so that a cut byte never waits. A loop
 * that takes longer than its period misses the next one. */
ISR(TIMER1_COMPA_vect)
{
	loops_us += GW_LOOP_US;
	if (looping)
		return;
	looping = 1;
	sei();
#if BOARD_SIM
	board_motor_hand(PINB & _BV(PINB0)); /* the runner pulls it up while a hand turns the shaft */
	board_motor_step(drive_mv, !lit, GW_LOOP_US / 2);
	board_motor_step(drive_mv, !lit, GW_LOOP_US / 2);
#endif
	gw_loop();
	cli();
	looping = 0;
}

int main(void)
{
	DDRD = _BV(DDD5) | _BV(DDD6);
	PORTC = 3;
	TCCR0B = _BV(CS00); /* 31 kHz, phase correct */
	TCCR1B = _BV(WGM12) | _BV(CS11); /* 2 MHz, clear on compare */
	OCR1A = (uint16_t)(GW_LOOP_US * 2 - 1);
	gw_init();
	UCSR0A = _BV(U2X0); /* first: an emulator looks at it when the rate is set */
	UBRR0 = 16;         /* 115200 baud, 2.1 % fast */
	UCSR0C = _BV(UCSZ01) | _BV(UCSZ00);
	UCSR0B = _BV(RXEN0) | _BV(TXEN0) | _BV(RXCIE0);
	TIMSK1 = _BV(OCIE1A);
#if !BOARD_SIM
	EICRA = _BV(ISC00) | _BV(ISC10);
	EIMSK = _BV(INT0) | _BV(INT1);
#endif
	wdt_enable(WDTO_250MS);
	sei();
	for (;;) {
		wdt_reset();
		gw_poll();
		cli();
		if (gw_idle()) {
			SMCR = _BV(SE); /* idle: any interrupt wakes it */
			sei();
			sleep_cpu();
		}
		sei();
	}
}
