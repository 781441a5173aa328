/* Hopper weight: samples from the converter's interrupt, smoothed in the main loop. */
#ifndef WEIGHT_H
#define WEIGHT_H

#include <stdint.h>

void weight_poll(void);
uint16_t weight_grams(void);
int16_t weight_trend(void);
uint8_t weight_lost_samples(void);

#endif
