/* The hopper and the transport blower of the feed barge: every state that is entered has a case of its own. */
#include <stdbool.h>
#include <stdint.h>

extern uint16_t hopper_grams(void);
extern bool hopper_flows(void);
extern void hopper_shaker(bool on);
extern void slide_open(bool open);
extern void blower_percent(uint8_t percent);
extern uint16_t blower_rpm(void);
extern bool feed_wanted(void);
extern bool pipe_is_clear(void);

typedef enum { HOPPER_IDLE, HOPPER_FILLING, HOPPER_BRIDGED, HOPPER_READY } hopper_state_t;

struct hopper {
    hopper_state_t state;
    uint16_t wanted_grams;
};

void hopper_poll(struct hopper *h)
{
    switch (h->state) {
    case HOPPER_IDLE:
        if (h->wanted_grams > 0u) {
            slide_open(true);
            h->state = HOPPER_FILLING;
        }
        break;
    case HOPPER_FILLING:
        if (hopper_grams() >= h->wanted_grams) {
            slide_open(false);
            h->state = HOPPER_READY;
        } else if (!hopper_flows()) {
            h->state = HOPPER_BRIDGED;
        }
        break;
    case HOPPER_BRIDGED:
        hopper_shaker(true);
        if (hopper_flows()) {
            hopper_shaker(false);
            h->state = HOPPER_FILLING;
        }
        break;
    case HOPPER_READY:
        if (hopper_grams() == 0u) {
            h->wanted_grams = 0u;
            h->state = HOPPER_IDLE;
        }
        break;
    default:
        hopper_shaker(false);
        slide_open(false);
        h->state = HOPPER_IDLE;
        break;
    }
}

static struct hopper hopper;

void hopper_order(uint16_t grams)
{
    hopper.wanted_grams = grams;
}

void hopper_tick(void)
{
    hopper_poll(&hopper);
}

#define BLOWER_OFF 0u
#define BLOWER_SPINUP 1u
#define BLOWER_RUN 2u
#define BLOWER_CLEAR 3u

static uint8_t blower_state = BLOWER_OFF;

void blower_poll(void)
{
    switch (blower_state) {
    case BLOWER_OFF:
        if (feed_wanted()) {
            blower_percent(40u);
            blower_state = BLOWER_SPINUP;
        }
        break;
    case BLOWER_SPINUP:
        if (blower_rpm() > 2000u) {
            blower_percent(80u);
            blower_state = BLOWER_RUN;
        }
        break;
    case BLOWER_RUN:
        if (!feed_wanted()) {
            blower_percent(100u);
            blower_state = BLOWER_CLEAR;
        }
        break;
    case BLOWER_CLEAR:
        if (pipe_is_clear()) {
            blower_percent(0u);
            blower_state = BLOWER_OFF;
        }
        break;
    default:
        blower_percent(0u);
        blower_state = BLOWER_OFF;
        break;
    }
}
