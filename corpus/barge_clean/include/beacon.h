/* The lamp on the roof flashes while an alarm is active. */
#ifndef BEACON_H
#define BEACON_H

void beacon_poll(void);

#endif
