#include "pump.h"

#include <stdbool.h>
#include <stdint.h>

#include "alarm.h"
#include "barge.h"
#include "board.h"

#define PRIME_LIMIT_TICKS (4u * TICKS_PER_SECOND)
#define RINSE_TICKS (45u * TICKS_PER_SECOND)

typedef enum { PUMP_OFF, PUMP_PRIME, PUMP_RINSE } pump_state_t;

static pump_state_t pump_state = PUMP_OFF;
static uint16_t pump_ticks;
static bool rinse_wanted;

void pump_request_rinse(void)
{
    rinse_wanted = true;
}

/* Three states do not need a switch. */
void pump_poll(void)
{
    if (pump_ticks < UINT16_MAX) {
        pump_ticks++;
    }
    if (pump_state == PUMP_OFF) {
        if (rinse_wanted) {
            rinse_wanted = false;
            rinse_pump(true);
            pump_ticks = 0u;
            pump_state = PUMP_PRIME;
        }
    } else if (pump_state == PUMP_PRIME) {
        if (rinse_pressure()) {
            pump_ticks = 0u;
            pump_state = PUMP_RINSE;
        } else if (pump_ticks >= PRIME_LIMIT_TICKS) {
            rinse_pump(false);
            alarm_raise(ALARM_PUMP_DRY);
            pump_state = PUMP_OFF;
        }
    } else if (pump_state == PUMP_RINSE) {
        if (pump_ticks >= RINSE_TICKS) {
            rinse_pump(false);
            pump_state = PUMP_OFF;
        }
    } else {
        rinse_pump(false);
        alarm_raise(ALARM_BAD_STATE);
        pump_state = PUMP_OFF;
    }
}
