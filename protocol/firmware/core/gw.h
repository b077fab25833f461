/* The board side of the wire described in protocol/SPEC.md, in C99: lines, arming,
 * heartbeats, limiter, speed loop, gains, telemetry, capture, stop log.
 *
 * It owns no hardware. A board supplies gw_config.h (what it is) and the
 * functions of part 2 (what it can do), and calls the functions of part 1.
 * There is no heap, no printf, no recursion and nothing of libm. There is one
 * instance: a board has one motor.
 *
 * Numbers in paragraphs such as P2.1 are those of protocol/SPEC.md. */
#ifndef GW_H
#define GW_H

#include <stdint.h>

/* ---- Part 1: what the board calls -------------------------------------- */

/* Once at the start, before interrupts are on. Leaves the output off. */
void gw_init(void);

/* From the receive interrupt (or loop), with every byte, in order. A cut byte
 * (18 hex) has switched the output off before this returns (P2.1). Must be able
 * to interrupt gw_loop. */
void gw_rx_byte(uint8_t b);

/* Every GW_LOOP_US, from a timer interrupt of lower priority than receiving.
 * Latches the counts, judges the limits, drives. */
void gw_loop(void);

/* From the main loop, as often as possible: works off at most one line and
 * writes at most a few. */
void gw_poll(void);

/* Whether gw_poll has nothing to do until the next interrupt. Asked with
 * interrupts locked by a main loop that wants to sleep. */
uint8_t gw_idle(void);

/* The next byte to send, or -1. From the transmit interrupt or the main loop,
 * from one place only. */
int gw_tx_byte(void);

/* ---- Part 2: what the board supplies ----------------------------------- */

/* Output off (coast or short, as GW_OFF says), at once. Called from the receive
 * interrupt, from gw_loop and from the main loop: a few register writes. */
void gw_port_off(void);

/* Drives the motor with mv millivolts, positive in the positive direction, and
 * returns the millivolts that it really applies (the duty has steps, the bus an
 * end). Called with interrupts locked, from gw_loop only. */
int32_t gw_port_drive(int32_t mv);

/* Microseconds since any instant; wraps at 32 bits. Called from everywhere. */
uint32_t gw_port_us(void);

/* Encoder counts now, low 16 bits; rise in the positive direction. */
uint16_t gw_port_counts(void);

/* There are bytes for gw_tx_byte: start the transmitter. May do nothing where
 * the main loop asks gw_tx_byte anyway. */
void gw_port_tx_start(void);

/* Input bits, 1 = in its working position (P11.1). */
uint16_t gw_port_inputs(void);

/* A fault that the hardware itself reports, as a cause of P7.5: GW_TEMP,
 * GW_ENCODER, GW_DRIVER, or 0. */
uint8_t gw_port_fault(void);

/* Winding current in mA, bus in mV. Needed only where the config says that they
 * are measured. Latched at about the time of the counts. */
int32_t gw_port_current_ma(void);
int32_t gw_port_bus_mv(void);

/* Temperature in 0.1 degC, or GW_NO_TEMP. */
int16_t gw_port_temp(void);

/* Lasting memory of GW_STORE_SIZE bytes. Both return 0 where it failed. Writing
 * may take its time; it is only called while the motor rests. */
int gw_port_store_read(uint16_t at, uint8_t *to, uint8_t n);
int gw_port_store_write(uint16_t at, const uint8_t *from, uint8_t n);

/* A number that no other board has, and why the board started (enum below). */
uint32_t gw_port_serial(void);
uint8_t gw_port_reset_cause(void);

/* ---- Words of the wire -------------------------------------------------- */

#define GW_CUT_BYTE 0x18u
#define GW_NO_TEMP ((int16_t)-32768)

enum { GW_OFF_STATE, GW_ARMED, GW_DRIVING, GW_LOOPING, GW_RAMPING, GW_TRIPPED };

enum {
	GW_NONE = 0, GW_CUT = 1, GW_RAMPED = 2, GW_DISARMED = 3,
	GW_BEAT = 10, GW_SPEED, GW_VOLTS, GW_CURRENT, GW_BUS_HIGH, GW_BUS_LOW, GW_ACCEL, GW_TURNS,
	GW_STALL, GW_WRONG_WAY, GW_NO_COUNTS, GW_HEAT, GW_TEMP, GW_RUN_TIME, GW_INTERLOCK, GW_ESTOP,
	GW_ENCODER, GW_DRIVER, GW_NOT_AT_REST, GW_INTERNAL
};

enum { GW_RESET_POWER, GW_RESET_PIN, GW_RESET_WATCHDOG, GW_RESET_BROWNOUT, GW_RESET_SOFT, GW_RESET_UNKNOWN };

/* For watchdogs and tests: the state now, and the drive asked for, in mV. */
uint8_t gw_state(void);
int32_t gw_drive_mv(void);

#endif
