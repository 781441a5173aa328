"""Machines made at random, written down in several forms: the extracted graph is the one they were made from.

The truth is known by construction: a table from (state, event) to the next state, as a program of a form that firmware
uses. Seeds are fixed, so that a failure can be looked at again.
"""

import random
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest
from tests.marks import inspect_texts

from stepring.shapes.types import Machine, Transition

SEEDS = range(48)


@dataclass(frozen=True)
class Table:
    """States with their values, the number of events, and the next state for some (state, event)."""

    states: dict[str, int]
    events: int
    next: dict[tuple[str, int], str]

    def reached(self, start: str) -> set[str]:
        """The states that can follow from one."""
        found = {start}
        while more := {target for (source, _), target in self.next.items() if source in found} - found:
            found |= more
        return found

    def of(self, state: str) -> dict[int, str]:
        return {event: target for (source, event), target in self.next.items() if source == state}


def random_table(seed: int) -> Table:
    """3 to 9 states, 1 to 4 events, about half of the cells filled.

    At least one step that can come after ST_0 leads to another state that handles the same event; without, it could be
    a value put into another coding.
    """
    dice = random.Random(seed)
    count = dice.randint(3, 9)
    values = dice.sample(range(60), count) if dice.random() < 0.4 else list(range(count))
    states = {f"ST_{number}": value for number, value in enumerate(values)}
    events = dice.randint(1, 4)
    next_: dict[tuple[str, int], str] = {}
    table = Table(states, events, next_)
    while not any(
        source != target and (target, event) in next_ and source in table.reached("ST_0")
        for (source, event), target in next_.items()
    ):
        next_.clear()
        for source in states:
            for event in range(events):
                if dice.random() < 0.5:
                    next_[source, event] = dice.choice(list(states))
    return table


# ---------------------------------------------------------------------------------------------------------- forms


def enumeration(table: Table) -> str:
    return "enum st { " + ", ".join(f"{name} = {value}" for name, value in table.states.items()) + " };\n"


def macros(table: Table) -> str:
    return "".join(f"#define {name} {value}u\n" for name, value in table.states.items())


def events(table: Table) -> str:
    return "enum ev { " + ", ".join(f"EV_{event}" for event in range(table.events)) + " };\n"


def cases(table: Table, step: Callable[[str, str], str], default: str) -> str:
    """The cases of a dispatch on the state, each with a dispatch on the event."""
    text = ""
    for state in table.states:
        text += f"    case {state}:\n"
        if table.of(state):
            text += "        switch (ev) {\n"
            for event, target in table.of(state).items():
                text += f"        case EV_{event}:\n            {step(state, target)}\n            break;\n"
            text += "        default:\n            break;\n        }\n"
        text += "        break;\n"
    return text + f"    default:\n        {default}\n        break;\n"


def chains(table: Table, step: Callable[[str, str], str]) -> str:
    """The cases with chains of tests of the event."""
    text = ""
    for state in table.states:
        text += f"    case {state}:\n"
        before = ""
        for event, target in table.of(state).items():
            text += f"        {before}if (ev == EV_{event}) {{\n            {step(state, target)}\n        }}"
            before = " else "
        text += "\n        break;\n"
    return text


def direct(table: Table) -> str:
    body = cases(table, lambda _, target: f"st = {target};", "")
    return (
        enumeration(table)
        + events(table)
        + (f"static enum st st = ST_0;\nvoid step(enum ev ev)\n{{\n    switch (st) {{\n{body}    }}\n}}\n")
    )


def next_variable(table: Table) -> str:
    body = chains(table, lambda _, target: f"next = {target};")
    return (
        macros(table)
        + events(table)
        + (
            "#include <stdint.h>\nstatic uint8_t st = ST_0;\nvoid step(int ev)\n{\n    uint8_t next = st;\n"
            f"    switch (st) {{\n{body}    }}\n    st = next;\n}}\n"
        )
    )


def returned(table: Table) -> str:
    body = cases(table, lambda _, target: f"return {target};", "")
    return (
        enumeration(table)
        + events(table)
        + (
            "struct unit { int kg; enum st st; };\n"
            f"static enum st after(enum st st, enum ev ev)\n{{\n    switch (st) {{\n{body}    }}\n    return st;\n}}\n"
            "void unit_init(struct unit *u)\n{\n    u->st = ST_0;\n}\n"
            "void step(struct unit *u, enum ev ev)\n{\n    u->st = after(u->st, ev);\n}\n"
        )
    )


def setter(table: Table) -> str:
    body = chains(table, lambda _, target: f"enter(u, {target});")
    return (
        enumeration(table)
        + events(table)
        + (
            "struct unit { int kg; enum st st; };\nvoid log_state(int st);\n"
            "static void enter(struct unit *u, enum st to)\n{\n    log_state(to);\n    u->st = to;\n}\n"
            f"void step(struct unit *u, enum ev ev)\n{{\n    switch (u->st) {{\n{body}    }}\n}}\n"
        )
    )


def working_copy(table: Table) -> str:
    body = cases(table, lambda _, target: f"st = {target};", "")
    return (
        enumeration(table)
        + events(table)
        + (
            "struct unit { unsigned kg : 4; unsigned st : 6; };\n"
            "void step(struct unit *u, enum ev ev)\n{\n    unsigned st = u->st;\n"
            f"    switch (st) {{\n{body}    }}\n    u->st = st;\n}}\n"
        )
    )


def functions(table: Table) -> str:
    text = enumeration(table) + "static enum st units[3];\n"
    for event in range(table.events):
        text += f"void on_{event}(int i)\n{{\n    switch (units[i]) {{\n"
        for state in table.states:
            target = table.next.get((state, event))
            if target is not None:
                text += f"    case {state}:\n        units[i] = {target};\n        break;\n"
        text += "    default:\n        break;\n    }\n}\n"
    return text


def stepped(table: Table) -> str:
    values = table.states

    def step(source: str, target: str) -> str:
        apart = values[target] - values[source]
        return {1: "st++;", -1: "--st;", 2: "st += 2;"}.get(apart, f"st = {target};")

    body = chains(table, step)
    return (
        enumeration(table)
        + events(table)
        + (
            f"void run(void)\n{{\n    int next_event(void);\n    enum st st = ST_0;\n    for (;;) {{\n"
            f"    int ev = next_event();\n    switch (st) {{\n{body}    }}\n    }}\n}}\n"
        )
    )


def handlers(table: Table) -> str:
    text = enumeration(table) + events(table) + "static enum st st;\n"
    for state in table.states:
        text += f"static void in_{state}(enum ev ev)\n{{\n"
        for event, target in table.of(state).items():
            text += f"    if (ev == EV_{event}) {{\n        st = {target};\n    }}\n"
        text += "}\n"
    body = "".join(f"    case {state}:\n        in_{state}(ev);\n        break;\n" for state in table.states)
    return text + f"void step(enum ev ev)\n{{\n    switch (st) {{\n{body}    }}\n}}\n"


FORMS = [direct, next_variable, returned, setter, working_copy, functions, stepped, handlers]


def event_of(step: Transition) -> int:
    """The event of a step, from the function's name or the last test in its guard."""
    if step.function.startswith("on_"):
        return int(step.function.removeprefix("on_"))
    last = step.guard.split(" && ")[-1]
    found = re.fullmatch(r"ev == (?:EV_)?(\d+)", last)
    assert found, step.guard
    return int(found[1])


@pytest.fixture(scope="module")
def machines(tmp_path_factory: pytest.TempPathFactory) -> dict[str, list[Machine]]:
    """The machines of each generated file, all found in one run."""
    files = {f"m{seed:02}.c": FORMS[seed % len(FORMS)](random_table(seed)) for seed in SEEDS}
    outcome = inspect_texts(tmp_path_factory.mktemp("generated"), files)
    found: dict[str, list[Machine]] = {name: [] for name in files}
    for machine in outcome.program.machines:
        found[Path(machine.where.file).name].append(machine)
    return found


@pytest.mark.parametrize("seed", SEEDS, ids=lambda seed: f"{seed}-{FORMS[seed % len(FORMS)].__name__}")
def test_the_graph_is_the_table(seed: int, machines: dict[str, list[Machine]]) -> None:
    table = random_table(seed)
    (machine,) = machines[f"m{seed:02}.c"]
    # A local variable starts as ST_0 each time; what that never leads to is never run.
    alive = table.reached("ST_0") if FORMS[seed % len(FORMS)] is stepped else set(table.states)
    assert {(step.source, event_of(step), step.target) for step in machine.transitions} == {
        (source, event, target) for (source, event), target in table.next.items() if source in alive
    }
    known = {state.name: state.value for state in machine.states if state.name.startswith("ST_")}
    assert known == table.states
    extra = [state for state in machine.states if not state.name.startswith("ST_")]
    assert all(state.value == 0 and state.initial for state in extra)  # what static storage starts with
    assert machine.complete
