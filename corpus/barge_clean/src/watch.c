#include "watch.h"

#include <stdbool.h>
#include <stdint.h>

#include "alarm.h"
#include "auger.h"
#include "barge.h"
#include "link.h"
#include "trace.h"

#define STALE_TICKS (5u * TICKS_PER_SECOND)
#define LOST_TICKS (30u * TICKS_PER_SECOND)
#define REMIND_TICKS (120u * TICKS_PER_SECOND)

enum link_state { LINK_UP, LINK_STALE, LINK_LOST };

static enum link_state link_state = LINK_UP;
static uint8_t frames_seen;
static uint16_t quiet_ticks;

void watch_poll(void)
{
    const uint8_t frames = link_frames();
    const bool fresh = frames != frames_seen;

    frames_seen = frames;
    quiet_ticks++;
    switch (link_state) {
    case LINK_UP:
        if (fresh) {
            quiet_ticks = 0u;
        } else if (quiet_ticks >= STALE_TICKS) {
            quiet_ticks = 0u;
            link_state = LINK_STALE;
        }
        break;
    case LINK_STALE:
        if (fresh) {
            quiet_ticks = 0u;
            auger_hold(false);
            link_state = LINK_UP;
            break;
        }
        if (quiet_ticks >= LOST_TICKS) {
            quiet_ticks = 0u;
            alarm_raise(ALARM_LINK_LOST);
            link_state = LINK_LOST;
            break;
        }
        if (quiet_ticks % TICKS_PER_SECOND == 0u) {
            trace_note(0x50u);
        }
        break;
    case LINK_LOST:
        auger_hold(true);
        if (fresh) {
            quiet_ticks = 0u;
            auger_hold(false);
            link_state = LINK_UP;
        } else if (quiet_ticks >= REMIND_TICKS) {
            quiet_ticks = 0u;
            link_state = LINK_STALE;
        }
        break;
    default:
        alarm_raise(ALARM_BAD_STATE);
        quiet_ticks = 0u;
        link_state = LINK_UP;
        break;
    }
}
