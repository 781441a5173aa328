/* Stand-in for <stddef.h> (ISO C N1570 7.19). */
#ifndef STEPRING_STDDEF_H
#define STEPRING_STDDEF_H
typedef __SIZE_TYPE__ size_t;
typedef __PTRDIFF_TYPE__ ptrdiff_t;
typedef __WCHAR_TYPE__ wchar_t;
typedef long double max_align_t;
#define NULL ((void *)0)
#define offsetof(type, member) __builtin_offsetof (type, member)
#endif
