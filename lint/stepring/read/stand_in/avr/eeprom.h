/* Stand-in for <avr/eeprom.h>. */
#ifndef STEPRING_AVR_EEPROM_H
#define STEPRING_AVR_EEPROM_H
#include <stddef.h>
#include <stdint.h>
#define EEMEM
int eeprom_is_ready (void);
void eeprom_busy_wait (void);
uint8_t eeprom_read_byte (const uint8_t *place);
uint16_t eeprom_read_word (const uint16_t *place);
uint32_t eeprom_read_dword (const uint32_t *place);
float eeprom_read_float (const float *place);
void eeprom_read_block (void *to, const void *from, size_t count);
void eeprom_write_byte (uint8_t *place, uint8_t value);
void eeprom_write_word (uint16_t *place, uint16_t value);
void eeprom_write_dword (uint32_t *place, uint32_t value);
void eeprom_write_block (const void *from, void *to, size_t count);
void eeprom_update_byte (uint8_t *place, uint8_t value);
void eeprom_update_word (uint16_t *place, uint16_t value);
void eeprom_update_dword (uint32_t *place, uint32_t value);
void eeprom_update_block (const void *from, void *to, size_t count);
#endif
