/* The last events, for the service port: older ones are overwritten. */
#ifndef TRACE_H
#define TRACE_H

#include <stdint.h>

void trace_note(uint8_t code);
uint8_t trace_recent(uint8_t age);

#endif
