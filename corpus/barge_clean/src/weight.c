#include "weight.h"

#include <stdbool.h>

#include "board.h"

#define RAW_SLOTS 12u
#define WINDOW_SLOTS 16u
#define FIR_TAPS 9u

#define GRAMS_PER_COUNT_SHIFT 1u
#define FIR_SHIFT 8

/* Between the converter's interrupt and the main loop; one slot stays empty. */
static volatile uint16_t raw[RAW_SLOTS];
static volatile uint8_t raw_head;
static volatile uint8_t raw_tail;
static volatile uint8_t raw_lost;

/* Mean over the last samples. */
static uint16_t window[WINDOW_SLOTS];
static uint8_t window_at;

/* Rate of change: a differentiating filter over a delay line. */
static const int16_t fir_taps[FIR_TAPS] = {28, 21, 14, 7, 0, -7, -14, -21, -28};

struct fir {
    int16_t line[FIR_TAPS];
    uint8_t newest;
};

static struct fir trend_filter;
static uint16_t grams;
static int16_t trend;

BOARD_ISR(weight_adc)
{
    const uint16_t counts = ADC_WEIGHT;
    const uint8_t head = raw_head;
    const uint8_t next = (uint8_t)((head + 1u) % RAW_SLOTS);

    if (next == raw_tail) {
        raw_lost++;
        return;
    }
    raw[head] = counts;
    raw_head = next;
}

static bool raw_take(uint16_t *counts)
{
    const uint8_t tail = raw_tail;

    if (tail == raw_head) {
        return false;
    }
    *counts = raw[tail];
    raw_tail = (uint8_t)((tail + 1u) % RAW_SLOTS);
    return true;
}

static uint16_t window_mean(uint16_t counts)
{
    uint32_t sum = 0u;

    window[window_at] = counts;
    if (++window_at >= sizeof window / sizeof window[0]) {
        window_at = 0u;
    }
    for (uint8_t i = 0u; i < WINDOW_SLOTS; i++) {
        sum += window[i];
    }
    return (uint16_t)(sum / WINDOW_SLOTS);
}

static int16_t fir_step(struct fir *f, int16_t sample)
{
    int32_t sum = 0;
    uint8_t at;

    /* The line runs downwards, so that walking up from the newest sample meets the older ones. */
    if (f->newest == 0u) {
        f->newest = FIR_TAPS;
    }
    f->newest--;
    f->line[f->newest] = sample;
    at = f->newest;
    for (uint8_t k = 0u; k < FIR_TAPS; k++) {
        sum += (int32_t)fir_taps[k] * f->line[at];
        if (++at >= FIR_TAPS) {
            at = 0u;
        }
    }
    return (int16_t)(sum / (1 << FIR_SHIFT));
}

void weight_poll(void)
{
    uint16_t counts;

    for (uint8_t n = 0u; n < RAW_SLOTS && raw_take(&counts); n++) {
        grams = (uint16_t)(window_mean(counts) >> GRAMS_PER_COUNT_SHIFT);
        trend = fir_step(&trend_filter, (int16_t)(counts >> GRAMS_PER_COUNT_SHIFT));
    }
}

uint16_t weight_grams(void)
{
    return grams;
}

/* Grams for each sample, positive while the hopper fills. */
int16_t weight_trend(void)
{
    return trend;
}

uint8_t weight_lost_samples(void)
{
    return raw_lost;
}
