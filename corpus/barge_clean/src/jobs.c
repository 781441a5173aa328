#include "jobs.h"

#include "barge.h"

#define JOB_SLOTS 4u
#define JOB_MASK (JOB_SLOTS - 1u)
#define SERVED_SLOTS 8u
#define SERVED_MASK (SERVED_SLOTS - 1u)

/* Both counters run freely; their difference is the number of jobs that wait. */
struct job_queue {
    uint16_t grams[JOB_SLOTS];
    uint8_t written;
    uint8_t read;
};

static struct job_queue queues[AUGERS];

/* The doses that were handed out last. */
static uint16_t served[SERVED_SLOTS];
static uint8_t served_at;

bool job_put(uint8_t channel, uint16_t grams)
{
    struct job_queue *q;

    if (channel >= AUGERS) {
        return false;
    }
    q = &queues[channel];
    if ((uint8_t)(q->written - q->read) >= JOB_SLOTS) {
        return false;
    }
    q->grams[q->written & JOB_MASK] = grams;
    q->written++;
    return true;
}

bool job_take(uint8_t channel, uint16_t *grams)
{
    struct job_queue *q;

    if (channel >= AUGERS) {
        return false;
    }
    q = &queues[channel];
    if (q->written == q->read) {
        return false;
    }
    *grams = q->grams[q->read & JOB_MASK];
    q->read++;
    served[served_at] = *grams;
    served_at = (served_at + 1u) & SERVED_MASK;
    return true;
}

uint8_t jobs_waiting(uint8_t channel)
{
    if (channel >= AUGERS) {
        return 0u;
    }
    return (uint8_t)(queues[channel].written - queues[channel].read);
}

uint32_t jobs_served_grams(void)
{
    uint32_t sum = 0u;

    for (uint8_t i = 0u; i < SERVED_SLOTS; i++) {
        sum += served[i];
    }
    return sum;
}
