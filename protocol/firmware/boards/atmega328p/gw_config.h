/* An ATmega328P at 16 MHz: 500 Hz loop, no capture, constants in flash. */
#ifndef GW_CONFIG_H
#define GW_CONFIG_H

#include <avr/interrupt.h>
#include <avr/pgmspace.h>

#define GW_FIRMWARE "reference-core 1.0"
#define GW_BOARD "m328"
#define GW_BAUD 115200
#define GW_LOOP_US 2000
#define GW_WIN 4
#define GW_CPT 2000.0f
#if BOARD_SIM /* without the simulated motor neither is measured */
#define GW_CURRENT_LSB_MA 1
#define GW_BUS_LSB_MV 2
#endif
#define GW_BUS_NOMINAL 24.0f
#define GW_VMAX 24.0f
#define GW_WMAX 600.0f
#define GW_IMAX 10.0f
#define GW_BUS_HARD_MAX 40.0f
#define GW_INPUT_NAMES " estop guard"
#define GW_ESTOP_MASK 1u
#define GW_GUARD_MASK 2u
#define GW_RX_SIZE 128u
#define GW_TX_SIZE 160u
#define GW_NOINIT __attribute__((section(".noinit")))

#define GW_LOCK() { uint8_t gw_sreg = SREG; cli();
#define GW_UNLOCK() SREG = gw_sreg; }
#define GW_FLASH PROGMEM
#define GW_FLASH_BYTE(p) pgm_read_byte(p)

#endif
