/* Stand-in for <fcntl.h> (POSIX). */
#ifndef STEPRING_FCNTL_H
#define STEPRING_FCNTL_H
#include <sys/types.h>
#define O_RDONLY 0
#define O_WRONLY 1
#define O_RDWR 2
#define O_CREAT 0100
#define O_EXCL 0200
#define O_NOCTTY 0400
#define O_TRUNC 01000
#define O_APPEND 02000
#define O_NONBLOCK 04000
#define O_NDELAY O_NONBLOCK
#define O_SYNC 010000
#define F_GETFD 1
#define F_SETFD 2
#define F_GETFL 3
#define F_SETFL 4
#define FD_CLOEXEC 1
int open (const char *path, int flags, ...);
int creat (const char *path, mode_t mode);
int fcntl (int descriptor, int command, ...);
#endif
