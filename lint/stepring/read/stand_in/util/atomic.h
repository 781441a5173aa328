/* Stand-in for <util/atomic.h>: interrupts off before the block, the old state back after it. */
#ifndef STEPRING_UTIL_ATOMIC_H
#define STEPRING_UTIL_ATOMIC_H
#include <avr/interrupt.h>
#include <avr/io.h>
static inline uint8_t stepring_interrupts_off (void)
{
  cli ();
  return 1;
}
static inline uint8_t stepring_interrupts_on (void)
{
  sei ();
  return 1;
}
static inline uint8_t stepring_interrupts_back (uint8_t old)
{
  SREG = old;
  return 0;
}
#define ATOMIC_RESTORESTATE SREG
#define ATOMIC_FORCEON 0x80
#define NONATOMIC_RESTORESTATE SREG
#define NONATOMIC_FORCEOFF 0
#define ATOMIC_BLOCK(state) \
  for (uint8_t stepring_old = (state), stepring_once = stepring_interrupts_off (); stepring_once; \
       stepring_once = stepring_interrupts_back (stepring_old))
#define NONATOMIC_BLOCK(state) \
  for (uint8_t stepring_old = (state), stepring_once = stepring_interrupts_on (); stepring_once; \
       stepring_once = stepring_interrupts_back (stepring_old))
#endif
