/* Stand-in for <pthread.h> (POSIX). */
#ifndef STEPRING_PTHREAD_H
#define STEPRING_PTHREAD_H
#include <sched.h>
#include <time.h>
#include <sys/types.h>
#define PTHREAD_MUTEX_INITIALIZER { 0 }
#define PTHREAD_COND_INITIALIZER { 0 }
#define PTHREAD_MUTEX_NORMAL 0
#define PTHREAD_MUTEX_RECURSIVE 1
int pthread_create (pthread_t *thread, const pthread_attr_t *attributes, void *(*function) (void *), void *argument);
int pthread_join (pthread_t thread, void **result);
int pthread_detach (pthread_t thread);
int pthread_cancel (pthread_t thread);
_Noreturn void pthread_exit (void *result);
pthread_t pthread_self (void);
int pthread_equal (pthread_t left, pthread_t right);
int pthread_attr_init (pthread_attr_t *attributes);
int pthread_attr_destroy (pthread_attr_t *attributes);
int pthread_attr_setstacksize (pthread_attr_t *attributes, size_t size);
int pthread_mutexattr_init (pthread_mutexattr_t *attributes);
int pthread_mutexattr_settype (pthread_mutexattr_t *attributes, int type);
int pthread_mutex_init (pthread_mutex_t *mutex, const pthread_mutexattr_t *attributes);
int pthread_mutex_destroy (pthread_mutex_t *mutex);
int pthread_mutex_lock (pthread_mutex_t *mutex);
int pthread_mutex_trylock (pthread_mutex_t *mutex);
int pthread_mutex_unlock (pthread_mutex_t *mutex);
int pthread_cond_init (pthread_cond_t *condition, const pthread_condattr_t *attributes);
int pthread_cond_destroy (pthread_cond_t *condition);
int pthread_cond_wait (pthread_cond_t *condition, pthread_mutex_t *mutex);
int pthread_cond_timedwait (pthread_cond_t *condition, pthread_mutex_t *mutex, const struct timespec *limit);
int pthread_cond_signal (pthread_cond_t *condition);
int pthread_cond_broadcast (pthread_cond_t *condition);
#endif
