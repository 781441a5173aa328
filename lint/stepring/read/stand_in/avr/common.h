/* Stand-in for <avr/common.h>. */
#include <avr/io.h>
