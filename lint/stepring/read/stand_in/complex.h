/* Stand-in for <complex.h> (ISO C N1570 7.3): the keyword only. */
#define complex _Complex
