"""States that nothing enters: a state's own store of itself is no entry, a handler that nothing stores is never run."""

from pathlib import Path

import pytest
from tests.marks import inspect_texts, steps

SWITCH = """
    enum lift { LIFT_IDLE, LIFT_WEIGH, LIFT_TARE };
    static enum lift lift_state;
    void lift_step(int ev)
    {
        switch (lift_state) {
        case LIFT_IDLE: if (ev == 1) { lift_state = LIFT_WEIGH; } break;
        case LIFT_WEIGH: if (ev == 2) { lift_state = LIFT_IDLE; } break;
        case LIFT_TARE: lift_state = (ev == 3) ? LIFT_IDLE : LIFT_TARE; break;
        }
    }
"""
ROWS = """
    enum lift { LIFT_IDLE, LIFT_WEIGH, LIFT_TARE };
    static enum lift lift_state;
    static const unsigned char lift_next[3][2] = {
        {LIFT_WEIGH, LIFT_IDLE}, {LIFT_WEIGH, LIFT_IDLE}, {LIFT_TARE, LIFT_IDLE},
    };
    void lift_step(unsigned ev) { lift_state = (enum lift)lift_next[lift_state][ev & 1u]; }
"""
RETURNED = """
    enum lift { LIFT_IDLE, LIFT_WEIGH, LIFT_TARE };
    static enum lift lift_state;
    static enum lift in_idle(int ev) { return ev == 1 ? LIFT_WEIGH : LIFT_IDLE; }
    static enum lift in_weigh(int ev) { return ev == 2 ? LIFT_IDLE : LIFT_WEIGH; }
    static enum lift in_tare(int ev) { return ev == 3 ? LIFT_IDLE : LIFT_TARE; }
    static enum lift (*const handlers[])(int) = { in_idle, in_weigh, in_tare };
    void lift_step(int ev) { lift_state = handlers[lift_state](ev); }
"""


@pytest.mark.parametrize("text", [SWITCH, ROWS, RETURNED], ids=["switch", "rows", "returned"])
def test_a_store_of_itself_is_no_entry(text: str, tmp_path: Path) -> None:
    outcome = inspect_texts(tmp_path, {"lift.c": text})
    told = [item for item in outcome.obligations if item.rule == "SM03" and item.kind == "fail"]
    assert [(item.level, item.states) for item in told] == [("warning", ("LIFT_TARE",))]
    assert "its own code" in told[0].what


@pytest.mark.parametrize("text", [SWITCH, ROWS, RETURNED], ids=["switch", "rows", "returned"])
def test_a_store_elsewhere_is_one(text: str, tmp_path: Path) -> None:
    text += "    void lift_tare(void) { lift_state = LIFT_TARE; }\n"
    outcome = inspect_texts(tmp_path, {"lift.c": text})
    assert not [item for item in outcome.obligations if item.rule == "SM03" and item.kind == "fail"]


HANDLERS = """
    typedef void handler(int ev);
    static void in_idle(int ev); static void in_weigh(int ev); static void in_tare(int ev);
    static handler *lift_now = in_idle;
    static void in_idle(int ev) { if (ev == 1) { lift_now = in_weigh; } }
    static void in_weigh(int ev) { if (ev == 2) { lift_now = in_idle; } }
    static void in_tare(int ev) { if (ev == 3) { lift_now = in_weigh; } }
    void lift_step(int ev) { lift_now(ev); }
"""


def test_a_handler_that_nothing_stores(tmp_path: Path) -> None:
    outcome = inspect_texts(tmp_path, {"lift.c": HANDLERS})
    (machine,) = outcome.program.machines
    assert steps(machine) == {("in_idle", "in_weigh"), ("in_weigh", "in_idle"), ("in_tare", "in_weigh")}
    told = [item for item in outcome.obligations if item.rule == "SM03" and item.kind == "fail"]
    assert [(item.level, item.states) for item in told] == [("warning", ("in_tare",))]


@pytest.mark.parametrize(
    "more",
    [
        "void lift_reset(void) { in_tare(3); }",  # called
        "void (*const lift_exit)(int) = in_tare;",  # its address is taken
    ],
)
def test_a_function_that_is_used_otherwise_is_no_handler(more: str, tmp_path: Path) -> None:
    outcome = inspect_texts(tmp_path, {"lift.c": f"{HANDLERS}    {more}\n"})
    (machine,) = outcome.program.machines
    assert {state.name for state in machine.states} == {"in_idle", "in_weigh"}


def test_a_function_of_another_type_that_nothing_calls(tmp_path: Path) -> None:
    """No handler, and never run: no steps are told of it."""
    text = HANDLERS.replace("in_tare(int ev)", "lift_reset(void)").replace("if (ev == 3)", "")
    (machine,) = inspect_texts(tmp_path, {"lift.c": text}).program.machines
    assert steps(machine) == {("in_idle", "in_weigh"), ("in_weigh", "in_idle")}
