/* What a gw_config.h may leave out. README.md lists every knob. */
#ifndef GW_DEFAULTS_H
#define GW_DEFAULTS_H

#include "gw_config.h"

#ifndef GW_PID
#define GW_PID 0 /* 1: the law has a derivative */
#endif
#ifndef GW_FIXED
#define GW_FIXED 0 /* 1: the law is computed in integers */
#endif
#ifndef GW_DELAY_US
#define GW_DELAY_US 0
#endif
#ifndef GW_ENC_SIDE
#define GW_ENC_SIDE "motor"
#endif
#ifndef GW_GEAR
#define GW_GEAR 1.0f
#endif
#ifndef GW_TURN_COUNTS /* counts in one turn of the motor shaft */
#define GW_TURN_COUNTS GW_CPT
#endif
#ifndef GW_SPEED_SHIFT
#define GW_SPEED_SHIFT 2 /* speed LSB = one count a window / 2^this */
#endif
#ifndef GW_VOLTS_LSB_MV
#define GW_VOLTS_LSB_MV 2
#endif
#ifndef GW_CURRENT_LSB_MA
#define GW_CURRENT_LSB_MA 0 /* 0: current is not measured */
#endif
#ifndef GW_BUS_LSB_MV
#define GW_BUS_LSB_MV 0 /* 0: the bus is not measured */
#endif
#ifndef GW_QUADRANTS
#define GW_QUADRANTS 4
#endif
#ifndef GW_OFF_MEANS
#define GW_OFF_MEANS "coast"
#endif
#ifndef GW_INPUT
#define GW_INPUT "V"
#endif
#ifndef GW_IMAX
#define GW_IMAX 0.0f
#endif
#ifndef GW_BUS_HARD_MAX
#define GW_BUS_HARD_MAX 60.0f
#endif
#ifndef GW_BEAT_MIN_MS
#define GW_BEAT_MIN_MS 50
#endif
#ifndef GW_BEAT_MAX_MS
#define GW_BEAT_MAX_MS 1000
#endif
#ifndef GW_RAMP
#define GW_RAMP 1
#endif
#ifndef GW_CAPTURE
#define GW_CAPTURE 0
#endif
#ifndef GW_EXPER
#define GW_EXPER 0 /* 1: relay, binary sequence and square wave run in the loop */
#endif
#ifndef GW_INPUT_NAMES /* names of the input bits, each with a space before it */
#define GW_INPUT_NAMES ""
#endif
#ifndef GW_ESTOP_MASK /* input bits that trip with cause 25 */
#define GW_ESTOP_MASK 0u
#endif
#ifndef GW_GUARD_MASK /* input bits that trip with cause 24 */
#define GW_GUARD_MASK 0u
#endif
#ifndef GW_HEAT_TAU_S /* time constant of the heat budget's recovery, s */
#define GW_HEAT_TAU_S 30
#endif
#ifndef GW_LOG
#define GW_LOG 4 /* stops kept */
#endif
#ifndef GW_NOINIT /* attribute of memory that a reset leaves alone */
#define GW_NOINIT
#define GW_LOG_SURVIVES 0
#else
#define GW_LOG_SURVIVES 1
#endif
#ifndef GW_RX_SIZE
#define GW_RX_SIZE 128u
#endif
#ifndef GW_TX_SIZE
#define GW_TX_SIZE 256u
#endif
#ifndef GW_LOCK /* no interrupt of this library may run between the two,
                * which open and close a block */
#define GW_LOCK() {
#define GW_UNLOCK() }
#endif
#ifndef GW_FLASH /* constants stay in flash where that is another memory */
#define GW_FLASH
#define GW_FLASH_BYTE(p) (*(const uint8_t *)(p))
#endif

#if GW_TX_SIZE < 144
#error "GW_TX_SIZE: a whole line of 128 bytes must fit"
#endif

#define GW_HAS_CURRENT (GW_CURRENT_LSB_MA > 0)
#define GW_HAS_BUS (GW_BUS_LSB_MV > 0)

/* Lasting memory: two copies of the boot count, two of the gains. */
#define GW_GAIN_N (GW_PID ? 7 : 5)
#define GW_STORE_SIZE (2 * 4 + 2 * (4 + 4 * GW_GAIN_N))

#endif
