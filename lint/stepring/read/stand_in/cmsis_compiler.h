/* Stand-in for the CMSIS compiler header: the processor functions that firmware calls by these names. */
#ifndef STEPRING_CMSIS_COMPILER_H
#define STEPRING_CMSIS_COMPILER_H
#include <stdint.h>
#define __ASM __asm
#define __INLINE inline
#define __STATIC_INLINE static inline
#define __STATIC_FORCEINLINE static inline
#define __NO_RETURN __attribute__ ((noreturn))
#define __USED __attribute__ ((used))
#define __WEAK __attribute__ ((weak))
#define __PACKED __attribute__ ((packed))
#define __PACKED_STRUCT struct __attribute__ ((packed))
#define __PACKED_UNION union __attribute__ ((packed))
#define __ALIGNED(count) __attribute__ ((aligned (count)))
#define __RESTRICT restrict
#define __IM volatile const
#define __OM volatile
#define __IOM volatile
#define __I volatile const
#define __O volatile
#define __IO volatile
void __disable_irq (void);
void __enable_irq (void);
void __disable_fault_irq (void);
void __enable_fault_irq (void);
uint32_t __get_PRIMASK (void);
void __set_PRIMASK (uint32_t mask);
uint32_t __get_BASEPRI (void);
void __set_BASEPRI (uint32_t mask);
void __set_BASEPRI_MAX (uint32_t mask);
uint32_t __get_FAULTMASK (void);
void __set_FAULTMASK (uint32_t mask);
uint32_t __get_CONTROL (void);
void __set_CONTROL (uint32_t value);
uint32_t __get_IPSR (void);
uint32_t __get_MSP (void);
void __set_MSP (uint32_t value);
uint32_t __get_PSP (void);
void __set_PSP (uint32_t value);
void __NOP (void);
void __WFI (void);
void __WFE (void);
void __SEV (void);
void __ISB (void);
void __DSB (void);
void __DMB (void);
void __BKPT (uint32_t value);
void __CLREX (void);
uint32_t __REV (uint32_t value);
uint32_t __REV16 (uint32_t value);
uint32_t __RBIT (uint32_t value);
uint8_t __CLZ (uint32_t value);
uint8_t __LDREXB (volatile uint8_t *place);
uint16_t __LDREXH (volatile uint16_t *place);
uint32_t __LDREXW (volatile uint32_t *place);
uint32_t __STREXB (uint8_t value, volatile uint8_t *place);
uint32_t __STREXH (uint16_t value, volatile uint16_t *place);
uint32_t __STREXW (uint32_t value, volatile uint32_t *place);
#endif
