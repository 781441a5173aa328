/* The last four weight samples of the hopper, newest first. Slip: the remainder of a negative number is negative. */
#include <stdint.h>

#define HISTORY_SLOTS 4

static int16_t history[HISTORY_SLOTS];
static uint8_t head;

void history_put(int16_t sample)
{
    history[head] = sample;
    head = (uint8_t)((head + 1) % HISTORY_SLOTS);
}

/* The i-th sample back: 0 is the newest, HISTORY_SLOTS - 1 the oldest. Anything older is gone and reads as 0. */
int16_t history_get(uint8_t i)
{
    if (i >= HISTORY_SLOTS) {
        return 0;
    }
    return history[(head - 1 - i) % HISTORY_SLOTS]; /* finding: RB02 */
}
