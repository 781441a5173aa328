/* Carries out the commands that shore has sent. */
#ifndef SHORE_H
#define SHORE_H

void shore_poll(void);

#endif
