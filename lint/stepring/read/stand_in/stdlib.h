/* Stand-in for <stdlib.h> (ISO C N1570 7.22) with the usual POSIX functions. */
#ifndef STEPRING_STDLIB_H
#define STEPRING_STDLIB_H
#include <stddef.h>
#define EXIT_SUCCESS 0
#define EXIT_FAILURE 1
#define RAND_MAX 32767
#define MB_CUR_MAX 1
typedef struct { int quot; int rem; } div_t;
typedef struct { long quot; long rem; } ldiv_t;
typedef struct { long long quot; long long rem; } lldiv_t;
void *malloc (size_t size);
void *calloc (size_t count, size_t size);
void *realloc (void *old, size_t size);
void *aligned_alloc (size_t alignment, size_t size);
int posix_memalign (void **place, size_t alignment, size_t size);
void free (void *old);
_Noreturn void abort (void);
_Noreturn void exit (int status);
_Noreturn void _Exit (int status);
_Noreturn void quick_exit (int status);
int atexit (void (*function) (void));
int at_quick_exit (void (*function) (void));
char *getenv (const char *name);
int setenv (const char *name, const char *value, int overwrite);
int system (const char *command);
int abs (int value);
long labs (long value);
long long llabs (long long value);
div_t div (int number, int by);
ldiv_t ldiv (long number, long by);
lldiv_t lldiv (long long number, long long by);
int atoi (const char *text);
long atol (const char *text);
long long atoll (const char *text);
double atof (const char *text);
long strtol (const char *text, char **rest, int base);
long long strtoll (const char *text, char **rest, int base);
unsigned long strtoul (const char *text, char **rest, int base);
unsigned long long strtoull (const char *text, char **rest, int base);
double strtod (const char *text, char **rest);
float strtof (const char *text, char **rest);
long double strtold (const char *text, char **rest);
int rand (void);
void srand (unsigned int seed);
int rand_r (unsigned int *state);
long random (void);
void srandom (unsigned int seed);
void qsort (void *base, size_t count, size_t size, int (*compare) (const void *, const void *));
void *bsearch (const void *key, const void *base, size_t count, size_t size,
               int (*compare) (const void *, const void *));
int mblen (const char *text, size_t count);
int mbtowc (wchar_t *to, const char *from, size_t count);
int wctomb (char *to, wchar_t from);
size_t mbstowcs (wchar_t *to, const char *from, size_t count);
size_t wcstombs (char *to, const wchar_t *from, size_t count);
char *itoa (int value, char *to, int base);
char *ltoa (long value, char *to, int base);
char *utoa (unsigned int value, char *to, int base);
char *ultoa (unsigned long value, char *to, int base);
char *dtostrf (double value, signed char width, unsigned char precision, char *to);
#endif
