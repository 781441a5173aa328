/* The Test Access Port (TAP) controller of IEEE Std 1149.1: 16 states, one step at each rising edge of TCK.
 * Form: a file-static integer state with #define constants; the cases work out the next state in a variable of
 * its own, which is committed after the switch. */
#include <stdbool.h>
#include <stdint.h>

#define TAP_TEST_LOGIC_RESET 0u
#define TAP_RUN_TEST_IDLE 1u
#define TAP_SELECT_DR_SCAN 2u
#define TAP_CAPTURE_DR 3u
#define TAP_SHIFT_DR 4u
#define TAP_EXIT1_DR 5u
#define TAP_PAUSE_DR 6u
#define TAP_EXIT2_DR 7u
#define TAP_UPDATE_DR 8u
#define TAP_SELECT_IR_SCAN 9u
#define TAP_CAPTURE_IR 10u
#define TAP_SHIFT_IR 11u
#define TAP_EXIT1_IR 12u
#define TAP_PAUSE_IR 13u
#define TAP_EXIT2_IR 14u
#define TAP_UPDATE_IR 15u

static uint8_t tap_state = TAP_TEST_LOGIC_RESET;

void tap_clock(bool tms)
{
    uint8_t next = tap_state;

    switch (tap_state) {
    case TAP_TEST_LOGIC_RESET:
        next = tms ? TAP_TEST_LOGIC_RESET : TAP_RUN_TEST_IDLE;
        break;
    case TAP_RUN_TEST_IDLE:
        next = tms ? TAP_SELECT_DR_SCAN : TAP_RUN_TEST_IDLE;
        break;
    case TAP_SELECT_DR_SCAN:
        next = tms ? TAP_SELECT_IR_SCAN : TAP_CAPTURE_DR;
        break;
    case TAP_CAPTURE_DR:
        next = tms ? TAP_EXIT1_DR : TAP_SHIFT_DR;
        break;
    case TAP_SHIFT_DR:
        next = tms ? TAP_EXIT1_DR : TAP_SHIFT_DR;
        break;
    case TAP_EXIT1_DR:
        next = tms ? TAP_UPDATE_DR : TAP_PAUSE_DR;
        break;
    case TAP_PAUSE_DR:
        next = tms ? TAP_EXIT2_DR : TAP_PAUSE_DR;
        break;
    case TAP_EXIT2_DR:
        next = tms ? TAP_UPDATE_DR : TAP_SHIFT_DR;
        break;
    case TAP_UPDATE_DR:
        next = tms ? TAP_SELECT_DR_SCAN : TAP_RUN_TEST_IDLE;
        break;
    case TAP_SELECT_IR_SCAN:
        next = tms ? TAP_TEST_LOGIC_RESET : TAP_CAPTURE_IR;
        break;
    case TAP_CAPTURE_IR:
        next = tms ? TAP_EXIT1_IR : TAP_SHIFT_IR;
        break;
    case TAP_SHIFT_IR:
        next = tms ? TAP_EXIT1_IR : TAP_SHIFT_IR;
        break;
    case TAP_EXIT1_IR:
        next = tms ? TAP_UPDATE_IR : TAP_PAUSE_IR;
        break;
    case TAP_PAUSE_IR:
        next = tms ? TAP_EXIT2_IR : TAP_PAUSE_IR;
        break;
    case TAP_EXIT2_IR:
        next = tms ? TAP_UPDATE_IR : TAP_SHIFT_IR;
        break;
    case TAP_UPDATE_IR:
        next = tms ? TAP_SELECT_DR_SCAN : TAP_RUN_TEST_IDLE;
        break;
    default:
        next = TAP_TEST_LOGIC_RESET;
        break;
    }
    tap_state = next;
}

bool tap_is_reset(void)
{
    return tap_state == TAP_TEST_LOGIC_RESET;
}
