/* Stand-in for <stdnoreturn.h> (ISO C N1570 7.23). */
#define noreturn _Noreturn
