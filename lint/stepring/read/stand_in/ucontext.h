/* Stand-in for <ucontext.h>. */
#ifndef STEPRING_UCONTEXT_H
#define STEPRING_UCONTEXT_H
#include <signal.h>
typedef struct { void *ss_sp; int ss_flags; size_t ss_size; } stack_t;
typedef struct ucontext { struct ucontext *uc_link; sigset_t uc_sigmask; stack_t uc_stack; } ucontext_t;
int getcontext (ucontext_t *place);
int setcontext (const ucontext_t *place);
void makecontext (ucontext_t *place, void (*function) (void), int count, ...);
int swapcontext (ucontext_t *old, const ucontext_t *place);
#endif
