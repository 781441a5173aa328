/* What the CMSIS processor headers declare in common: the interrupt controller and the system timer. */
#ifndef STEPRING_CMSIS_CORE_H
#define STEPRING_CMSIS_CORE_H
#include <cmsis_compiler.h>
typedef struct {
  __IOM uint32_t ISER[16];
  __IOM uint32_t ICER[16];
  __IOM uint32_t ISPR[16];
  __IOM uint32_t ICPR[16];
  __IOM uint32_t IABR[16];
  __IOM uint8_t IP[496];
  __OM uint32_t STIR;
} NVIC_Type;
typedef struct {
  __IM uint32_t CPUID;
  __IOM uint32_t ICSR;
  __IOM uint32_t VTOR;
  __IOM uint32_t AIRCR;
  __IOM uint32_t SCR;
  __IOM uint32_t CCR;
} SCB_Type;
typedef struct {
  __IOM uint32_t CTRL;
  __IOM uint32_t LOAD;
  __IOM uint32_t VAL;
  __IM uint32_t CALIB;
} SysTick_Type;
#define NVIC ((NVIC_Type *)0xE000E100UL)
#define SCB ((SCB_Type *)0xE000ED00UL)
#define SysTick ((SysTick_Type *)0xE000E010UL)
void NVIC_EnableIRQ (int number);
void NVIC_DisableIRQ (int number);
uint32_t NVIC_GetEnableIRQ (int number);
void NVIC_SetPendingIRQ (int number);
void NVIC_ClearPendingIRQ (int number);
uint32_t NVIC_GetPendingIRQ (int number);
void NVIC_SetPriority (int number, uint32_t priority);
uint32_t NVIC_GetPriority (int number);
void NVIC_SetPriorityGrouping (uint32_t grouping);
__NO_RETURN void NVIC_SystemReset (void);
uint32_t SysTick_Config (uint32_t ticks);
#endif
