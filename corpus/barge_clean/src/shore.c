#include "shore.h"

#include <stdint.h>

#include "alarm.h"
#include "auger.h"
#include "blower.h"
#include "commands.h"
#include "feedlog.h"
#include "jobs.h"
#include "link.h"
#include "pump.h"
#include "telemetry.h"
#include "trace.h"
#include "weight.h"

static void report(void)
{
    (void)telemetry_record(0x90u, weight_grams());
    (void)telemetry_record(0x91u, (uint16_t)weight_trend());
    (void)telemetry_record(0x92u, weight_lost_samples());
    (void)telemetry_record(0x93u, (uint16_t)(feedlog_five_hours() / 1000u));
    (void)telemetry_record(0x94u, (uint16_t)(feedlog_hour_before_last() / 1000u));
    (void)telemetry_record(0x95u, (uint16_t)(jobs_served_grams() / 1000u));
    (void)telemetry_record(0x96u, jobs_waiting(0u));
    (void)telemetry_record(0x97u, trace_recent(0u));
    (void)telemetry_record(0x98u, link_refused());
}

void shore_poll(void)
{
    struct command c;

    if (!command_take(&c)) {
        return;
    }
    switch (c.code) {
    case COMMAND_FEED:
        if (!job_put(c.channel, c.value)) {
            trace_note(0x20u);
        }
        break;
    case COMMAND_STOP:
        auger_hold(true);
        /* falls through */
    case COMMAND_RINSE:
        blower_request(false);
        pump_request_rinse();
        break;
    case COMMAND_MUTE:
        alarm_mute();
        break;
    case COMMAND_HOLD:
        auger_hold(c.value != 0u);
        break;
    case COMMAND_REPORT:
        report();
        break;
    default:
        trace_note(0x21u);
        break;
    }
}
