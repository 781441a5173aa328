#include "hopper.h"

#include <stdint.h>

#include "alarm.h"
#include "barge.h"
#include "board.h"
#include "gate.h"
#include "telemetry.h"
#include "weight.h"

#define LOW_GRAMS 4000u
#define FULL_GRAMS 20000u
#define REFILL_LIMIT_TICKS (240u * TICKS_PER_SECOND)
#define SETTLE_TICKS (3u * TICKS_PER_SECOND)
#define SHAKE_TICKS (5u * TICKS_PER_SECOND)

enum hopper_state { HOPPER_IDLE, HOPPER_REFILL, HOPPER_SETTLE, HOPPER_BRIDGED };

struct hopper {
    enum hopper_state state;
    uint16_t ticks;
    uint16_t grams_before;
};

static void hopper_step(struct hopper *h)
{
    h->ticks++;
    switch (h->state) {
    case HOPPER_IDLE:
        h->ticks = 0u;
        if (weight_grams() < LOW_GRAMS) {
            h->grams_before = weight_grams();
            gate_request(true);
            h->state = HOPPER_REFILL;
        }
        break;
    case HOPPER_REFILL:
        if (weight_grams() >= FULL_GRAMS) {
            gate_request(false);
            h->ticks = 0u;
            h->state = HOPPER_SETTLE;
        } else if (h->ticks >= REFILL_LIMIT_TICKS) {
            gate_request(false);
            shaker(true);
            h->ticks = 0u;
            h->state = HOPPER_BRIDGED;
        }
        break;
    case HOPPER_SETTLE:
        if (h->ticks >= SETTLE_TICKS && !gate_lets_pellets_through()) {
            (void)telemetry_record(0x80u, (uint16_t)(weight_grams() - h->grams_before));
            h->state = HOPPER_IDLE;
        } else if (h->ticks >= 4u * SETTLE_TICKS) {
            alarm_raise(ALARM_GATE_JAM);
            h->state = HOPPER_IDLE;
        }
        break;
    case HOPPER_BRIDGED:
        if (h->ticks >= SHAKE_TICKS) {
            shaker(false);
            alarm_raise(ALARM_HOPPER_BRIDGED);
            h->state = HOPPER_IDLE;
        }
        break;
    default:
        gate_request(false);
        shaker(false);
        h->state = HOPPER_IDLE;
        break;
    }
}

void hopper_poll(void)
{
    static struct hopper hopper = {HOPPER_IDLE, 0u, 0u};

    hopper_step(&hopper);
}
