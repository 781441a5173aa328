/* Frames on the shore link: start, code, channel, value high, value low, check sum. */
#ifndef LINK_H
#define LINK_H

#include <stdint.h>

uint8_t link_frames(void);
uint8_t link_refused(void);

#endif
