/* Stand-in for <util/delay.h>. */
#ifndef STEPRING_UTIL_DELAY_H
#define STEPRING_UTIL_DELAY_H
#include <util/delay_basic.h>
void _delay_ms (double milliseconds);
void _delay_us (double microseconds);
#endif
