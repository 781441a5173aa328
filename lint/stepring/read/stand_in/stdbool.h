/* Stand-in for <stdbool.h> (ISO C N1570 7.18). */
#ifndef STEPRING_STDBOOL_H
#define STEPRING_STDBOOL_H
#define bool _Bool
#define true 1
#define false 0
#define __bool_true_false_are_defined 1
#endif
