/* Stand-in for <uchar.h> (ISO C N1570 7.28). */
#ifndef STEPRING_UCHAR_H
#define STEPRING_UCHAR_H
#include <wchar.h>
typedef __UINT_LEAST16_TYPE__ char16_t;
typedef __UINT_LEAST32_TYPE__ char32_t;
#endif
