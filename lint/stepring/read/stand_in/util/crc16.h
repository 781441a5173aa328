/* Stand-in for <util/crc16.h>. */
#ifndef STEPRING_UTIL_CRC16_H
#define STEPRING_UTIL_CRC16_H
#include <stdint.h>
uint16_t _crc16_update (uint16_t crc, uint8_t value);
uint16_t _crc_xmodem_update (uint16_t crc, uint8_t value);
uint16_t _crc_ccitt_update (uint16_t crc, uint8_t value);
uint8_t _crc_ibutton_update (uint8_t crc, uint8_t value);
uint8_t _crc8_ccitt_update (uint8_t crc, uint8_t value);
#endif
