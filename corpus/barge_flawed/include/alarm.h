/* One alarm at a time: a short delay, the horn, a mute, and the horn again while nobody comes. */
#ifndef ALARM_H
#define ALARM_H

#include <stdbool.h>
#include <stdint.h>

void alarm_raise(uint8_t code);
void alarm_mute(void);
bool alarm_is_active(void);
void alarm_poll(void);

#endif
