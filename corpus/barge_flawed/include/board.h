/* What the board of the barge offers: registers, a few functions of the board layer, and the interrupt handlers
 * that its vector table names. */
#ifndef BOARD_H
#define BOARD_H

#include <stdbool.h>
#include <stdint.h>

/* A handler is a plain function whose name ends in _isr; the vendor's start-up code names its own _IRQHandler. */
#define BOARD_ISR(source) void source##_isr(void)

#define UART_RX_READY 0x01u
#define UART_TX_FREE 0x02u

extern volatile uint8_t UART_SHORE_DATA;
extern volatile uint8_t UART_SHORE_STATUS;
extern volatile uint16_t ADC_WEIGHT;

BOARD_ISR(tick);
BOARD_ISR(weight_adc);
void SHORE_UART_IRQHandler(void);

void board_start(void);
void board_watchdog_kick(void);
uint8_t board_hours_off(void);

void motor_speed(uint8_t channel, int8_t percent);
uint16_t motor_milliamps(uint8_t channel);

void gate_motor(int8_t direction);
bool gate_at_top(void);
bool gate_at_bottom(void);

void fan_percent(uint8_t percent);
uint16_t fan_rpm(void);

void rinse_pump(bool on);
bool rinse_pressure(void);

void shaker(bool on);
void horn(bool on);
void beacon_lamp(bool on);

#endif
