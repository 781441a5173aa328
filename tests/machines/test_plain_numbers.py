"""Machines whose states are plain numbers: found in every form, and no other enumeration's names given to them."""

from pathlib import Path

from tests.marks import machine_in, steps


def test_a_working_copy(tmp_path: Path) -> None:
    machine = machine_in(
        tmp_path,
        """
        #include <stdint.h>
        static uint8_t lift_state = 0;
        void lift_step(int ev)
        {
            uint8_t now = lift_state;
            switch (now) {
            case 0: if (ev == 1) { now = 1; } break;
            case 1: if (ev == 2) { now = 2; } break;
            case 2: if (ev == 3) { now = 0; } break;
            default: now = 0; break;
            }
            lift_state = now;
        }
        """,
    )
    assert {("0", "1"), ("1", "2"), ("2", "0")} <= steps(machine)
    assert machine.variable == "lift_state"


def test_a_comparison_with_another_enumeration(tmp_path: Path) -> None:
    machine = machine_in(
        tmp_path,
        """
        #include <stdint.h>
        enum pump { PUMP_SHUT = 60, PUMP_RUNNING, PUMP_JAMMED };
        static uint8_t auger_state;
        void lamp(void);
        void auger_step(int ev)
        {
            switch (auger_state) {
            case 0: if (ev == 1) { auger_state = 1; } break;
            case 1: if (ev == 2) { auger_state = 2; } break;
            case 2: if (ev == 3) { auger_state = 0; } break;
            default: break;
            }
        }
        void auger_lamp(void) { if (auger_state == PUMP_RUNNING) { lamp(); } }
        """,
    )
    assert not {"PUMP_SHUT", "PUMP_JAMMED"} & {state.name for state in machine.states}
    assert machine.family == ""
    assert steps(machine) == {("0", "1"), ("1", "2"), ("2", "0")}
