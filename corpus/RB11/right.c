/* Commands from shore: skipping goes the way that taking goes. */
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

bool command_put(uint8_t code)
{
    if (after(head) == tail) {
        return false;
    }
    commands[head] = code;
    head = after(head);
    return true;
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

static uint8_t waiting(void)
{
    return (uint8_t)((head + COMMANDS - tail) % COMMANDS);
}

uint8_t command_skip(uint8_t wanted)
{
    const uint8_t skipped = (wanted < waiting()) ? wanted : waiting();

    tail = (uint8_t)((tail + skipped) % COMMANDS);
    return skipped;
}
