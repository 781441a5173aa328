/* Commands from shore: the number that wait is a difference of unsigned octets, which is never below 0. */
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

uint8_t command_count(void)
{
    const uint8_t waiting = head - tail;

    if (waiting >= 0) {
        return waiting; /* finding: RB10 */
    }
    return waiting + COMMANDS;
}
