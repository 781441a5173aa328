/* Stand-in for <avr/signal.h>: the older name of <avr/interrupt.h>. */
#include <avr/interrupt.h>
