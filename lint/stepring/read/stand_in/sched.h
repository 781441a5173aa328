/* Stand-in for <sched.h> (POSIX). */
#ifndef STEPRING_SCHED_H
#define STEPRING_SCHED_H
struct sched_param { int sched_priority; };
#define SCHED_OTHER 0
#define SCHED_FIFO 1
#define SCHED_RR 2
int sched_yield (void);
#endif
