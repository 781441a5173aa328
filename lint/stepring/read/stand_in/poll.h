/* Stand-in for <poll.h> (POSIX). */
#ifndef STEPRING_POLL_H
#define STEPRING_POLL_H
struct pollfd { int fd; short events; short revents; };
typedef unsigned long nfds_t;
#define POLLIN 1
#define POLLPRI 2
#define POLLOUT 4
#define POLLERR 8
#define POLLHUP 16
int poll (struct pollfd *set, nfds_t count, int limit);
#endif
