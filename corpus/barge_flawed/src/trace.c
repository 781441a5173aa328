#include "trace.h"

#define TRACE_SLOTS 20u

static uint8_t trace[TRACE_SLOTS];
static uint8_t trace_count; /* runs freely */

void trace_note(uint8_t code)
{
    trace[trace_count % TRACE_SLOTS] = code;
    trace_count++; /* finding: RB04 */
}

/* Age 0 is the newest event; what is older than the trace reads as 0. */
uint8_t trace_recent(uint8_t age)
{
    if (age >= TRACE_SLOTS) {
        return 0u;
    }
    return trace[(uint8_t)(trace_count - 1u - age) % TRACE_SLOTS];
}
