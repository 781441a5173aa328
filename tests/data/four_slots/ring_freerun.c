/* The last four weight samples of the hopper, newest first. Wrap: a free-running counter, masked on access. */
#include <stdint.h>

#define HISTORY_SLOTS 4u

static int16_t history[HISTORY_SLOTS];
static unsigned char count;

void history_put(int16_t sample)
{
    history[count & 3u] = sample;
    count++;
}

/* The i-th sample back: 0 is the newest, HISTORY_SLOTS - 1 the oldest. Anything older is gone and reads as 0. */
int16_t history_get(uint8_t i)
{
    if (i >= HISTORY_SLOTS) {
        return 0;
    }
    return history[(unsigned char)(count - 1u - i) & 3u];
}
