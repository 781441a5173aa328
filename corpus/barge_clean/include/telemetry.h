/* Records for shore, sent byte by byte whenever the link has room. */
#ifndef TELEMETRY_H
#define TELEMETRY_H

#include <stdbool.h>
#include <stdint.h>

bool telemetry_record(uint8_t code, uint16_t value);
void telemetry_poll(void);

#endif
