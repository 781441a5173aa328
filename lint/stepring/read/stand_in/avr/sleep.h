/* Stand-in for <avr/sleep.h>. */
#ifndef STEPRING_AVR_SLEEP_H
#define STEPRING_AVR_SLEEP_H
#define SLEEP_MODE_IDLE 0
#define SLEEP_MODE_ADC 2
#define SLEEP_MODE_PWR_DOWN 4
#define SLEEP_MODE_PWR_SAVE 6
#define SLEEP_MODE_STANDBY 12
void set_sleep_mode (unsigned char mode);
void sleep_enable (void);
void sleep_disable (void);
void sleep_cpu (void);
void sleep_mode (void);
void sleep_bod_disable (void);
#endif
