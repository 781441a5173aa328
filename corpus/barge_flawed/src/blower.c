#include "blower.h"

#include <stdint.h>

#include "alarm.h"
#include "barge.h"
#include "board.h"

#define RUN_RPM 2200u
#define SPINUP_LIMIT_TICKS (6u * TICKS_PER_SECOND)
#define RUN_LIMIT_TICKS (900u * TICKS_PER_SECOND)
#define PURGE_TICKS (20u * TICKS_PER_SECOND)
#define COOL_TICKS (10u * TICKS_PER_SECOND)

enum blower_state { BLOWER_OFF, BLOWER_SPINUP, BLOWER_RUN, BLOWER_PURGE, BLOWER_COOL };

static struct {
    enum blower_state state;
    uint16_t ticks;
    bool wanted;
} blower;

void blower_request(bool wanted)
{
    blower.wanted = wanted;
}

void blower_poll(void)
{
    enum blower_state next = blower.state;

    switch (blower.state) {
    case BLOWER_OFF:
        if (blower.wanted) {
            fan_percent(40u);
            next = BLOWER_SPINUP;
        }
        break;
    case BLOWER_SPINUP:
        if (fan_rpm() > RUN_RPM) {
            fan_percent(75u);
            next = BLOWER_RUN;
        } else if (blower.ticks >= SPINUP_LIMIT_TICKS) {
            fan_percent(0u);
            alarm_raise(ALARM_FAN_SLOW);
            next = BLOWER_COOL;
        }
        break;
    case BLOWER_RUN:
        if (!blower.wanted || blower.ticks >= RUN_LIMIT_TICKS) {
            blower.wanted = false;
            fan_percent(100u);
            next = BLOWER_PURGE;
        }
        break;
    case BLOWER_PURGE: /* finding: SM04 */
        if (blower.ticks >= PURGE_TICKS) {
            fan_percent(0u);
        }
        break;
    case BLOWER_COOL:
        if (blower.ticks >= COOL_TICKS) {
            next = BLOWER_OFF;
        }
        break;
    default:
        fan_percent(0u);
        alarm_raise(ALARM_BAD_STATE);
        next = BLOWER_OFF;
        break;
    }
    if (next != blower.state) {
        blower.ticks = 0u;
    } else if (blower.ticks < UINT16_MAX) {
        blower.ticks++;
    }
    blower.state = next;
}
