/* The last four weight samples of the hopper, newest first. Slip: the reset goes to slot 1. */
#include <stdint.h>

#define HISTORY_SLOTS 4u

static int16_t history[HISTORY_SLOTS];
static uint8_t head;

void history_put(int16_t sample)
{
    history[head] = sample;
    head++;
    if (head == HISTORY_SLOTS) { /* finding: RB03 */
        head = 1;
    }
}

/* The i-th sample back: 0 is the newest, HISTORY_SLOTS - 1 the oldest. Anything older is gone and reads as 0. */
int16_t history_get(uint8_t i)
{
    if (i >= HISTORY_SLOTS) {
        return 0;
    }
    uint8_t at = head;

    do {
        if (at == 0u) {
            at = HISTORY_SLOTS;
        }
        at--;
    } while (i-- > 0u);
    return history[at];
}
