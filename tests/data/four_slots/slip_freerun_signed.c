/* The last four weight samples of the hopper, newest first. Slip: a signed counter; its remainder turns negative. */
#include <stdint.h>

#define HISTORY_SLOTS 4

static int16_t history[HISTORY_SLOTS];
static signed char count;

void history_put(int16_t sample)
{
    history[count % HISTORY_SLOTS] = sample; /* finding: RB02 */
    count++;
}

/* The i-th sample back: 0 is the newest, HISTORY_SLOTS - 1 the oldest. Anything older is gone and reads as 0. */
int16_t history_get(uint8_t i)
{
    if (i >= HISTORY_SLOTS) {
        return 0;
    }
    return history[(unsigned char)(count - 1 - i) & (HISTORY_SLOTS - 1)];
}
