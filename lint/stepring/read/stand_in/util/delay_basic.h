/* Stand-in for <util/delay_basic.h>. */
#ifndef STEPRING_UTIL_DELAY_BASIC_H
#define STEPRING_UTIL_DELAY_BASIC_H
#include <stdint.h>
void _delay_loop_1 (uint8_t count);
void _delay_loop_2 (uint16_t count);
#endif
