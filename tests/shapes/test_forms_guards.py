"""How a step is taken: its guard as the source spells it, its event, what it calls, whether time is looked at."""

from pathlib import Path

import pytest
from tests.marks import machine_in

from stepring.shapes.types import Transition

HEAD = """
    enum gate { SHUT, OPENING, OPEN, STUCK };
    enum order { ORDER_OPEN, ORDER_SHUT, ORDER_STOP };
    int asked(void); int at_end(void); int calm(void); int wind(int side); void motor(int);
    void horn(void); void log_it(int);
    unsigned long now(void);
    static enum gate gate; static int locked, load; static unsigned long since;
    #define ALLOWED(x) ((x) && !locked)
    #define LIMIT 40
"""


def step(tmp_path: Path, body: str, source: str = "SHUT", target: str = "OPENING", extra: str = "") -> Transition:
    """The one step of a machine from a state to another; the rest keeps the variable a machine."""
    rest = """
        void on_end(void) {
            switch (gate) { case OPENING: gate = OPEN; break; case OPEN: gate = SHUT; break; default: break; }
        }
    """
    machine = machine_in(tmp_path, HEAD + extra + body + rest)
    found = [one for one in machine.transitions if (one.source, one.target) == (source, target)]
    assert len(found) == 1, found
    return found[0]


# name: (the code of the case SHUT, the guard)
GUARDS = {
    "one condition": ("if (asked()) gate = OPENING;", "asked()"),
    "spelled as written": ("if (wind( 2 )>LIMIT) gate = OPENING;", "wind( 2 )>LIMIT"),
    "conjunction": ("if (asked() && load < LIMIT) gate = OPENING;", "asked() && load < LIMIT"),
    "nested": ("if (asked()) { if (!locked) gate = OPENING; }", "asked() && !locked"),
    "disjunction": ("if (asked() || calm()) gate = OPENING;", "asked() || calm()"),
    "both": ("if (calm() && (asked() || load == 0)) gate = OPENING;", "calm() && (asked() || load == 0)"),
    "else": ("if (load >= LIMIT) horn(); else gate = OPENING;", "load < LIMIT"),
    "else if": ("if (locked) horn(); else if (asked()) gate = OPENING;", "!locked && asked()"),
    "leaves early": ("if (!asked()) break; if (locked == 1) return; gate = OPENING;", "asked() && locked != 1"),
    "what comes together again says nothing": (
        "if (locked) horn(); else motor(0); if (asked()) gate = OPENING;",
        "asked()",
    ),
    "nothing": ("horn(); gate = OPENING;", ""),
    "a loop's own condition says nothing": (
        "for (int i = 0; i < 3; i++) { if (wind(i) > 9) gate = OPENING; }",
        "wind(i) > 9",
    ),
    "arms of a choice": ("gate = asked() ? OPENING : SHUT;", "asked()"),
    "a group before an operator": ("if ((load + 1) * 2 > LIMIT) gate = OPENING;", "(load + 1) * 2 > LIMIT"),
    "a next state": (
        "{ enum gate next = gate; if (asked()) next = OPENING; if (calm()) gate = next; }",
        "asked() && calm()",
    ),
    "assigned and compared": ("{ int w; if ((w = wind(1)) > 3) gate = OPENING; }", "(w = wind(1)) > 3"),
}


@pytest.mark.parametrize("name", GUARDS)
def test_the_guard_is_what_stands_on_the_way(name: str, tmp_path: Path) -> None:
    code, guard = GUARDS[name]
    taken = step(tmp_path, "void run(void) { switch (gate) { case SHUT: " + code + " break; default: break; } }")
    assert taken.guard == guard
    assert taken.event == ""


def test_conditions_round_the_dispatch_count_and_early_ways_out_do_not(tmp_path: Path) -> None:
    taken = step(
        tmp_path,
        "void run(int *p) { if (!p) return; if (calm()) { switch (gate) { case SHUT: if (asked()) gate ="
        " OPENING; break;"
        " default: break; } } }",
    )
    assert taken.guard == "calm() && asked()"


def test_a_guard_of_a_comparison_leaves_the_state_out(tmp_path: Path) -> None:
    taken = step(tmp_path, "void run(void) { if (gate == SHUT && asked() && !locked) gate = OPENING; }")
    assert taken.guard == "asked() && !locked"


def test_the_caller_and_the_setter_add_their_conditions(tmp_path: Path) -> None:
    taken = step(
        tmp_path,
        "static void go(enum gate to) { if (!locked) { motor(1); gate = to; } }"
        "void run(void) { switch (gate) { case SHUT: if (asked()) go(OPENING); break; default: break; } }",
    )
    assert taken.guard == "asked() && !locked"
    assert taken.actions == ("go", "motor")


# name: (the whole function, the event, the rest of the guard)
EVENTS = {
    "an outer switch": (
        "void on(enum order order) { switch (order) { case ORDER_OPEN: if (gate == SHUT && calm()) gate ="
        " OPENING; break;"
        " default: break; } }",
        "order == ORDER_OPEN",
        "calm()",
    ),
    "an inner switch": (
        "void on(enum order order) { switch (gate) { case SHUT: switch (order) { case ORDER_OPEN: case ORDER_STOP:"
        " gate = OPENING; break; default: break; } break; default: break; } }",
        "(order == ORDER_OPEN || order == ORDER_STOP)",
        "",
    ),
    "a comparison of the parameter": (
        "void on(enum order order) { if (gate == SHUT) { if (order == ORDER_OPEN && calm()) gate = OPENING; } }",
        "order == ORDER_OPEN",
        "calm()",
    ),
    "a byte": ("void on(char c) { if (gate == SHUT && c == ':') gate = OPENING; }", "c == ':'", ""),
    "a message's member": (
        "struct message { int command; }; void on(struct message *m) { if (m->command == 7 && gate == SHUT)"
        " gate = OPENING; }",
        "m->command == 7",
        "",
    ),
}


@pytest.mark.parametrize("name", EVENTS)
def test_the_event_is_what_tells_a_parameter_or_message(name: str, tmp_path: Path) -> None:
    code, event, rest = EVENTS[name]
    taken = step(tmp_path, code)
    assert (taken.event, taken.condition) == (event, rest)


def test_actions_are_what_the_way_calls(tmp_path: Path) -> None:
    taken = step(
        tmp_path,
        "void run(void) { log_it(0); switch (gate) { case SHUT: horn(); if (asked()) { motor(1); gate ="
        " OPENING; log_it(1); }"
        " break; default: motor(0); break; } }",
    )
    assert taken.actions == ("horn", "motor", "log_it")


@pytest.mark.parametrize(
    ("guard", "timed"),
    [
        ("now() - since > 500", True),
        ("--ticks_left == 0", True),
        ("++waited > 9", True),
        ("timeout", True),
        ("load > 500", False),
        ("asked()", False),
    ],
)
def test_what_looks_at_time_is_marked(guard: str, timed: bool, tmp_path: Path) -> None:
    taken = step(
        tmp_path,
        "void run(void) { switch (gate) { case SHUT: if (" + guard + ") gate = OPENING; break; default: break; } }",
        extra="static int ticks_left, waited, timeout;",
    )
    assert taken.guard == guard
    assert taken.timed == timed


def test_macros_stay_as_they_are_written(tmp_path: Path) -> None:
    taken = step(
        tmp_path,
        "#define BIG(x) ((x) > LIMIT)\nvoid run(void) { switch (gate) { case SHUT: if (BIG(load)) break; gate ="
        " OPENING; break;"
        " default: break; } }",
    )
    assert taken.guard == "!BIG(load)"
