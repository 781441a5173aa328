/* Stand-in for <threads.h> (ISO C N1570 7.26). */
#ifndef STEPRING_THREADS_H
#define STEPRING_THREADS_H
#include <time.h>
#define thread_local _Thread_local
typedef struct { int stepring_state; } mtx_t;
typedef struct { int stepring_state; } cnd_t;
typedef unsigned long thrd_t;
typedef int (*thrd_start_t) (void *);
enum { thrd_success, thrd_busy, thrd_error, thrd_nomem, thrd_timedout };
enum { mtx_plain, mtx_recursive, mtx_timed };
int mtx_init (mtx_t *mutex, int type);
int mtx_lock (mtx_t *mutex);
int mtx_trylock (mtx_t *mutex);
int mtx_unlock (mtx_t *mutex);
void mtx_destroy (mtx_t *mutex);
int cnd_init (cnd_t *condition);
int cnd_signal (cnd_t *condition);
int cnd_broadcast (cnd_t *condition);
int cnd_wait (cnd_t *condition, mtx_t *mutex);
int thrd_create (thrd_t *thread, thrd_start_t function, void *argument);
int thrd_join (thrd_t thread, int *result);
void thrd_yield (void);
int thrd_sleep (const struct timespec *wanted, struct timespec *left);
#endif
