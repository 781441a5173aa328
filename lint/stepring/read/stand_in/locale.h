/* Stand-in for <locale.h> (ISO C N1570 7.11). */
#ifndef STEPRING_LOCALE_H
#define STEPRING_LOCALE_H
#define LC_ALL 0
#define LC_COLLATE 1
#define LC_CTYPE 2
#define LC_MONETARY 3
#define LC_NUMERIC 4
#define LC_TIME 5
struct lconv { char *decimal_point; char *thousands_sep; };
char *setlocale (int category, const char *name);
struct lconv *localeconv (void);
#endif
