/* Stand-in for <sys/un.h> (POSIX). */
#ifndef STEPRING_SYS_UN_H
#define STEPRING_SYS_UN_H
#include <sys/socket.h>
struct sockaddr_un { sa_family_t sun_family; char sun_path[108]; };
#endif
