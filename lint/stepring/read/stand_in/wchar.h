/* Stand-in for <wchar.h> (ISO C N1570 7.29). */
#ifndef STEPRING_WCHAR_H
#define STEPRING_WCHAR_H
#include <stddef.h>
typedef __WINT_TYPE__ wint_t;
typedef struct { int stepring_state; } mbstate_t;
#define WEOF ((wint_t)-1)
size_t wcslen (const wchar_t *text);
wchar_t *wcscpy (wchar_t *to, const wchar_t *from);
wchar_t *wcsncpy (wchar_t *to, const wchar_t *from, size_t count);
int wcscmp (const wchar_t *left, const wchar_t *right);
int wcsncmp (const wchar_t *left, const wchar_t *right, size_t count);
wchar_t *wcschr (const wchar_t *from, wchar_t value);
wchar_t *wmemcpy (wchar_t *to, const wchar_t *from, size_t count);
wchar_t *wmemset (wchar_t *to, wchar_t value, size_t count);
size_t mbrtowc (wchar_t *to, const char *from, size_t count, mbstate_t *state);
size_t wcrtomb (char *to, wchar_t from, mbstate_t *state);
#endif
