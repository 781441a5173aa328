#include "sched.h"

#include <stddef.h>
#include <stdint.h>

#include "alarm.h"
#include "auger.h"
#include "barge.h"
#include "beacon.h"
#include "blower.h"
#include "board.h"
#include "feedlog.h"
#include "gate.h"
#include "hopper.h"
#include "pump.h"
#include "watch.h"

struct task {
    void (*run)(void);
    uint16_t every;
    uint16_t wait;
};

static struct task tasks[] = {
    {hopper_poll, 1u, 0u},
    {gate_poll, 1u, 0u},
    {auger_poll, 1u, 0u},
    {blower_poll, 1u, 0u},
    {pump_poll, 1u, 0u},
    {watch_poll, 1u, 0u},
    {alarm_poll, 1u, 0u},
    {beacon_poll, 1u, 0u},
    {feedlog_minute, 60u * TICKS_PER_SECOND, 60u * TICKS_PER_SECOND},
};

/* The interrupt counts up, the main loop follows. */
static volatile uint8_t ticks;
static uint8_t ticks_done;

BOARD_ISR(tick)
{
    ticks++;
}

bool sched_tick_due(void)
{
    if (ticks_done == ticks) {
        return false;
    }
    ticks_done++;
    return true;
}

void sched_run_tasks(void)
{
    for (size_t i = 0u; i < sizeof tasks / sizeof tasks[0]; i++) {
        if (tasks[i].wait > 0u) {
            tasks[i].wait--;
        }
        if (tasks[i].wait == 0u) {
            tasks[i].wait = tasks[i].every;
            tasks[i].run();
        }
    }
}
