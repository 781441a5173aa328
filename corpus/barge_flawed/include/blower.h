/* The blower carries pellets through the pipe to the cage. */
#ifndef BLOWER_H
#define BLOWER_H

#include <stdbool.h>

void blower_request(bool wanted);
void blower_poll(void);

#endif
