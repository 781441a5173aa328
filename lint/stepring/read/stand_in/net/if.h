/* Stand-in for <net/if.h> (POSIX). */
#ifndef STEPRING_NET_IF_H
#define STEPRING_NET_IF_H
#include <sys/socket.h>
#define IF_NAMESIZE 16
#define IFNAMSIZ IF_NAMESIZE
#define IFF_UP 1
#define IFF_RUNNING 64
struct ifreq {
  char ifr_name[IFNAMSIZ];
  union {
    struct sockaddr ifru_addr;
    short ifru_flags;
    int ifru_ivalue;
    char *ifru_data;
  } ifr_ifru;
};
#define ifr_addr ifr_ifru.ifru_addr
#define ifr_flags ifr_ifru.ifru_flags
#define ifr_data ifr_ifru.ifru_data
unsigned int if_nametoindex (const char *name);
char *if_indextoname (unsigned int index, char *name);
#endif
