/* The gate between the silo and the hopper. */
#ifndef GATE_H
#define GATE_H

#include <stdbool.h>

void gate_request(bool open);
void gate_poll(void);
bool gate_lets_pellets_through(void);

#endif
