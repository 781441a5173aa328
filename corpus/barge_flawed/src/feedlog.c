#include "feedlog.h"

#define MINUTE_SLOTS 300u
#define HOUR_SLOTS 24u
#define MINUTES_PER_HOUR 60u

static uint16_t minutes[MINUTE_SLOTS];
static uint8_t minute_at;
static uint16_t this_minute;

static uint32_t hours[HOUR_SLOTS];
static uint8_t hour_at; /* the hour that is running */
static uint32_t this_hour;
static uint8_t minute_of_hour;

void feedlog_add(uint16_t grams)
{
    this_minute += grams;
    this_hour += grams;
}

static void next_hour(void)
{
    hour_at += 1u;
    if (hour_at >= HOUR_SLOTS) {
        hour_at -= HOUR_SLOTS;
    }
}

void feedlog_minute(void)
{
    minutes[minute_at] = this_minute;
    minute_at = (minute_at + 1u) % MINUTE_SLOTS; /* finding: RB07 */
    this_minute = 0u;
    if (++minute_of_hour < MINUTES_PER_HOUR) {
        return;
    }
    minute_of_hour = 0u;
    hours[hour_at] = this_hour;
    this_hour = 0u;
    next_hour();
}

/* After a power cut: the hours that passed are logged as empty. */
void feedlog_skip_hours(uint8_t passed)
{
    for (uint8_t n = 0u; n < passed && n < HOUR_SLOTS; n++) {
        hours[hour_at] = 0u;
        next_hour();
    }
}

uint32_t feedlog_five_hours(void)
{
    uint32_t sum = 0u;

    for (uint16_t i = 0u; i < MINUTE_SLOTS; i++) {
        sum += minutes[i];
    }
    return sum;
}

uint32_t feedlog_hour_before_last(void)
{
    uint8_t at = hour_at;

    at -= 2u;
    return hours[at]; /* finding: RB02 */
}
