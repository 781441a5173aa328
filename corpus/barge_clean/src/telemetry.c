#include "telemetry.h"

#include "board.h"

#define TELEMETRY_SIZE 48u
#define RECORD_SIZE 4u
#define RECORD_MARK 0xA5u

struct telemetry {
    uint8_t data[TELEMETRY_SIZE];
    uint8_t head;
    uint8_t tail;
    uint8_t count;
};

static struct telemetry outgoing;

static void put(struct telemetry *t, uint8_t byte)
{
    if (t->count >= TELEMETRY_SIZE) {
        return;
    }
    t->data[t->head] = byte;
    t->head = (t->head + 1u < TELEMETRY_SIZE) ? t->head + 1u : 0u;
    t->count++;
}

static bool get(struct telemetry *t, uint8_t *byte)
{
    if (t->count == 0u) {
        return false;
    }
    *byte = t->data[t->tail];
    if (++t->tail == TELEMETRY_SIZE) {
        t->tail = 0u;
    }
    t->count--;
    return true;
}

/* A record is sent whole or not at all. */
bool telemetry_record(uint8_t code, uint16_t value)
{
    if (TELEMETRY_SIZE - outgoing.count < RECORD_SIZE) {
        return false;
    }
    put(&outgoing, RECORD_MARK);
    put(&outgoing, code);
    put(&outgoing, (uint8_t)(value >> 8));
    put(&outgoing, (uint8_t)(value & 0xFFu));
    return true;
}

void telemetry_poll(void)
{
    uint8_t byte;

    if ((UART_SHORE_STATUS & UART_TX_FREE) != 0u && get(&outgoing, &byte)) {
        UART_SHORE_DATA = byte;
    }
}
