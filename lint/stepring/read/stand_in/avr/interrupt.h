/* Stand-in for <avr/interrupt.h>: an interrupt function keeps its vector's name and carries the attribute. */
#ifndef STEPRING_AVR_INTERRUPT_H
#define STEPRING_AVR_INTERRUPT_H
#include <avr/io.h>
void sei (void);
void cli (void);
void reti (void);
#define sei() __asm__ __volatile__ ("sei" ::: "memory")
#define cli() __asm__ __volatile__ ("cli" ::: "memory")
#define reti() __asm__ __volatile__ ("reti")
#define ISR(vector, ...) \
  void vector (void) __attribute__ ((signal, used, externally_visible)) __VA_ARGS__; \
  void vector (void)
#define SIGNAL(vector) ISR (vector)
#define INTERRUPT(vector) ISR (vector)
#define EMPTY_INTERRUPT(vector) \
  void vector (void) __attribute__ ((signal, naked, used, externally_visible)); \
  void vector (void) { }
#define ISR_ALIAS(vector, target) void vector (void) __attribute__ ((signal, used, externally_visible, alias (#target)))
#define ISR_BLOCK
#define ISR_NOBLOCK __attribute__ ((interrupt))
#define ISR_NAKED __attribute__ ((naked))
#define ISR_ALIASOF(target) __attribute__ ((alias (#target)))
#endif
