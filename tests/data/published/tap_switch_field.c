/* The Test Access Port (TAP) controller of IEEE Std 1149.1: 16 states, one step at each rising edge of TCK.
 * Form: the state is a struct field reached through a pointer; each case stores the next state at once. */

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

struct tap {
    enum tap_state state;
    unsigned long clocks;
};

void tap_init(struct tap *t)
{
    t->state = TAP_TEST_LOGIC_RESET;
    t->clocks = 0;
}

void tap_clock(struct tap *t, int tms)
{
    t->clocks++;
    switch (t->state) {
    case TAP_TEST_LOGIC_RESET:
        if (tms) {
            t->state = TAP_TEST_LOGIC_RESET;
        } else {
            t->state = TAP_RUN_TEST_IDLE;
        }
        break;
    case TAP_RUN_TEST_IDLE:
        if (tms) {
            t->state = TAP_SELECT_DR_SCAN;
        } else {
            t->state = TAP_RUN_TEST_IDLE;
        }
        break;
    case TAP_SELECT_DR_SCAN:
        if (tms) {
            t->state = TAP_SELECT_IR_SCAN;
        } else {
            t->state = TAP_CAPTURE_DR;
        }
        break;
    case TAP_CAPTURE_DR:
        if (tms) {
            t->state = TAP_EXIT1_DR;
        } else {
            t->state = TAP_SHIFT_DR;
        }
        break;
    case TAP_SHIFT_DR:
        if (tms) {
            t->state = TAP_EXIT1_DR;
        } else {
            t->state = TAP_SHIFT_DR;
        }
        break;
    case TAP_EXIT1_DR:
        if (tms) {
            t->state = TAP_UPDATE_DR;
        } else {
            t->state = TAP_PAUSE_DR;
        }
        break;
    case TAP_PAUSE_DR:
        if (tms) {
            t->state = TAP_EXIT2_DR;
        } else {
            t->state = TAP_PAUSE_DR;
        }
        break;
    case TAP_EXIT2_DR:
        if (tms) {
            t->state = TAP_UPDATE_DR;
        } else {
            t->state = TAP_SHIFT_DR;
        }
        break;
    case TAP_UPDATE_DR:
        if (tms) {
            t->state = TAP_SELECT_DR_SCAN;
        } else {
            t->state = TAP_RUN_TEST_IDLE;
        }
        break;
    case TAP_SELECT_IR_SCAN:
        if (tms) {
            t->state = TAP_TEST_LOGIC_RESET;
        } else {
            t->state = TAP_CAPTURE_IR;
        }
        break;
    case TAP_CAPTURE_IR:
        if (tms) {
            t->state = TAP_EXIT1_IR;
        } else {
            t->state = TAP_SHIFT_IR;
        }
        break;
    case TAP_SHIFT_IR:
        if (tms) {
            t->state = TAP_EXIT1_IR;
        } else {
            t->state = TAP_SHIFT_IR;
        }
        break;
    case TAP_EXIT1_IR:
        if (tms) {
            t->state = TAP_UPDATE_IR;
        } else {
            t->state = TAP_PAUSE_IR;
        }
        break;
    case TAP_PAUSE_IR:
        if (tms) {
            t->state = TAP_EXIT2_IR;
        } else {
            t->state = TAP_PAUSE_IR;
        }
        break;
    case TAP_EXIT2_IR:
        if (tms) {
            t->state = TAP_UPDATE_IR;
        } else {
            t->state = TAP_SHIFT_IR;
        }
        break;
    case TAP_UPDATE_IR:
        if (tms) {
            t->state = TAP_SELECT_DR_SCAN;
        } else {
            t->state = TAP_RUN_TEST_IDLE;
        }
        break;
    default:
        t->state = TAP_TEST_LOGIC_RESET;
        break;
    }
}
