/* The same machines of the feed barge with the code where it runs. */
#include <stdbool.h>
#include <stdint.h>

extern void gate_motor(int direction);
extern bool gate_at_top(void);
extern bool gate_at_bottom(void);
extern bool feed_wanted(void);
extern void watch_kick(void);
extern void auger_speed(uint8_t percent);
extern bool auger_overloaded(void);
extern void alarm_raise(uint8_t code);
extern bool link_alive(void);

enum gate_state { GATE_SHUT, GATE_RISING, GATE_FALLING };

static enum gate_state gate_state = GATE_SHUT;

void gate_poll(void)
{
    watch_kick();
    switch (gate_state) {
    case GATE_SHUT:
        if (feed_wanted()) {
            gate_motor(1);
            gate_state = GATE_RISING;
        }
        break;
    case GATE_RISING:
        if (gate_at_top()) {
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

struct auger {
    uint8_t state;
};

void auger_poll(struct auger *a)
{
    switch (a->state) {
    case 0:
        if (feed_wanted()) {
            auger_speed(100u);
            a->state = 1;
        }
        break;
    case 1:
        if (auger_overloaded()) {
            auger_speed(0u);
            alarm_raise(3u);
            a->state = 2;
        }
        break;
    case 2:
        if (!auger_overloaded()) {
            a->state = 0;
        }
        break;
    default:
        auger_speed(0u);
        a->state = 0;
        break;
    }
}

static struct auger auger;

void auger_tick(void)
{
    auger_poll(&auger);
}

#define LINK_DOWN 0x00
#define LINK_UP 0x01
#define LINK_LOST 0x02

static uint8_t link_state = LINK_DOWN;

void link_poll(void)
{
    switch (link_state) {
    case LINK_DOWN:
        if (link_alive()) {
            link_state = LINK_UP;
        }
        break;
    case LINK_UP:
        if (!link_alive()) {
            alarm_raise(7u);
            link_state = LINK_LOST;
        }
        break;
    case LINK_LOST: link_state = LINK_DOWN;
        break;
    default:
        link_state = LINK_DOWN;
        break;
    }
}
