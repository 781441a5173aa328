/* Stand-in for <sys/select.h> (POSIX). */
#ifndef STEPRING_SYS_SELECT_H
#define STEPRING_SYS_SELECT_H
#include <sys/types.h>
#ifndef STEPRING_TIMEVAL
#define STEPRING_TIMEVAL
struct timeval { time_t tv_sec; suseconds_t tv_usec; };
#endif
#define FD_SETSIZE 1024
typedef struct { unsigned long stepring_bits[FD_SETSIZE / (8 * sizeof (unsigned long))]; } fd_set;
void FD_SET (int descriptor, fd_set *set);
void FD_CLR (int descriptor, fd_set *set);
int FD_ISSET (int descriptor, const fd_set *set);
void FD_ZERO (fd_set *set);
int select (int count, fd_set *reading, fd_set *writing, fd_set *failing, struct timeval *limit);
#endif
