/* Stand-in for <sys/socket.h> (POSIX). */
#ifndef STEPRING_SYS_SOCKET_H
#define STEPRING_SYS_SOCKET_H
#include <sys/types.h>
#include <sys/uio.h>
typedef unsigned int socklen_t;
typedef unsigned short sa_family_t;
struct sockaddr { sa_family_t sa_family; char sa_data[14]; };
struct sockaddr_storage { sa_family_t ss_family; char stepring_space[126]; };
struct msghdr {
  void *msg_name;
  socklen_t msg_namelen;
  struct iovec *msg_iov;
  size_t msg_iovlen;
  void *msg_control;
  size_t msg_controllen;
  int msg_flags;
};
struct linger { int l_onoff; int l_linger; };
#define AF_UNSPEC 0
#define AF_UNIX 1
#define AF_INET 2
#define AF_INET6 10
#define PF_INET AF_INET
#define PF_INET6 AF_INET6
#define SOCK_STREAM 1
#define SOCK_DGRAM 2
#define SOCK_RAW 3
#define SOL_SOCKET 1
#define SO_REUSEADDR 2
#define SO_ERROR 4
#define SO_BROADCAST 6
#define SO_SNDBUF 7
#define SO_RCVBUF 8
#define SO_KEEPALIVE 9
#define SO_LINGER 13
#define SO_RCVTIMEO 20
#define SO_SNDTIMEO 21
#define MSG_PEEK 2
#define MSG_DONTWAIT 64
#define MSG_NOSIGNAL 16384
#define SHUT_RD 0
#define SHUT_WR 1
#define SHUT_RDWR 2
#define SOMAXCONN 128
int socket (int domain, int type, int protocol);
int bind (int descriptor, const struct sockaddr *address, socklen_t size);
int listen (int descriptor, int backlog);
int accept (int descriptor, struct sockaddr *address, socklen_t *size);
int connect (int descriptor, const struct sockaddr *address, socklen_t size);
int shutdown (int descriptor, int how);
ssize_t recv (int descriptor, void *to, size_t size, int flags);
ssize_t send (int descriptor, const void *from, size_t size, int flags);
ssize_t recvfrom (int descriptor, void *to, size_t size, int flags, struct sockaddr *address, socklen_t *length);
ssize_t sendto (int descriptor, const void *from, size_t size, int flags, const struct sockaddr *address,
                socklen_t length);
ssize_t recvmsg (int descriptor, struct msghdr *message, int flags);
ssize_t sendmsg (int descriptor, const struct msghdr *message, int flags);
int setsockopt (int descriptor, int level, int name, const void *value, socklen_t size);
int getsockopt (int descriptor, int level, int name, void *value, socklen_t *size);
int getsockname (int descriptor, struct sockaddr *address, socklen_t *size);
int getpeername (int descriptor, struct sockaddr *address, socklen_t *size);
#endif
