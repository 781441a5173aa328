#include "commands.h"

#define COMMAND_SLOTS 10u
#define COMMAND_MASK (COMMAND_SLOTS - 1u)

/* The interrupt owns the head, the main loop the tail; one slot stays empty. */
static struct {
    volatile struct command slot[COMMAND_SLOTS];
    volatile uint8_t head;
    volatile uint8_t tail;
} queue;

static uint8_t slot_after(uint8_t slot)
{
    return (uint8_t)((slot + 1u) & COMMAND_MASK); /* finding: RB05 */
}

/* Called by the interrupt of the shore link only. */
bool command_put(uint8_t code, uint8_t channel, uint16_t value)
{
    const uint8_t head = queue.head;
    const uint8_t next = slot_after(head);

    if (next == queue.tail) {
        return false;
    }
    queue.slot[head].code = code;
    queue.slot[head].channel = channel;
    queue.slot[head].value = value;
    queue.head = next;
    return true;
}

/* Called by the main loop only. */
bool command_take(struct command *out)
{
    const uint8_t tail = queue.tail;

    if (tail == queue.head) {
        return false;
    }
    out->code = queue.slot[tail].code;
    out->channel = queue.slot[tail].channel;
    out->value = queue.slot[tail].value;
    queue.tail = slot_after(tail);
    return true;
}
