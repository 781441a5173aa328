/* The hopper gate and the augers of the feed barge. The code for a jammed gate and for clearing an auger is
 * written, but nothing ever stores the state that would lead there. */
#include <stdbool.h>
#include <stdint.h>

#define AUGERS 3u

extern void gate_motor(int direction);
extern bool gate_at_top(void);
extern bool gate_at_bottom(void);
extern bool feed_wanted(void);
extern void auger_speed(uint8_t channel, int percent);
extern bool auger_overloaded(uint8_t channel);
extern bool auger_done(uint8_t channel);

enum gate_state { GATE_SHUT, GATE_RISING, GATE_OPEN, GATE_FALLING, GATE_JAMMED };

static enum gate_state gate_state = GATE_SHUT;
static uint16_t gate_ticks;

void gate_poll(void)
{
    switch (gate_state) {
    case GATE_SHUT:
        if (feed_wanted()) {
            gate_motor(1);
            gate_ticks = 400u;
            gate_state = GATE_RISING;
        }
        break;
    case GATE_RISING:
        if (gate_at_top()) {
            gate_motor(0);
            gate_ticks = 6000u;
            gate_state = GATE_OPEN;
        } else if (--gate_ticks == 0u) {
            gate_motor(0);
            gate_state = GATE_SHUT;
        }
        break;
    case GATE_OPEN:
        if (!feed_wanted() || --gate_ticks == 0u) {
            gate_motor(-1);
            gate_ticks = 400u;
            gate_state = GATE_FALLING;
        }
        break;
    case GATE_FALLING:
        if (gate_at_bottom() || --gate_ticks == 0u) {
            gate_motor(0);
            gate_state = GATE_SHUT;
        }
        break;
    case GATE_JAMMED: /* finding: SM03 */
        if (--gate_ticks == 0u) {
            gate_motor(-1);
            gate_ticks = 400u;
            gate_state = GATE_FALLING;
        }
        break;
    default:
        gate_motor(0);
        gate_state = GATE_SHUT;
        break;
    }
}

#define AUGER_IDLE 0u
#define AUGER_FEED 1u
#define AUGER_CLEAR 2u

static struct {
    uint8_t state;
    uint8_t reverse_ticks;
} augers[AUGERS];

void augers_poll(void)
{
    for (uint8_t n = 0u; n < AUGERS; n++) {
        switch (augers[n].state) {
        case AUGER_IDLE:
            if (feed_wanted()) {
                auger_speed(n, 100);
                augers[n].state = AUGER_FEED;
            }
            break;
        case AUGER_FEED:
            if (auger_overloaded(n)) {
                auger_speed(n, -30);
                augers[n].reverse_ticks = 10u;
                augers[n].state = AUGER_IDLE;
            } else if (auger_done(n)) {
                auger_speed(n, 0);
                augers[n].state = AUGER_IDLE;
            }
            break;
        case AUGER_CLEAR: /* finding: SM03 */
            if (augers[n].reverse_ticks > 0u) {
                augers[n].reverse_ticks--;
            } else {
                auger_speed(n, 0);
                augers[n].state = AUGER_IDLE;
            }
            break;
        default:
            auger_speed(n, 0);
            augers[n].state = AUGER_IDLE;
            break;
        }
    }
}
