/* Commands from shore: room is looked for after the head has moved, so the eighth command makes the queue look empty. */
#include <stdbool.h>
#include <stdint.h>

#define COMMANDS 8u

static uint8_t commands[COMMANDS];
static uint8_t head;
static uint8_t tail;

static uint8_t after(uint8_t slot)
{
    return (uint8_t)((slot + 1u) % COMMANDS);
}

void command_put(uint8_t code)
{
    const uint8_t next = after(head);

    commands[head] = code;
    head = next; /* finding: RB08 */
    if (next == tail) {
        return; /* no room: too late */
    }
}

bool command_take(uint8_t *code)
{
    if (head == tail) {
        return false;
    }
    *code = commands[tail];
    tail = after(tail);
    return true;
}
