/* Stand-in for <netdb.h> (POSIX). */
#ifndef STEPRING_NETDB_H
#define STEPRING_NETDB_H
#include <netinet/in.h>
struct hostent { char *h_name; char **h_aliases; int h_addrtype; int h_length; char **h_addr_list; };
struct addrinfo {
  int ai_flags;
  int ai_family;
  int ai_socktype;
  int ai_protocol;
  socklen_t ai_addrlen;
  struct sockaddr *ai_addr;
  char *ai_canonname;
  struct addrinfo *ai_next;
};
struct hostent *gethostbyname (const char *name);
int getaddrinfo (const char *name, const char *service, const struct addrinfo *hints, struct addrinfo **result);
void freeaddrinfo (struct addrinfo *result);
#endif
