/* The augers that push pellets from the hopper into the air pipe. */
#ifndef AUGER_H
#define AUGER_H

#include <stdbool.h>

void auger_poll(void);
void auger_hold(bool hold);

#endif
