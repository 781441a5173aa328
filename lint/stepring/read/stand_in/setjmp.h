/* Stand-in for <setjmp.h> (ISO C N1570 7.13). */
#ifndef STEPRING_SETJMP_H
#define STEPRING_SETJMP_H
typedef unsigned char jmp_buf[64];
typedef unsigned char sigjmp_buf[64];
int setjmp (jmp_buf place);
int sigsetjmp (sigjmp_buf place, int mask);
_Noreturn void longjmp (jmp_buf place, int value);
_Noreturn void siglongjmp (sigjmp_buf place, int value);
#endif
