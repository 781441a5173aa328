/* The hopper is refilled through the gate when its weight falls. */
#ifndef HOPPER_H
#define HOPPER_H

void hopper_poll(void);

#endif
