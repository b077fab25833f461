/* What this board is. Copy the folder and fill it in from top to bottom; every
 * other knob has a default in core/gw_defaults.h. */
#ifndef GW_CONFIG_H
#define GW_CONFIG_H

#define GW_FIRMWARE "my-board 0.1" /* name and version, printable, at most 40 characters */
#define GW_BOARD "mine"            /* kind of board; its serial number is put behind it */
#define GW_BAUD 115200             /* below 38400 the board can be looked at only */
#define GW_LOOP_US 1000            /* period of the control loop, µs */
#define GW_DELAY_US 0              /* from gw_port_counts to the output that uses it, µs */
#define GW_WIN 5                   /* speed is the mean over so many periods */
#define GW_CPT 2000.0f             /* encoder counts in one turn of its own shaft */
#define GW_BUS_NOMINAL 24.0f       /* V */
#define GW_VMAX 24.0f              /* hard limits that no console can raise: V, */
#define GW_WMAX 500.0f             /* rad/s at the motor shaft */

/* Interrupts are locked and unlocked in pairs; the two may open and close a block. */
#define GW_LOCK() {   /* save the interrupt state, switch interrupts off */
#define GW_UNLOCK() } /* put the interrupt state back */

#endif
