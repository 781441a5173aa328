/* The tick of the barge and the tasks that hang on it. */
#ifndef SCHED_H
#define SCHED_H

#include <stdbool.h>

bool sched_tick_due(void);
void sched_run_tasks(void);

#endif
