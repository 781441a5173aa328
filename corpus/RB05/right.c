/* Buffers of the feed barge that wrap with a mask; the compiler checks that the capacity is a power of two. */
#include <stdbool.h>
#include <stdint.h>

#define WEIGHT_SLOTS 16u
#define COMMAND_SLOTS 8u

_Static_assert((WEIGHT_SLOTS & (WEIGHT_SLOTS - 1u)) == 0u, "the wrap is a mask");
_Static_assert((COMMAND_SLOTS & (COMMAND_SLOTS - 1u)) == 0u, "the wrap is a mask");

static int16_t weights[WEIGHT_SLOTS];
static uint8_t weight_head;

void weight_put(int16_t grams)
{
    weights[weight_head] = grams;
    weight_head = (weight_head + 1u) & (WEIGHT_SLOTS - 1u);
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
};

static uint8_t next_slot(uint8_t slot)
{
    return (uint8_t)((slot + 1u) & (COMMAND_SLOTS - 1u));
}

bool command_put(struct commands *q, uint8_t code)
{
    const uint8_t next = next_slot(q->head);

    if (next == q->tail) {
        return false;
    }
    q->code[q->head] = code;
    q->head = next;
    return true;
}

bool command_get(struct commands *q, uint8_t *code)
{
    if (q->tail == q->head) {
        return false;
    }
    *code = q->code[q->tail];
    q->tail = next_slot(q->tail);
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
