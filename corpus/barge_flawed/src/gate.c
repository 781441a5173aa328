#include "gate.h"

#include <stdint.h>

#include "alarm.h"
#include "barge.h"
#include "board.h"

#define GATE_SHUT 0u
#define GATE_RISING 1u
#define GATE_OPEN 2u
#define GATE_FALLING 3u
#define GATE_JAMMED 4u

#define TRAVEL_TICKS (8u * TICKS_PER_SECOND)
#define OPEN_LIMIT_TICKS (300u * TICKS_PER_SECOND)
#define JAM_PAUSE_TICKS (30u * TICKS_PER_SECOND)

static uint8_t gate_state = GATE_SHUT;
static uint16_t gate_ticks;
static bool open_wanted;

void gate_request(bool open)
{
    open_wanted = open;
}

void gate_poll(void)
{
    switch (gate_state) {
    case GATE_SHUT:
        if (open_wanted) {
            gate_motor(1);
            gate_ticks = TRAVEL_TICKS;
            gate_state = GATE_RISING;
        }
        break;
    case GATE_RISING:
        if (gate_at_top()) {
            gate_motor(0);
            gate_ticks = OPEN_LIMIT_TICKS;
            gate_state = GATE_OPEN;
        } else if (gate_ticks > 0u) {
            gate_ticks--;
        } else {
            gate_motor(0);
            alarm_raise(ALARM_GATE_JAM);
            gate_ticks = JAM_PAUSE_TICKS;
            gate_state = ALARM_GATE_JAM; /* finding: SM05 */
        }
        break;
    case GATE_OPEN:
        if (open_wanted && gate_ticks > 0u) {
            gate_ticks--;
        } else {
            gate_motor(-1);
            gate_ticks = TRAVEL_TICKS;
            gate_state = GATE_FALLING;
        }
        break;
    case GATE_FALLING:
        if (gate_at_bottom()) {
            gate_motor(0);
            open_wanted = false;
            gate_state = GATE_SHUT;
        } else if (gate_ticks > 0u) {
            gate_ticks--;
        } else {
            gate_motor(0);
            alarm_raise(ALARM_GATE_JAM);
            gate_ticks = JAM_PAUSE_TICKS;
            gate_state = GATE_JAMMED;
        }
        break;
    case GATE_JAMMED:
        if (gate_ticks > 0u) {
            gate_ticks--;
        } else {
            gate_motor(-1);
            gate_ticks = TRAVEL_TICKS;
            gate_state = GATE_FALLING;
        }
        break;
    default:
        gate_motor(0);
        gate_state = GATE_SHUT;
        break;
    }
}

/* A jammed gate may stand anywhere, so it counts as open. */
bool gate_lets_pellets_through(void)
{
    switch (gate_state) {
    case GATE_SHUT:
        return false;
    case GATE_RISING:
    case GATE_OPEN:
    case GATE_FALLING:
    case GATE_JAMMED:
        return true;
    default:
        alarm_raise(ALARM_BAD_STATE);
        return true;
    }
}
