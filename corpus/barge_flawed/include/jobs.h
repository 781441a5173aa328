/* Doses that wait for an auger, one short queue for each. */
#ifndef JOBS_H
#define JOBS_H

#include <stdbool.h>
#include <stdint.h>

bool job_put(uint8_t channel, uint16_t grams);
bool job_take(uint8_t channel, uint16_t *grams);
uint8_t jobs_waiting(uint8_t channel);
uint32_t jobs_served_grams(void);

#endif
