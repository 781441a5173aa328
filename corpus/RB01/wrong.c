/* Sample buffers of the feed barge with an index that reaches one slot past the end: the limit tested with > for
 * >=, the wrap done after the slot was used, and a loop that runs to <= the number of slots. */
#include <stdint.h>

#define WEIGHT_SLOTS 8
#define CURRENT_SLOTS 12u
#define TEMPERATURE_SLOTS 6

static int16_t weights[WEIGHT_SLOTS];
static uint8_t weight_head;

void weight_put(int16_t grams)
{
    weights[weight_head] = grams; /* finding: RB01 */
    weight_head++;
    if (weight_head > WEIGHT_SLOTS) {
        weight_head = 0;
    }
}

int16_t weight_mean(void)
{
    int32_t sum = 0;

    for (uint8_t i = 0; i < WEIGHT_SLOTS; i++) {
        sum += weights[i];
    }
    return (int16_t)(sum / WEIGHT_SLOTS);
}

struct motor_current {
    uint16_t milliamps[CURRENT_SLOTS];
    uint8_t at;
};

void current_put(struct motor_current *m, uint16_t milliamps)
{
    m->milliamps[++m->at] = milliamps; /* finding: RB01 */
    if (m->at == CURRENT_SLOTS) {
        m->at = 0;
    }
}

uint16_t current_peak(const struct motor_current *m)
{
    uint16_t peak = 0;

    for (uint8_t i = 0; i < CURRENT_SLOTS; i++) {
        if (m->milliamps[i] > peak) {
            peak = m->milliamps[i];
        }
    }
    return peak;
}

static struct motor_current auger_current;

void auger_current_sample(uint16_t milliamps)
{
    current_put(&auger_current, milliamps);
}

uint16_t auger_current_peak(void)
{
    return current_peak(&auger_current);
}

static int16_t temperatures[TEMPERATURE_SLOTS];
static uint8_t temperature_head;

void temperature_put(int16_t tenths)
{
    temperatures[temperature_head] = tenths;
    temperature_head = (uint8_t)((temperature_head + 1) % TEMPERATURE_SLOTS);
}

int16_t temperature_lowest(void)
{
    int16_t lowest = INT16_MAX;

    for (uint8_t i = 0; i <= TEMPERATURE_SLOTS; i++) {
        const int16_t tenths = temperatures[i]; /* finding: RB01 */

        if (tenths < lowest) {
            lowest = tenths;
        }
    }
    return lowest;
}
