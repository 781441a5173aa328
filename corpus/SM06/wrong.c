/* The water pump and an auger of the feed barge. One case of each lacks its break, so the code of the next state
 * runs as well: the pump is switched off while it primes, the auger counts pellets before it turns. */
#include <stdbool.h>
#include <stdint.h>

extern void pump_run(bool on);
extern bool pump_has_pressure(void);
extern bool rinse_wanted(void);
extern void auger_speed(uint8_t percent);
extern bool auger_turns(void);
extern void pellets_count(void);
extern void telemetry_note(uint8_t code);

typedef enum { PUMP_OFF, PUMP_PRIMING, PUMP_RUNNING } pump_state_t;

struct pump {
    pump_state_t state;
    uint8_t ticks;
};

void pump_poll(struct pump *p)
{
    switch (p->state) {
    case PUMP_OFF:
        if (rinse_wanted()) {
            pump_run(true);
            p->ticks = 100u;
            p->state = PUMP_PRIMING;
        }
        break;
    case PUMP_PRIMING:
        if (pump_has_pressure()) {
            p->ticks = 250u;
            p->state = PUMP_RUNNING;
            break;
        }
        p->ticks--;
        telemetry_note(p->ticks);
    case PUMP_RUNNING: /* finding: SM06 */
        if (p->ticks == 0u || !pump_has_pressure()) {
            pump_run(false);
            p->state = PUMP_OFF;
        } else {
            p->ticks--;
        }
        break;
    default:
        pump_run(false);
        p->state = PUMP_OFF;
        break;
    }
}

static struct pump rinse_pump;

void rinse_pump_tick(void)
{
    pump_poll(&rinse_pump);
}

#define AUGER_IDLE 0u
#define AUGER_STARTING 1u
#define AUGER_FEEDING 2u

static uint8_t auger_state = AUGER_IDLE;
static bool dose_wanted;

void auger_request(bool wanted)
{
    dose_wanted = wanted;
}

void auger_poll(void)
{
    switch (auger_state) {
    case AUGER_IDLE:
        if (dose_wanted) {
            auger_speed(60u);
            auger_state = AUGER_STARTING;
        }
        break;
    case AUGER_STARTING:
        if (auger_turns()) {
            auger_state = AUGER_FEEDING;
            break;
        }
        auger_speed(100u);
    case AUGER_FEEDING: /* finding: SM06 */
        pellets_count();
        if (!dose_wanted) {
            auger_speed(0u);
            auger_state = AUGER_IDLE;
        }
        break;
    default:
        auger_speed(0u);
        auger_state = AUGER_IDLE;
        break;
    }
}
