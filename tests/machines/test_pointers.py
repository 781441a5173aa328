"""States behind a pointer parameter: the machine of the variables whose addresses callers pass, all of them as one."""

from pathlib import Path

import pytest
from tests.marks import inspect_texts, machine_in, machines_in, steps

STEP = """
    enum barge { B_IDLE, B_FILL, B_SHED };
    {static} void barge_step(enum barge *state, int ev)
    {
        switch (*state) {
        case B_IDLE: if (ev == 1) { *state = B_FILL; } break;
        case B_FILL: if (ev == 2) { *state = B_SHED; } break;
        case B_SHED: if (ev == 3) { *state = B_IDLE; } break;
        }
    }
"""
STEPS = {("B_IDLE", "B_FILL"), ("B_FILL", "B_SHED"), ("B_SHED", "B_IDLE")}
ONE = "    static enum barge left;\n    void barges_step(int ev) { barge_step(&left, ev); }\n"
TWO = (
    "    static enum barge left, right = B_FILL;\n"
    "    void barges_step(int ev) { barge_step(&left, ev); barge_step(&right, ev); }\n"
)


def text(static: str = "static") -> str:
    return STEP.replace("{static}", static)


@pytest.mark.parametrize("static", ["static", ""])
@pytest.mark.parametrize(("callers", "shown"), [(ONE, "left"), (TWO, "left and right")])
def test_the_variables_that_callers_pass(static: str, callers: str, shown: str, tmp_path: Path) -> None:
    machine = machine_in(tmp_path, text(static) + callers)
    assert steps(machine) == STEPS
    assert machine.variable == shown
    assert machine.initial == (("B_IDLE",) if shown == "left" else ("B_IDLE", "B_FILL"))
    assert machine.complete


def test_the_pointer_handed_on(tmp_path: Path) -> None:
    outer = (
        "    static void barge_poll(enum barge *state) { barge_step(state, 1); }\n"
        "    static enum barge left;\n    void barges_step(void) { barge_poll(&left); }\n"
    )
    assert steps(machine_in(tmp_path, text() + outer)) == STEPS


@pytest.mark.parametrize("test", ["state == 0", "!state", "!(state && ev)", "(void *)0 == state"])
def test_a_pointer_that_is_compared_with_none(test: str, tmp_path: Path) -> None:
    guarded = text().replace("switch (*state) {", f"if ({test}) {{ return; }}\n        switch (*state) {{")
    assert steps(machine_in(tmp_path, guarded + TWO)) == STEPS


def test_a_working_copy_of_each_of_two(tmp_path: Path) -> None:
    """What the first call leaves is not what the second finds."""
    copied = text().replace("switch (*state) {", "enum barge now = *state;\n        switch (now) {")
    copied = copied.replace("*state = B", "now = B").replace(
        "break;\n        }\n", "break;\n        }\n *state = now;\n"
    )
    assert steps(machine_in(tmp_path, copied + TWO)) == STEPS


def test_a_slip_is_told(tmp_path: Path) -> None:
    outcome = inspect_texts(
        tmp_path, {"barge.c": text().replace("*state = B_SHED; } break;", "*state = B_SHED; }") + TWO}
    )
    assert [item.level for item in outcome.obligations if item.rule == "SM06" and item.kind == "fail"] == ["warning"]


@pytest.mark.parametrize(
    "callers",
    [
        "    static enum barge many[3];\n    void barges_step(int n, int ev) { barge_step(many + n, ev); }\n",
        ONE + "    void more(enum barge **all, int ev) { barge_step(all[2], ev); }\n",
    ],
)
def test_pointers_from_memory_are_left_alone(callers: str, tmp_path: Path) -> None:
    assert not machines_in(tmp_path, text() + callers)
