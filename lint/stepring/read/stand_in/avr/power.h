/* Stand-in for <avr/power.h>. */
#ifndef STEPRING_AVR_POWER_H
#define STEPRING_AVR_POWER_H
void power_all_enable (void);
void power_all_disable (void);
void power_adc_enable (void);
void power_adc_disable (void);
void power_timer0_enable (void);
void power_timer0_disable (void);
void power_timer1_enable (void);
void power_timer1_disable (void);
void power_usart0_enable (void);
void power_usart0_disable (void);
#endif
