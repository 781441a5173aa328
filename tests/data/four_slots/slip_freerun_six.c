/* The last six weight samples of the hopper, newest first. Slip: 256 is no multiple of six. */
#include <stdint.h>

#define HISTORY_SLOTS 6u

static int16_t history[HISTORY_SLOTS];
static unsigned char count;

void history_put(int16_t sample)
{
    history[count % HISTORY_SLOTS] = sample;
    count++; /* finding: RB04 */
}

/* The i-th sample back: 0 is the newest, HISTORY_SLOTS - 1 the oldest. Anything older is gone and reads as 0. */
int16_t history_get(uint8_t i)
{
    if (i >= HISTORY_SLOTS) {
        return 0;
    }
    return history[(unsigned char)(count - 1u - i) % HISTORY_SLOTS];
}
