/* Stand-in for <string.h> (ISO C N1570 7.24) with the usual POSIX functions. */
#ifndef STEPRING_STRING_H
#define STEPRING_STRING_H
#include <stddef.h>
void *memcpy (void *to, const void *from, size_t count);
void *memmove (void *to, const void *from, size_t count);
void *memset (void *to, int value, size_t count);
int memcmp (const void *left, const void *right, size_t count);
void *memchr (const void *from, int value, size_t count);
void *memrchr (const void *from, int value, size_t count);
void *memccpy (void *to, const void *from, int stop, size_t count);
void *memmem (const void *in, size_t in_count, const void *what, size_t what_count);
char *strcpy (char *to, const char *from);
char *strncpy (char *to, const char *from, size_t count);
char *strcat (char *to, const char *from);
char *strncat (char *to, const char *from, size_t count);
int strcmp (const char *left, const char *right);
int strncmp (const char *left, const char *right, size_t count);
int strcoll (const char *left, const char *right);
size_t strxfrm (char *to, const char *from, size_t count);
char *strchr (const char *from, int value);
char *strrchr (const char *from, int value);
size_t strcspn (const char *from, const char *stop);
size_t strspn (const char *from, const char *accept);
char *strpbrk (const char *from, const char *accept);
char *strstr (const char *from, const char *what);
char *strtok (char *from, const char *stop);
char *strtok_r (char *from, const char *stop, char **rest);
char *strsep (char **from, const char *stop);
size_t strlen (const char *from);
size_t strnlen (const char *from, size_t most);
char *strdup (const char *from);
char *strndup (const char *from, size_t most);
size_t strlcpy (char *to, const char *from, size_t size);
size_t strlcat (char *to, const char *from, size_t size);
char *strerror (int number);
char *strsignal (int number);
#include <strings.h>
#endif
