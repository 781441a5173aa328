/* Three machines of the feed barge: everything they store is one of their states. */
#include <stdbool.h>
#include <stdint.h>

extern void gate_motor(int direction);
extern bool gate_at_top(void);
extern bool gate_at_bottom(void);
extern bool feed_wanted(void);
extern void auger_speed(uint8_t percent);
extern bool auger_overloaded(void);
extern bool auger_pipe_empty(void);
extern void beacon(bool on);

#define GATE_SHUT 0u
#define GATE_MOVING 1u
#define GATE_OPEN 2u

static uint8_t gate_state = GATE_SHUT;

void gate_poll(void)
{
    switch (gate_state) {
    case GATE_SHUT:
        if (feed_wanted()) {
            gate_motor(1);
            gate_state = GATE_MOVING;
        }
        break;
    case GATE_MOVING:
        if (gate_at_top()) {
            gate_motor(0);
            gate_state = GATE_OPEN;
        } else if (gate_at_bottom()) {
            gate_motor(0);
            gate_state = GATE_SHUT;
        }
        break;
    case GATE_OPEN:
        if (!feed_wanted()) {
            gate_motor(-1);
            gate_state = GATE_MOVING;
        }
        break;
    default:
        gate_motor(0);
        gate_state = GATE_SHUT;
        break;
    }
}

enum auger_state { AUGER_IDLE, AUGER_FEED, AUGER_RUNOUT };
enum alarm_code { ALARM_AUGER_BLOCKED = 20, ALARM_HOPPER_EMPTY };

struct auger {
    uint8_t state;
    uint8_t alarm;
};

void auger_poll(struct auger *a)
{
    switch (a->state) {
    case AUGER_IDLE:
        if (feed_wanted()) {
            auger_speed(100u);
            a->state = AUGER_FEED;
        }
        break;
    case AUGER_FEED:
        if (auger_overloaded()) {
            auger_speed(0u);
            a->alarm = ALARM_AUGER_BLOCKED;
            a->state = AUGER_RUNOUT;
        } else if (!feed_wanted()) {
            a->state = AUGER_RUNOUT;
        }
        break;
    case AUGER_RUNOUT:
        if (auger_pipe_empty()) {
            auger_speed(0u);
            a->state = AUGER_IDLE;
        }
        break;
    default:
        auger_speed(0u);
        a->state = AUGER_IDLE;
        break;
    }
}

static struct auger auger;

void auger_tick(void)
{
    auger_poll(&auger);
}

/* The beacon blinks twice while feed falls: lit, dark, lit, dark. */
void beacon_poll(void)
{
    static enum { LIT_FIRST, DARK_FIRST, LIT_SECOND, DARK_SECOND } step;

    switch (step) {
    case LIT_FIRST:
        beacon(true);
        step++;
        break;
    case DARK_FIRST:
        beacon(false);
        step++;
        break;
    case LIT_SECOND:
        beacon(true);
        step++;
        break;
    case DARK_SECOND:
        beacon(false);
        step = LIT_FIRST;
        break;
    default:
        step = LIT_FIRST;
        break;
    }
}
