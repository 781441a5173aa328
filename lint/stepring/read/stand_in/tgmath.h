/* Stand-in for <tgmath.h> (ISO C N1570 7.25): the double functions. */
#include <math.h>
