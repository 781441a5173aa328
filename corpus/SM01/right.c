/* The hopper gate and an auger of the feed barge. A value that is no state stops the motor and starts over. */
#include <stdbool.h>
#include <stdint.h>

extern void gate_motor(int direction);
extern bool gate_at_top(void);
extern bool gate_at_bottom(void);
extern bool feed_wanted(void);
extern void auger_speed(uint8_t channel, uint8_t percent);
extern uint16_t hopper_grams(void);

typedef enum { GATE_SHUT, GATE_RISING, GATE_OPEN, GATE_FALLING } gate_state_t;

static gate_state_t gate_state = GATE_SHUT;

void gate_poll(void)
{
    switch (gate_state) {
    case GATE_SHUT:
        if (feed_wanted()) {
            gate_motor(1);
            gate_state = GATE_RISING;
        }
        break;
    case GATE_RISING:
        if (gate_at_top()) {
            gate_motor(0);
            gate_state = GATE_OPEN;
        }
        break;
    case GATE_OPEN:
        if (!feed_wanted()) {
            gate_motor(-1);
            gate_state = GATE_FALLING;
        }
        break;
    case GATE_FALLING:
        if (gate_at_bottom()) {
            gate_motor(0);
            gate_state = GATE_SHUT;
        }
        break;
    default:
        gate_motor(0);
        gate_state = GATE_SHUT;
        break;
    }
}

#define AUGER_OFF 0u
#define AUGER_PRIME 1u
#define AUGER_FEED 2u

struct auger {
    uint8_t channel;
    uint8_t state;
    uint16_t target;
};

void auger_poll(struct auger *a)
{
    switch (a->state) {
    case AUGER_OFF:
        if (a->target > 0u) {
            auger_speed(a->channel, 20u);
            a->state = AUGER_PRIME;
        }
        break;
    case AUGER_PRIME:
        if (hopper_grams() > 50u) {
            auger_speed(a->channel, 100u);
            a->state = AUGER_FEED;
        }
        break;
    case AUGER_FEED:
        if (hopper_grams() >= a->target) {
            auger_speed(a->channel, 0u);
            a->target = 0u;
            a->state = AUGER_OFF;
        }
        break;
    default:
        auger_speed(a->channel, 0u);
        a->state = AUGER_OFF;
        break;
    }
}

#define AUGERS 3u

static struct auger augers[AUGERS] = {{.channel = 0u}, {.channel = 1u}, {.channel = 2u}};

void auger_order(uint8_t channel, uint16_t grams)
{
    if (channel < AUGERS) {
        augers[channel].target = grams;
    }
}

void augers_poll(void)
{
    for (uint8_t n = 0u; n < AUGERS; n++) {
        auger_poll(&augers[n]);
    }
}
