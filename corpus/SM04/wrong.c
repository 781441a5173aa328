/* The water pump and an auger of the feed barge. The pump stays in REFILL once it is there; the auger goes
 * to and fro between PRIME and SETTLE and never feeds. */
#include <stdbool.h>
#include <stdint.h>

extern void pump_run(bool on);
extern void inlet_valve(bool open);
extern uint16_t tank_litres(void);
extern bool rinse_wanted(void);
extern void auger_speed(uint8_t percent);
extern bool auger_has_pellets(void);
extern bool dose_wanted(void);
extern bool dose_done(void);

enum pump_state { PUMP_IDLE, PUMP_RINSE, PUMP_REFILL };

static enum pump_state pump_state = PUMP_IDLE;

void pump_poll(void)
{
    switch (pump_state) {
    case PUMP_IDLE:
        if (rinse_wanted()) {
            pump_run(true);
            pump_state = PUMP_RINSE;
        }
        break;
    case PUMP_RINSE:
        if (tank_litres() < 20u) {
            pump_run(false);
            inlet_valve(true);
            pump_state = PUMP_REFILL;
        } else if (!rinse_wanted()) {
            pump_run(false);
            pump_state = PUMP_IDLE;
        }
        break;
    case PUMP_REFILL: /* finding: SM04 */
        if (tank_litres() > 180u) {
            inlet_valve(false);
        }
        break;
    default:
        pump_run(false);
        inlet_valve(false);
        pump_state = PUMP_IDLE;
        break;
    }
}

#define AUGER_IDLE 0u
#define AUGER_PRIME 1u
#define AUGER_SETTLE 2u
#define AUGER_FEED 3u

struct auger {
    uint8_t state;
    uint8_t ticks;
};

static void auger_step(struct auger *a)
{
    switch (a->state) {
    case AUGER_IDLE:
        if (auger_has_pellets() && dose_wanted()) {
            auger_speed(100u);
            a->ticks = 200u;
            a->state = AUGER_FEED;
        } else if (dose_wanted()) {
            auger_speed(20u);
            a->ticks = 50u;
            a->state = AUGER_PRIME;
        }
        break;
    case AUGER_PRIME: /* finding: SM04 */
        if (--a->ticks == 0u) {
            auger_speed(0u);
            a->ticks = 10u;
            a->state = AUGER_SETTLE;
        }
        break;
    case AUGER_SETTLE:
        if (--a->ticks == 0u) {
            auger_speed(20u);
            a->ticks = 50u;
            a->state = AUGER_PRIME;
        }
        break;
    case AUGER_FEED:
        if (dose_done() || --a->ticks == 0u) {
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

void auger_poll(void)
{
    static struct auger auger = {AUGER_IDLE, 0u};

    auger_step(&auger);
}
