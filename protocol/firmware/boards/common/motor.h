/* The motor that an image carries where no rig hangs on it, in binary32 and
 * without inductance: small enough for an 8-bit chip. */
#ifndef BOARD_MOTOR_H
#define BOARD_MOTOR_H

#include <stdint.h>

/* board_motor_step goes on by so many µs with mv across the winding, or with the
 * winding open. */
void board_motor_step(int32_t mv, uint8_t open, uint16_t us);

/* board_motor_hand has a hand turn the shaft, half a turn a second in the positive
 * direction, for as long as it is not told 0. */
void board_motor_hand(uint8_t turning);

/* Encoder counts and winding current now. */
uint16_t board_motor_counts(void);
int32_t board_motor_ma(void);

#endif
