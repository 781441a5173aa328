/* The Test Access Port (TAP) controller of IEEE Std 1149.1: 16 states, one step at each rising edge of TCK.
 * Form: a global enumeration; the two values of TMS are two functions, each with a switch of its own. */

enum tap_state {
    TAP_TEST_LOGIC_RESET,
    TAP_RUN_TEST_IDLE,
    TAP_SELECT_DR_SCAN,
    TAP_CAPTURE_DR,
    TAP_SHIFT_DR,
    TAP_EXIT1_DR,
    TAP_PAUSE_DR,
    TAP_EXIT2_DR,
    TAP_UPDATE_DR,
    TAP_SELECT_IR_SCAN,
    TAP_CAPTURE_IR,
    TAP_SHIFT_IR,
    TAP_EXIT1_IR,
    TAP_PAUSE_IR,
    TAP_EXIT2_IR,
    TAP_UPDATE_IR,
};

enum tap_state tap_state = TAP_TEST_LOGIC_RESET;

void tap_clock_tms_high(void)
{
    switch (tap_state) {
    case TAP_TEST_LOGIC_RESET:
        tap_state = TAP_TEST_LOGIC_RESET;
        break;
    case TAP_RUN_TEST_IDLE:
        tap_state = TAP_SELECT_DR_SCAN;
        break;
    case TAP_SELECT_DR_SCAN:
        tap_state = TAP_SELECT_IR_SCAN;
        break;
    case TAP_CAPTURE_DR:
        tap_state = TAP_EXIT1_DR;
        break;
    case TAP_SHIFT_DR:
        tap_state = TAP_EXIT1_DR;
        break;
    case TAP_EXIT1_DR:
        tap_state = TAP_UPDATE_DR;
        break;
    case TAP_PAUSE_DR:
        tap_state = TAP_EXIT2_DR;
        break;
    case TAP_EXIT2_DR:
        tap_state = TAP_UPDATE_DR;
        break;
    case TAP_UPDATE_DR:
        tap_state = TAP_SELECT_DR_SCAN;
        break;
    case TAP_SELECT_IR_SCAN:
        tap_state = TAP_TEST_LOGIC_RESET;
        break;
    case TAP_CAPTURE_IR:
        tap_state = TAP_EXIT1_IR;
        break;
    case TAP_SHIFT_IR:
        tap_state = TAP_EXIT1_IR;
        break;
    case TAP_EXIT1_IR:
        tap_state = TAP_UPDATE_IR;
        break;
    case TAP_PAUSE_IR:
        tap_state = TAP_EXIT2_IR;
        break;
    case TAP_EXIT2_IR:
        tap_state = TAP_UPDATE_IR;
        break;
    case TAP_UPDATE_IR:
        tap_state = TAP_SELECT_DR_SCAN;
        break;
    default:
        tap_state = TAP_TEST_LOGIC_RESET;
        break;
    }
}

void tap_clock_tms_low(void)
{
    switch (tap_state) {
    case TAP_TEST_LOGIC_RESET:
        tap_state = TAP_RUN_TEST_IDLE;
        break;
    case TAP_RUN_TEST_IDLE:
        tap_state = TAP_RUN_TEST_IDLE;
        break;
    case TAP_SELECT_DR_SCAN:
        tap_state = TAP_CAPTURE_DR;
        break;
    case TAP_CAPTURE_DR:
        tap_state = TAP_SHIFT_DR;
        break;
    case TAP_SHIFT_DR:
        tap_state = TAP_SHIFT_DR;
        break;
    case TAP_EXIT1_DR:
        tap_state = TAP_PAUSE_DR;
        break;
    case TAP_PAUSE_DR:
        tap_state = TAP_PAUSE_DR;
        break;
    case TAP_EXIT2_DR:
        tap_state = TAP_SHIFT_DR;
        break;
    case TAP_UPDATE_DR:
        tap_state = TAP_RUN_TEST_IDLE;
        break;
    case TAP_SELECT_IR_SCAN:
        tap_state = TAP_CAPTURE_IR;
        break;
    case TAP_CAPTURE_IR:
        tap_state = TAP_SHIFT_IR;
        break;
    case TAP_SHIFT_IR:
        tap_state = TAP_SHIFT_IR;
        break;
    case TAP_EXIT1_IR:
        tap_state = TAP_PAUSE_IR;
        break;
    case TAP_PAUSE_IR:
        tap_state = TAP_PAUSE_IR;
        break;
    case TAP_EXIT2_IR:
        tap_state = TAP_SHIFT_IR;
        break;
    case TAP_UPDATE_IR:
        tap_state = TAP_RUN_TEST_IDLE;
        break;
    default:
        tap_state = TAP_TEST_LOGIC_RESET;
        break;
    }
}
