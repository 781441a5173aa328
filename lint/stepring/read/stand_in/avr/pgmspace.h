/* Stand-in for <avr/pgmspace.h>: program memory is read like any other. */
#ifndef STEPRING_AVR_PGMSPACE_H
#define STEPRING_AVR_PGMSPACE_H
#include <stddef.h>
#include <stdint.h>
#define PROGMEM
#define PGM_P const char *
#define PGM_VOID_P const void *
#define PSTR(text) (text)
#define pgm_read_byte(address) (*(const uint8_t *)(address))
#define pgm_read_word(address) (*(const uint16_t *)(address))
#define pgm_read_dword(address) (*(const uint32_t *)(address))
#define pgm_read_float(address) (*(const float *)(address))
#define pgm_read_ptr(address) (*(void *const *)(address))
#define pgm_read_byte_near(address) pgm_read_byte (address)
#define pgm_read_word_near(address) pgm_read_word (address)
#define pgm_read_dword_near(address) pgm_read_dword (address)
#define pgm_read_byte_far(address) pgm_read_byte (address)
typedef const char prog_char;
typedef const uint8_t prog_uint8_t;
typedef const uint16_t prog_uint16_t;
void *memcpy_P (void *to, const void *from, size_t count);
int memcmp_P (const void *left, const void *right, size_t count);
char *strcpy_P (char *to, const char *from);
char *strncpy_P (char *to, const char *from, size_t count);
char *strcat_P (char *to, const char *from);
int strcmp_P (const char *left, const char *right);
int strncmp_P (const char *left, const char *right, size_t count);
int strcasecmp_P (const char *left, const char *right);
size_t strlen_P (const char *from);
char *strstr_P (const char *from, const char *what);
#endif
