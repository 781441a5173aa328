/* Stand-in for <fenv.h> (ISO C N1570 7.6). */
#ifndef STEPRING_FENV_H
#define STEPRING_FENV_H
typedef unsigned int fenv_t;
typedef unsigned int fexcept_t;
#define FE_INVALID 1
#define FE_DIVBYZERO 4
#define FE_OVERFLOW 8
#define FE_UNDERFLOW 16
#define FE_INEXACT 32
#define FE_ALL_EXCEPT 61
#define FE_TONEAREST 0
#define FE_DOWNWARD 1
#define FE_UPWARD 2
#define FE_TOWARDZERO 3
int feclearexcept (int which);
int fetestexcept (int which);
int feraiseexcept (int which);
int fegetround (void);
int fesetround (int mode);
#endif
