/* Watches that frames from shore keep coming. */
#ifndef WATCH_H
#define WATCH_H

void watch_poll(void);

#endif
