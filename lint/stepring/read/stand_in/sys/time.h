/* Stand-in for <sys/time.h> (POSIX). */
#ifndef STEPRING_SYS_TIME_H
#define STEPRING_SYS_TIME_H
#include <sys/types.h>
#include <sys/select.h>
#ifndef STEPRING_TIMEVAL
#define STEPRING_TIMEVAL
struct timeval { time_t tv_sec; suseconds_t tv_usec; };
#endif
struct timezone { int tz_minuteswest; int tz_dsttime; };
struct itimerval { struct timeval it_interval; struct timeval it_value; };
#define ITIMER_REAL 0
#define ITIMER_VIRTUAL 1
int gettimeofday (struct timeval *moment, void *zone);
int settimeofday (const struct timeval *moment, const struct timezone *zone);
int setitimer (int which, const struct itimerval *value, struct itimerval *old);
#endif
