/* Buffers of the feed barge with 300 slots and an index of eight bits: it returns to 0 after slot 255, and the
 * slots above are never stored. */
#include <stdint.h>

#define WEIGHT_SLOTS 300u
#define DEPTH_SLOTS 300u

static int16_t weights[WEIGHT_SLOTS];
static uint8_t weight_head;

void weight_put(int16_t grams)
{
    weights[weight_head] = grams;
    weight_head = (weight_head + 1u) % WEIGHT_SLOTS; /* finding: RB07 */
}

int32_t weight_sum(void)
{
    int32_t sum = 0;

    for (uint16_t i = 0; i < WEIGHT_SLOTS; i++) {
        sum += weights[i];
    }
    return sum;
}

struct depth_log {
    uint16_t centimetres[DEPTH_SLOTS];
    uint8_t head;
};

void depth_put(struct depth_log *d, uint16_t centimetres)
{
    d->centimetres[d->head] = centimetres;
    if (++d->head >= DEPTH_SLOTS) { /* finding: RB07 */
        d->head = 0;
    }
}

uint16_t depth_greatest(const struct depth_log *d)
{
    uint16_t greatest = 0;

    for (uint16_t i = 0; i < DEPTH_SLOTS; i++) {
        if (d->centimetres[i] > greatest) {
            greatest = d->centimetres[i];
        }
    }
    return greatest;
}

static struct depth_log cage_depth;

void cage_depth_sample(uint16_t centimetres)
{
    depth_put(&cage_depth, centimetres);
}

uint16_t cage_depth_greatest(void)
{
    return depth_greatest(&cage_depth);
}
