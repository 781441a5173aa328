/* Stand-in for <signal.h> (ISO C N1570 7.14) with the usual POSIX parts. */
#ifndef STEPRING_SIGNAL_H
#define STEPRING_SIGNAL_H
#include <sys/types.h>
typedef int sig_atomic_t;
typedef unsigned long sigset_t;
typedef struct { int si_signo; int si_code; int si_errno; pid_t si_pid; void *si_addr; } siginfo_t;
struct sigaction {
  void (*sa_handler) (int);
  void (*sa_sigaction) (int, siginfo_t *, void *);
  sigset_t sa_mask;
  int sa_flags;
};
#define SIG_DFL ((void (*) (int))0)
#define SIG_IGN ((void (*) (int))1)
#define SIG_ERR ((void (*) (int))-1)
#define SIGHUP 1
#define SIGINT 2
#define SIGQUIT 3
#define SIGILL 4
#define SIGABRT 6
#define SIGFPE 8
#define SIGKILL 9
#define SIGUSR1 10
#define SIGSEGV 11
#define SIGUSR2 12
#define SIGPIPE 13
#define SIGALRM 14
#define SIGTERM 15
#define SIGCHLD 17
#define SIGIO 29
#define SA_RESTART 1
#define SA_SIGINFO 4
#define SIG_BLOCK 0
#define SIG_UNBLOCK 1
#define SIG_SETMASK 2
void (*signal (int number, void (*handler) (int))) (int);
int raise (int number);
int kill (pid_t process, int number);
int sigaction (int number, const struct sigaction *action, struct sigaction *old);
int sigemptyset (sigset_t *set);
int sigfillset (sigset_t *set);
int sigaddset (sigset_t *set, int number);
int sigdelset (sigset_t *set, int number);
int sigprocmask (int how, const sigset_t *set, sigset_t *old);
int sigsuspend (const sigset_t *set);
#endif
