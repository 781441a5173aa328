/* Stand-in for <sys/types.h> (POSIX). */
#ifndef STEPRING_SYS_TYPES_H
#define STEPRING_SYS_TYPES_H
#include <stddef.h>
typedef __PTRDIFF_TYPE__ ssize_t;
typedef long off_t;
typedef __INT64_TYPE__ off64_t;
typedef long time_t;
typedef long clock_t;
typedef int clockid_t;
typedef unsigned long timer_t;
typedef long suseconds_t;
typedef unsigned long useconds_t;
typedef int pid_t;
typedef unsigned int uid_t;
typedef unsigned int gid_t;
typedef unsigned int mode_t;
typedef unsigned long ino_t;
typedef unsigned long dev_t;
typedef unsigned long nlink_t;
typedef unsigned char u_char;
typedef unsigned short u_short;
typedef unsigned int u_int;
typedef unsigned long u_long;
typedef unsigned int uint;
typedef unsigned short ushort;
typedef unsigned long ulong;
typedef __UINT8_TYPE__ u_int8_t;
typedef __UINT16_TYPE__ u_int16_t;
typedef __UINT32_TYPE__ u_int32_t;
typedef __UINT64_TYPE__ u_int64_t;
typedef char *caddr_t;
typedef unsigned long pthread_t;
typedef struct { int stepring_state; } pthread_attr_t;
typedef struct { int stepring_state; } pthread_mutex_t;
typedef struct { int stepring_state; } pthread_mutexattr_t;
typedef struct { int stepring_state; } pthread_cond_t;
typedef struct { int stepring_state; } pthread_condattr_t;
#endif
