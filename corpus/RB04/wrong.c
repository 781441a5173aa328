/* Histories of the feed barge with a counter that runs freely and is reduced when a slot is used. 256 is no
 * multiple of 10 and 65536 none of 100: when the counter overflows the next slot is not the one that follows. */
#include <stdint.h>

#define EVENT_SLOTS 10u
#define WEIGHT_SLOTS 100u

static uint8_t events[EVENT_SLOTS];
static uint8_t event_count;

void event_note(uint8_t code)
{
    events[event_count % EVENT_SLOTS] = code;
    event_count++; /* finding: RB04 */
}

uint8_t event_worst(void)
{
    uint8_t worst = 0;

    for (uint8_t i = 0; i < EVENT_SLOTS; i++) {
        if (events[i] > worst) {
            worst = events[i];
        }
    }
    return worst;
}

struct weights {
    int16_t grams[WEIGHT_SLOTS];
    uint16_t total;
};

void weight_put(struct weights *w, int16_t grams)
{
    w->grams[w->total % WEIGHT_SLOTS] = grams;
    w->total++; /* finding: RB04 */
}

int16_t weight_mean(const struct weights *w)
{
    int32_t sum = 0;

    for (uint8_t i = 0; i < WEIGHT_SLOTS; i++) {
        sum += w->grams[i];
    }
    return (int16_t)(sum / (int32_t)WEIGHT_SLOTS);
}

static struct weights hopper_weights;

void hopper_sample(int16_t grams)
{
    weight_put(&hopper_weights, grams);
}

int16_t hopper_mean(void)
{
    return weight_mean(&hopper_weights);
}
