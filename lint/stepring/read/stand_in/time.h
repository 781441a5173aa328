/* Stand-in for <time.h> (ISO C N1570 7.27) with the usual POSIX functions. */
#ifndef STEPRING_TIME_H
#define STEPRING_TIME_H
#include <stddef.h>
#include <sys/types.h>
#define CLOCKS_PER_SEC 1000000L
#define CLOCK_REALTIME 0
#define CLOCK_MONOTONIC 1
#define TIME_UTC 1
#ifndef STEPRING_TIMESPEC
#define STEPRING_TIMESPEC
struct timespec { time_t tv_sec; long tv_nsec; };
#endif
struct tm {
  int tm_sec;
  int tm_min;
  int tm_hour;
  int tm_mday;
  int tm_mon;
  int tm_year;
  int tm_wday;
  int tm_yday;
  int tm_isdst;
};
clock_t clock (void);
double difftime (time_t end, time_t start);
time_t mktime (struct tm *parts);
time_t time (time_t *place);
int timespec_get (struct timespec *place, int base);
char *asctime (const struct tm *parts);
char *ctime (const time_t *moment);
struct tm *gmtime (const time_t *moment);
struct tm *localtime (const time_t *moment);
struct tm *gmtime_r (const time_t *moment, struct tm *parts);
struct tm *localtime_r (const time_t *moment, struct tm *parts);
size_t strftime (char *to, size_t size, const char *format, const struct tm *parts);
int nanosleep (const struct timespec *wanted, struct timespec *left);
int clock_gettime (clockid_t clock, struct timespec *moment);
int clock_settime (clockid_t clock, const struct timespec *moment);
int clock_getres (clockid_t clock, struct timespec *resolution);
void tzset (void);
#endif
