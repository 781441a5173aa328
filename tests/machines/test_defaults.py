"""What a ``default`` does: falls into it, and states that it alone handles because no case does."""

from pathlib import Path

import pytest
from tests.marks import inspect_texts

HEAD = """
    enum lift { LIFT_IDLE, LIFT_WEIGH, LIFT_TARE };
    enum ev { EV_LID, EV_FULL };
    static enum lift lift_state = LIFT_IDLE;
    void fault_report(void);
    void count_idle(void);
"""


def told(folder: Path, rule: str, text: str) -> list[str]:
    """The levels at which a rule fails a program, or the kinds of its other obligations."""
    outcome = inspect_texts(folder, {"lift.c": HEAD + text})
    return [item.level or item.kind for item in outcome.obligations if item.rule == rule]


def falling(before: str, default: str) -> str:
    return f"""
    void lift_step(enum ev ev)
    {{
        switch (lift_state) {{
        case LIFT_IDLE: if (ev == EV_LID) {{ lift_state = LIFT_TARE; }} break;
        case LIFT_WEIGH: if (ev == EV_FULL) {{ lift_state = LIFT_IDLE; }} break;
        case LIFT_TARE: {before}
        default: {default} break;
        }}
    }}
    """


@pytest.mark.parametrize(
    ("before", "default", "levels"),
    [
        ("if (ev == EV_FULL) { lift_state = LIFT_WEIGH; }", "lift_state = LIFT_IDLE;", ["warning"]),
        ("if (ev == EV_FULL) { lift_state = LIFT_WEIGH; }", "fault_report();", ["warning"]),
        ("if (ev == EV_FULL) { lift_state = LIFT_WEIGH; }", "count_idle();", ["note"]),
        ("if (ev == EV_FULL) { lift_state = LIFT_WEIGH; break; }", "lift_state = LIFT_IDLE;", ["note"]),
        ("if (ev == EV_FULL) { lift_state = LIFT_WEIGH; }", "", ["pass"]),
        ("if (ev == EV_FULL) { lift_state = LIFT_WEIGH; } /* fall through */", "lift_state = LIFT_IDLE;", ["pass"]),
        ("", "lift_state = LIFT_IDLE;", []),
        ("if (ev == EV_FULL) { lift_state = LIFT_WEIGH; } break;", "fault_report();", []),
    ],
)
def test_a_fall_into_the_default(before: str, default: str, levels: list[str], tmp_path: Path) -> None:
    assert told(tmp_path, "SM06", falling(before, default)) == levels


def test_a_fall_into_an_empty_default_leaves_what_is_committed_after(tmp_path: Path) -> None:
    text = """
    void lift_step(enum ev ev)
    {
        enum lift next = lift_state;
        switch (lift_state) {
        case LIFT_IDLE: if (ev == EV_LID) { next = LIFT_TARE; } break;
        case LIFT_WEIGH: if (ev == EV_FULL) { next = LIFT_IDLE; } break;
        case LIFT_TARE: if (ev == EV_FULL) { next = LIFT_WEIGH; }
        default: break;
        }
        if (next != lift_state) { count_idle(); }
        lift_state = next;
    }
    """
    assert told(tmp_path, "SM06", text) == ["pass"]
    assert told(tmp_path, "SM06", text.replace("        if (next != lift_state) { count_idle(); }", "")) == ["pass"]


WAYS = {
    "directly": "switch (lift_state) { CASES default: lift_state = LIFT_IDLE; break; }",
    "a next state": "enum lift next = lift_state; switch (lift_state) { CASES default: next = LIFT_IDLE; break; } "
    "lift_state = next;",
    "a working copy": "enum lift now = lift_state; switch (now) { CASES default: now = LIFT_IDLE; break; } "
    "lift_state = now;",
    "a setter": "switch (lift_state) { CASES default: lift_enter(LIFT_IDLE); break; }",
}
STORES = {"directly": "lift_state = {};", "a next state": "next = {};", "a working copy": "now = {};"}


@pytest.mark.parametrize("way", WAYS)
def test_a_default_that_recovers_hides_a_state(way: str, tmp_path: Path) -> None:
    store = STORES.get(way, "lift_enter({});")
    cases = (
        f"case LIFT_IDLE: if (ev == EV_LID) {{ {store.format('LIFT_WEIGH')} }} break; "
        f"case LIFT_WEIGH: if (ev == EV_FULL) {{ {store.format('LIFT_TARE')} }} break;"
    )
    text = (
        "static void lift_enter(enum lift to) { lift_state = to; }\n"
        f"void lift_step(enum ev ev) {{ {WAYS[way].replace('CASES', cases)} }}\n"
    )
    assert told(tmp_path, "SM02", text) == ["pass", "pass", "warning"]
