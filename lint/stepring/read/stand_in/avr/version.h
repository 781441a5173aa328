/* Stand-in for <avr/version.h>. */
#define __AVR_LIBC_VERSION__ 20000UL
