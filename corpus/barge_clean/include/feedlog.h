/* How much was fed: minute by minute for five hours, hour by hour for a day. */
#ifndef FEEDLOG_H
#define FEEDLOG_H

#include <stdint.h>

void feedlog_add(uint16_t grams);
void feedlog_minute(void);
void feedlog_skip_hours(uint8_t hours);
uint32_t feedlog_five_hours(void);
uint32_t feedlog_hour_before_last(void);

#endif
