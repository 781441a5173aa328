/* The last four weight samples of the hopper, newest first. Wrap: conditional expression. */
#include <stdint.h>

#define HISTORY_SLOTS 4u

static int16_t history[HISTORY_SLOTS];
static uint8_t head;

void history_put(int16_t sample)
{
    history[head] = sample;
    head = (head + 1u < HISTORY_SLOTS) ? head + 1u : 0u;
}

/* The i-th sample back: 0 is the newest, HISTORY_SLOTS - 1 the oldest. Anything older is gone and reads as 0. */
int16_t history_get(uint8_t i)
{
    if (i >= HISTORY_SLOTS) {
        return 0;
    }
    const uint8_t at = (head > i) ? head - 1u - i : head + HISTORY_SLOTS - 1u - i;

    return history[at];
}
