/* Readers of the feed barge's sample buffers that step back from the head and leave the array at its lower end:
 * an unsigned index that wraps round to 255, a remainder that turns negative, and a signed index that nothing stops. */
#include <stdint.h>

#define WEIGHT_SLOTS 10u
#define OXYGEN_SLOTS 6

static int16_t weights[WEIGHT_SLOTS];
static uint8_t weight_head;

void weight_put(int16_t grams)
{
    weights[weight_head] = grams;
    if (++weight_head == WEIGHT_SLOTS) {
        weight_head = 0;
    }
}

/* The sample that was put last. */
int16_t weight_newest(void)
{
    uint8_t at = weight_head;

    at--;
    return weights[at]; /* finding: RB02 */
}

struct oxygen {
    uint16_t sample[OXYGEN_SLOTS];
    uint8_t head;
};

void oxygen_put(struct oxygen *o, uint16_t percent)
{
    o->sample[o->head] = percent;
    o->head = (uint8_t)((o->head + 1) % OXYGEN_SLOTS);
}

/* The sample before the newest one. */
uint16_t oxygen_previous(const struct oxygen *o)
{
    const int at = (o->head - 2) % OXYGEN_SLOTS;

    return o->sample[at]; /* finding: RB02 */
}

static struct oxygen cage_oxygen;

void cage_oxygen_sample(uint16_t percent)
{
    oxygen_put(&cage_oxygen, percent);
}

uint16_t cage_oxygen_previous(void)
{
    return oxygen_previous(&cage_oxygen);
}

/* How much the weight fell over the last three samples. */
int16_t weight_fall(void)
{
    int8_t at = (int8_t)weight_head;
    int16_t fall = 0;

    for (int8_t i = 0; i < 3; i++) {
        at = (int8_t)(at - 1);
        fall = (int16_t)(fall - weights[at]); /* finding: RB02 */
    }
    return fall;
}
