/* Wraps of the feed barge that stay inside the array but do not visit its slots in turn: back to slot 1, one slot
 * early in the reader only, and two slots at a time. */
#include <stdbool.h>
#include <stdint.h>

#define WEIGHT_SLOTS 8u
#define COMMAND_SLOTS 6u
#define OXYGEN_SLOTS 8u

static int16_t weights[WEIGHT_SLOTS];
static uint8_t weight_head;

void weight_put(int16_t grams)
{
    weights[weight_head] = grams;
    weight_head++;
    if (weight_head >= WEIGHT_SLOTS) { /* finding: RB03 */
        weight_head = 1;
    }
}

int32_t weight_sum(void)
{
    int32_t sum = 0;

    for (uint8_t i = 0; i < WEIGHT_SLOTS; i++) {
        sum += weights[i];
    }
    return sum;
}

struct commands {
    uint8_t code[COMMAND_SLOTS];
    uint8_t head;
    uint8_t tail;
    uint8_t count;
};

bool command_put(struct commands *q, uint8_t code)
{
    if (q->count == COMMAND_SLOTS) {
        return false;
    }
    q->code[q->head] = code;
    if (++q->head == COMMAND_SLOTS) {
        q->head = 0;
    }
    q->count++;
    return true;
}

bool command_get(struct commands *q, uint8_t *code)
{
    if (q->count == 0u) {
        return false;
    }
    *code = q->code[q->tail];
    if (++q->tail == COMMAND_SLOTS - 1u) { /* finding: RB03 */
        q->tail = 0;
    }
    q->count--;
    return true;
}

static struct commands from_shore;

bool shore_put(uint8_t code)
{
    return command_put(&from_shore, code);
}

bool shore_get(uint8_t *code)
{
    return command_get(&from_shore, code);
}

static struct {
    uint16_t percent[OXYGEN_SLOTS];
    uint8_t at;
} oxygen;

void oxygen_put(uint16_t percent)
{
    oxygen.percent[oxygen.at] = percent;
    oxygen.at = (uint8_t)((oxygen.at + 2u) % OXYGEN_SLOTS); /* finding: RB03 */
}

uint16_t oxygen_lowest(void)
{
    uint16_t lowest = UINT16_MAX;

    for (uint8_t i = 0; i < OXYGEN_SLOTS; i++) {
        if (oxygen.percent[i] < lowest) {
            lowest = oxygen.percent[i];
        }
    }
    return lowest;
}
