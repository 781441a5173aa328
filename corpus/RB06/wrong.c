/* Buffers of the feed barge whose wrap uses another number than their storage has slots: the size in bytes, and
 * the size of the buffer next to it, once too large and once too small. */
#include <stdint.h>

#define WEIGHT_SLOTS 8u
#define COMMAND_SLOTS 16u
#define ALARM_SLOTS 6u

static uint16_t weights[WEIGHT_SLOTS];
static uint8_t weight_head;

void weight_put(uint16_t grams)
{
    weights[weight_head] = grams;
    if (++weight_head >= sizeof weights) { /* finding: RB06 */
        weight_head = 0;
    }
}

uint32_t weight_sum(void)
{
    uint32_t sum = 0;

    for (uint8_t i = 0; i < WEIGHT_SLOTS; i++) {
        sum += weights[i];
    }
    return sum;
}

struct shore_log {
    uint8_t command[COMMAND_SLOTS];
    uint8_t command_head;
    uint8_t alarm[ALARM_SLOTS];
    uint8_t alarm_head;
};

void log_command(struct shore_log *log, uint8_t code)
{
    log->command[log->command_head] = code;
    log->command_head = (uint8_t)((log->command_head + 1u) % ALARM_SLOTS); /* finding: RB06 */
}

void log_alarm(struct shore_log *log, uint8_t code)
{
    log->alarm[log->alarm_head] = code;
    log->alarm_head = (log->alarm_head + 1u < COMMAND_SLOTS) ? log->alarm_head + 1u : 0u; /* finding: RB06 */
}

uint8_t log_count_of(const struct shore_log *log, uint8_t code)
{
    uint8_t count = 0;

    for (uint8_t i = 0; i < COMMAND_SLOTS; i++) {
        if (log->command[i] == code) {
            count++;
        }
    }
    for (uint8_t i = 0; i < ALARM_SLOTS; i++) {
        if (log->alarm[i] == code) {
            count++;
        }
    }
    return count;
}

static struct shore_log shore_log;

void shore_command(uint8_t code)
{
    log_command(&shore_log, code);
}

void shore_alarm(uint8_t code)
{
    log_alarm(&shore_log, code);
}

uint8_t shore_count_of(uint8_t code)
{
    return log_count_of(&shore_log, code);
}
