/* Stand-in for <sys/wait.h> (POSIX). */
#ifndef STEPRING_SYS_WAIT_H
#define STEPRING_SYS_WAIT_H
#include <sys/types.h>
#define WNOHANG 1
#define WIFEXITED(status) (((status) & 127) == 0)
#define WEXITSTATUS(status) (((status) >> 8) & 255)
pid_t wait (int *status);
pid_t waitpid (pid_t process, int *status, int options);
#endif
