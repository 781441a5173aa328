/* Stand-in for <netinet/tcp.h> (POSIX). */
#define TCP_NODELAY 1
