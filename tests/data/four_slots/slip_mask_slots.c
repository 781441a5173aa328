/* The last four weight samples of the hopper, newest first. Slip: masked with the number of slots; head stays 0. */
#include <stdint.h>

#define HISTORY_SLOTS 4u
#define HISTORY_MASK (HISTORY_SLOTS - 1u)

static int16_t history[HISTORY_SLOTS];
static uint8_t head;

void history_put(int16_t sample)
{
    history[head] = sample;
    head = (head + 1u) & HISTORY_SLOTS; /* finding: RB03 */
}

/* The i-th sample back: 0 is the newest, HISTORY_SLOTS - 1 the oldest. Anything older is gone and reads as 0. */
int16_t history_get(uint8_t i)
{
    if (i >= HISTORY_SLOTS) {
        return 0;
    }
    return history[(head - 1u - i) & HISTORY_MASK];
}
