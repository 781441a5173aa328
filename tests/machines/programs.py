"""Machines made at random: a table, a form, a place for the state, a family of constants, and one slip or none.

What is true of each program follows from how it was made: its transitions, what it does with each event in each
state, and the rule that should speak and on which lines. ``host`` runs the programs against the second of these.
"""

import random
from dataclasses import dataclass, replace

import networkx
from tests.machines.slips import (
    AS_WELL,
    ONE_FUNCTION,
    SLIPS,
    VARIETY,
    Draft,
    Unfit,
    check_fit,
    early_returns,
    graph,
    machine_in_a_state,
    stacked_labels,
)
from tests.machines.style import Family, Storage, Style, clean
from tests.machines.tables import Edge, Inputs, Table, random_table
from tests.machines.written import FORMS, event_function, handler

STORAGES: tuple[Storage, ...] = ("static", "local", "member", "object member", "pointer", "element", "bit-field")
COUNTS = (3, 4, 5, 6, 7, 8, 9, 10, 12, 15, 20, 28, 40)


@dataclass(frozen=True, slots=True)
class Made:
    """One program: its text, and what is true of it.

    ``table`` is what it does. ``rules`` may speak of the slip, on one of ``lines`` or of a state in ``about``;
    ``follows`` may speak as well, of the same cause. ``loose`` are transitions that may be told or not, ``stops``
    (state, event) that must not be run.
    """

    number: int
    form: str
    style: Style
    table: Table
    slip: str
    rules: tuple[str, ...]
    text: str
    lines: tuple[int, ...]
    about: tuple[str, ...]
    follows: tuple[str, ...]
    loose: frozenset[Edge]
    stops: frozenset[tuple[str, str]]

    @property
    def name(self) -> str:
        return f"p{self.number:04}"

    @property
    def label(self) -> str:
        """The form, told apart where one writer knows two."""
        if self.form == "switch" and not self.style.chains:
            return "state then event"
        return "handlers in a table" if self.form == "next returned" and self.style.variant % 2 else self.form

    def after(self, state: str, event: str, inputs: Inputs) -> str:
        """What the program does."""
        if state == self.style.unhandled:
            return self.table.initial if self.style.default == "recovers" else state
        return self.table.after(state, event, inputs)

    def edges(self) -> set[Edge]:
        """The transitions that the program holds; the event ``*`` stands for any."""
        gone = self.style.unhandled
        found = {edge for edge in self.table.edges() if edge[0] != gone}
        if gone and self.style.default == "recovers":
            found.add((gone, "*", self.table.initial))
        return found

    def may_be_told(self) -> set[Edge]:
        """Transitions that stand in the source and are never taken, and those that are a matter of taste.

        Never taken are those of states that are never entered, those whose guard never holds, and those that are
        overwritten. A handler that gives its own state back, and a table's cell that holds its own state, stay.
        """
        alive = networkx.descendants(graph(self.edges() | self.loose), self.table.initial) | {self.table.initial}
        found = set(self.loose) | {edge for edge in self.edges() if edge[0] not in alive}
        found |= self._never_taken()
        if self.form in ("next returned", "table", "goto"):
            found |= {(state, "*", state) for state in self.table.states}
        return found

    def _never_taken(self) -> set[Edge]:
        cells = [*self.style.table.cells.items(), *self.table.cells.items()]
        written = {(*cell, to) for cell, steps in cells for step in steps for to in (step.target, step.first) if to}
        return written - self.edges()

    def functions(self, edge: Edge) -> set[str]:
        """The functions that can be said to take a transition."""
        state, event, _ = edge
        step = f"{self.table.noun}_step"
        match self.form:
            case "event functions":
                return {event_function(self.style, event)}
            case "function pointer":
                return {handler(self.style, state), step}
            case "next returned":
                return {step, handler(self.style, state)}
            case "goto":
                return {f"{self.table.noun}_run"}
        return {step}

    def spelled(self, state: str) -> str:
        """The name that a state has in the program: of its constant, its function or its label."""
        match self.form:
            case "function pointer":
                return handler(self.style, state)
            case "goto":
                return state.split("_", 1)[-1].lower()
        return self.style.s(state)


LABELS = (*FORMS, "state then event", "handlers in a table")
"""All forms by their labels."""


def make(number: int) -> Made:
    """The program of a number: every form comes up, half of the programs have a slip, every slip comes up."""
    for attempt in range(200):
        try:
            return _make(number, random.Random(f"{number}/{attempt}"))
        except Unfit:
            continue
    raise AssertionError(f"no program {number}")


def _make(number: int, dice: random.Random) -> Made:
    slip, forms, turn = "", list(FORMS), number // 2
    if number % 2:
        slip = list(SLIPS)[turn % len(SLIPS)]
        forms, turn = list(SLIPS[slip][2]), turn // len(SLIPS)
    form = forms[turn % len(forms)]
    # Tables and arrays of handlers have the states' values for subscripts.
    count = dice.choice(COUNTS)
    table = random_table(dice, count, sparse=form not in ("table", "next returned"))
    if form == "table" or dice.random() < 0.3:
        table = table.without_guards()
    places = ("static", "member") if form in ("function pointer", "goto") else STORAGES
    likely = [4, 1 if form in ONE_FUNCTION else 0, 4, 1, 1, 1, 1]
    storage: Storage = dice.choices(places, likely[:: 2 if len(places) == 2 else 1][: len(places)])[0]
    family: Family = dice.choice(FAMILIES)
    style = Style(
        table,
        storage=storage,
        family=family,
        default=dice.choice(["recovers", "recovers", "reports"]),
        chains=dice.random() < 0.5,
        variant=dice.randrange(4),
        named_type=dice.random() < 0.3,
        counted=family == "enum" and list(table.states.values()) == list(range(count)) and dice.random() < 0.25,
        volatile=storage != "pointer" and form not in ("function pointer", "goto") and dice.random() < 0.15,
    )
    draft = Draft(dice, form, table, style)
    rules: tuple[str, ...] = ()
    if slip:
        slipped, rules, _ = SLIPS[slip]
        slipped(draft)
        rules += AS_WELL.get((slip, form), AS_WELL.get((slip, style.family), ()))
    else:
        for add, fitting in VARIETY:
            if form in fitting and storage != "local" and dice.random() < 0.15:
                # What runs on neither shares a case nor leaves early.
                if not (draft.style.falls and add in (stacked_labels, early_returns, machine_in_a_state)):
                    add(draft)
    check_fit(draft)
    style = replace(draft.style, table=draft.table)
    text, lines = clean(FORMS[form](style))
    return Made(
        number,
        form,
        style,
        draft.truth or draft.table,
        slip,
        rules,
        text,
        lines,
        draft.about,
        draft.follows,
        frozenset(draft.loose),
        frozenset(draft.stops),
    )


FAMILIES: tuple[Family, ...] = ("enum", "enum", "define", "define", "numbers")
