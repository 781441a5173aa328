/* Stand-in for <wctype.h> (ISO C N1570 7.30). */
#ifndef STEPRING_WCTYPE_H
#define STEPRING_WCTYPE_H
#include <wchar.h>
int iswalnum (wint_t value);
int iswalpha (wint_t value);
int iswdigit (wint_t value);
int iswspace (wint_t value);
wint_t towlower (wint_t value);
wint_t towupper (wint_t value);
#endif
