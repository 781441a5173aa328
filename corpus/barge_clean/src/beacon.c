#include "beacon.h"

#include <stdint.h>

#include "alarm.h"
#include "barge.h"
#include "board.h"

#define LIT_TICKS 10u
#define DARK_TICKS 15u
#define PAUSE_TICKS (2u * TICKS_PER_SECOND)

void beacon_poll(void)
{
    static uint8_t phase; /* 0 no alarm, 1 lit, 2 dark, 3 pause before a new alarm */
    static uint8_t ticks;

    ticks++;
    switch (phase) {
    case 0:
        ticks = 0u;
        if (alarm_is_active()) {
            beacon_lamp(true);
            phase = 1;
        }
        break;
    case 1:
        if (ticks >= LIT_TICKS) {
            beacon_lamp(false);
            ticks = 0u;
            phase = 2;
        }
        break;
    case 2:
        if (ticks >= DARK_TICKS) {
            ticks = 0u;
            beacon_lamp(alarm_is_active());
            phase = alarm_is_active() ? 1 : 3;
        }
        break;
    case 3:
        if (ticks >= PAUSE_TICKS) {
            phase = 0;
        }
        break;
    default:
        beacon_lamp(false);
        phase = 0;
        break;
    }
}
