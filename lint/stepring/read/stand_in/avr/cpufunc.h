/* Stand-in for <avr/cpufunc.h>. */
#define _NOP() __asm__ __volatile__ ("nop")
#define _MemoryBarrier() __asm__ __volatile__ ("" ::: "memory")
