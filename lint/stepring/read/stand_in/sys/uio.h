/* Stand-in for <sys/uio.h> (POSIX). */
#ifndef STEPRING_SYS_UIO_H
#define STEPRING_SYS_UIO_H
#include <sys/types.h>
struct iovec { void *iov_base; size_t iov_len; };
ssize_t readv (int descriptor, const struct iovec *parts, int count);
ssize_t writev (int descriptor, const struct iovec *parts, int count);
#endif
