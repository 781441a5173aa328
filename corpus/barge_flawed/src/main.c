#include "board.h"
#include "feedlog.h"
#include "sched.h"
#include "shore.h"
#include "telemetry.h"
#include "weight.h"

int main(void)
{
    board_start();
    feedlog_skip_hours(board_hours_off());
    for (;;) {
        weight_poll();
        shore_poll();
        telemetry_poll();
        if (sched_tick_due()) {
            sched_run_tasks();
        }
        board_watchdog_kick();
    }
}
