#include "auger.h"

#include <stdint.h>

#include "alarm.h"
#include "barge.h"
#include "blower.h"
#include "board.h"
#include "feedlog.h"
#include "jobs.h"
#include "trace.h"

#define PRIME_TICKS (2u * TICKS_PER_SECOND)
#define FEED_LIMIT_TICKS (600u * TICKS_PER_SECOND)
#define CLEAR_TICKS (1u * TICKS_PER_SECOND)
#define RETRY_TICKS (120u * TICKS_PER_SECOND)

#define GRAMS_PER_TICK 4u
#define STALL_MILLIAMPS 4500u
#define CURRENT_SLOTS 6u
#define JAMS_ALLOWED 3u

typedef enum { AUGER_IDLE, AUGER_PRIME, AUGER_FEED, AUGER_CLEAR, AUGER_FAULT } auger_state_t;

struct auger {
    auger_state_t state;
    uint16_t ticks;
    uint16_t grams_left;
    uint8_t jams;
    uint8_t current_at;
    uint16_t current[CURRENT_SLOTS];
};

static struct auger augers[AUGERS];
static bool on_hold;

static void auger_set_state(struct auger *a, auger_state_t state)
{
    a->state = state;
    a->ticks = 0u;
}

static void note_current(struct auger *a, uint16_t milliamps)
{
    a->current[a->current_at] = milliamps;
    a->current_at = (a->current_at + 1u >= CURRENT_SLOTS) ? 0u : a->current_at + 1u;
}

static bool is_stalled(const struct auger *a)
{
    uint32_t sum = 0u;

    for (uint8_t i = 0u; i < CURRENT_SLOTS; i++) {
        sum += a->current[i];
    }
    return sum / CURRENT_SLOTS > STALL_MILLIAMPS;
}

static void auger_step(struct auger *a, uint8_t channel)
{
    note_current(a, motor_milliamps(channel));
    if (a->ticks < UINT16_MAX) {
        a->ticks++;
    }
    switch (a->state) {
    case AUGER_IDLE:
        if (!on_hold && job_take(channel, &a->grams_left)) {
            blower_request(true);
            motor_speed(channel, 20);
            auger_set_state(a, AUGER_PRIME);
        }
        break;
    case AUGER_PRIME:
        if (a->ticks >= PRIME_TICKS) {
            motor_speed(channel, 100);
            auger_set_state(a, AUGER_FEED);
        }
        break;
    case AUGER_FEED:
        if (is_stalled(a)) {
            motor_speed(channel, -40);
            auger_set_state(a, AUGER_CLEAR);
        } else if (on_hold || a->grams_left < GRAMS_PER_TICK || a->ticks >= FEED_LIMIT_TICKS) {
            motor_speed(channel, 0);
            auger_set_state(a, AUGER_IDLE);
        } else {
            a->grams_left -= GRAMS_PER_TICK;
            feedlog_add(GRAMS_PER_TICK);
        }
        break;
    case AUGER_CLEAR:
        if (a->ticks < CLEAR_TICKS) {
            break;
        }
        a->jams++;
        if (a->jams >= JAMS_ALLOWED) {
            motor_speed(channel, 0);
            alarm_raise(ALARM_AUGER_STUCK);
            auger_set_state(a, AUGER_FAULT);
        } else {
            motor_speed(channel, 20);
            auger_set_state(a, AUGER_PRIME);
        }
        break;
    case AUGER_FAULT:
        if (a->ticks >= RETRY_TICKS) {
            a->jams = 0u;
            auger_set_state(a, AUGER_IDLE);
        }
        break;
    default:
        motor_speed(channel, 0);
        alarm_raise(ALARM_BAD_STATE);
        auger_set_state(a, AUGER_IDLE);
        break;
    }
}

void auger_poll(void)
{
    for (uint8_t channel = 0u; channel < AUGERS; channel++) {
        auger_step(&augers[channel], channel);
    }
}

void auger_hold(bool hold)
{
    if (hold != on_hold) {
        trace_note(0x10u);
    }
    on_hold = hold;
}
