#include "alarm.h"

#include "barge.h"
#include "board.h"
#include "trace.h"

#define PENDING_TICKS (2u * TICKS_PER_SECOND)
#define SOUND_TICKS (60u * TICKS_PER_SECOND)
#define MUTE_TICKS (300u * TICKS_PER_SECOND)
#define REPEATS 3u

enum { HORN_QUIET, HORN_PENDING, HORN_SOUNDING, HORN_MUTED };

static struct {
    unsigned state : 3;
    unsigned repeats : 5;
    unsigned code : 8;
    unsigned ticks : 16;
} alarm_now;

void alarm_raise(uint8_t code)
{
    trace_note(code);
    if (alarm_now.state == HORN_QUIET) {
        alarm_now.code = code;
        alarm_now.repeats = 0u;
        alarm_now.ticks = 0u;
        alarm_now.state = HORN_PENDING;
    }
}

void alarm_mute(void)
{
    if (alarm_now.state == HORN_SOUNDING) {
        horn(false);
        alarm_now.ticks = 0u;
        alarm_now.state = HORN_MUTED;
    }
}

bool alarm_is_active(void)
{
    return alarm_now.state != HORN_QUIET;
}

void alarm_poll(void)
{
    if (alarm_now.ticks < UINT16_MAX) {
        alarm_now.ticks++;
    }
    switch (alarm_now.state) {
    case HORN_QUIET:
        break;
    case HORN_SOUNDING:
        if (alarm_now.ticks >= SOUND_TICKS) {
            horn(false);
            alarm_now.ticks = 0u;
            alarm_now.state = HORN_MUTED;
        }
        break;
    case HORN_MUTED:
        if (alarm_now.ticks < MUTE_TICKS) {
            break;
        }
        if (alarm_now.repeats >= REPEATS) {
            trace_note((uint8_t)alarm_now.code);
            alarm_now.state = HORN_QUIET;
            break;
        }
        alarm_now.repeats++;
        alarm_now.ticks = PENDING_TICKS;
        /* falls through */
    case HORN_PENDING:
        if (alarm_now.ticks >= PENDING_TICKS) {
            horn(true);
            alarm_now.ticks = 0u;
            alarm_now.state = HORN_SOUNDING;
        }
        break;
    default:
        horn(false);
        alarm_now.state = HORN_QUIET;
        break;
    }
}
