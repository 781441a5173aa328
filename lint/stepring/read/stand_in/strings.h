/* Stand-in for <strings.h> (POSIX). */
#ifndef STEPRING_STRINGS_H
#define STEPRING_STRINGS_H
#include <stddef.h>
int strcasecmp (const char *left, const char *right);
int strncasecmp (const char *left, const char *right, size_t count);
void bzero (void *to, size_t count);
void bcopy (const void *from, void *to, size_t count);
int bcmp (const void *left, const void *right, size_t count);
int ffs (int value);
char *index (const char *from, int value);
char *rindex (const char *from, int value);
#endif
