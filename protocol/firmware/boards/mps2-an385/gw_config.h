/* A Cortex-M3 at 25 MHz: 1 kHz loop, capture, derivative. */
#ifndef GW_CONFIG_H
#define GW_CONFIG_H

#define GW_FIRMWARE "reference-core 1.0"
#define GW_BOARD "an385"
#define GW_BAUD 115200
#define GW_LOOP_US 1000
#define GW_WIN 5
#define GW_PID 1
#define GW_CPT 2000.0f
#define GW_CURRENT_LSB_MA 1
#define GW_BUS_LSB_MV 2
#define GW_BUS_NOMINAL 24.0f
#define GW_VMAX 24.0f
#define GW_WMAX 600.0f
#define GW_IMAX 10.0f
#define GW_BUS_HARD_MAX 40.0f
#define GW_CAPTURE 2000
#define GW_EXPER 1
#define GW_INPUT_NAMES " estop guard"
#define GW_ESTOP_MASK 1u
#define GW_GUARD_MASK 2u
#define GW_RX_SIZE 256u
#define GW_TX_SIZE 512u
#define GW_NOINIT __attribute__((section(".noinit")))

#define GW_LOCK() { uint32_t gw_mask; __asm volatile("mrs %0, primask\n\tcpsid i" : "=r"(gw_mask) : : "memory");
#define GW_UNLOCK() __asm volatile("msr primask, %0" : : "r"(gw_mask) : "memory"); }

#endif
