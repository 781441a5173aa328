/* Stand-in for <semaphore.h> (POSIX). */
#ifndef STEPRING_SEMAPHORE_H
#define STEPRING_SEMAPHORE_H
#include <time.h>
typedef struct { int stepring_state; } sem_t;
int sem_init (sem_t *semaphore, int shared, unsigned int value);
int sem_destroy (sem_t *semaphore);
int sem_wait (sem_t *semaphore);
int sem_trywait (sem_t *semaphore);
int sem_timedwait (sem_t *semaphore, const struct timespec *limit);
int sem_post (sem_t *semaphore);
int sem_getvalue (sem_t *semaphore, int *value);
#endif
