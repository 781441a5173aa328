"""What can be wrong with a generated machine, and what right ones have besides: changes to a program while it is made.

A slip changes the table or the way it is written, at one place. The rules that should speak of it stand beside it,
with the forms in which it can be had.
"""

import random
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import networkx
from tests.machines.style import MARK, PHASES, Style
from tests.machines.tables import Cells, Edge, Guard, Step, Table
from tests.machines.written import FORMS

SWITCHES = ("switch", "next variable", "working copy", "setter")
BY_EVENT = ("event then state", "event functions")
ASSIGNING = (*SWITCHES, *BY_EVENT, "if-chain")
AT_ONCE = ("switch", "event then state", "if-chain")
ONE_FUNCTION = (
    "switch",
    "event then state",
    "if-chain",
    "next variable",
    "working copy",
    "table",
    "rows",
    "next returned",
)
VALUED = (*ASSIGNING, "table", "rows", "next returned")
PUMP = ("enum pump_state { PUMP_SHUT = 60, PUMP_RUNNING, PUMP_JAMMED };", "extern enum pump_state pump_state(void);")


class Unfit(Exception):
    """The slip cannot be had in this program."""


@dataclass(slots=True)
class Draft:
    """A program while it is made; a slip changes it. ``truth`` is what it does where that is not what is written."""

    dice: random.Random
    form: str
    table: Table
    style: Style
    truth: Table | None = None
    about: tuple[str, ...] = ()
    follows: tuple[str, ...] = ()
    loose: set[Edge] = field(default_factory=set)
    stops: set[tuple[str, str]] = field(default_factory=set)
    # States that need not be entered, or need not be left.
    never_entered: set[str] = field(default_factory=set)
    never_left: set[str] = field(default_factory=set)

    def inner(self) -> str:
        """A state except the first."""
        return self.dice.choice([state for state in self.table.states if state != self.table.initial])

    def other(self, *apart: str) -> str:
        """A state other than these."""
        return self.dice.choice([state for state in self.table.states if state not in apart])

    def moving(self) -> tuple[str, str]:
        """A cell whose first step leads elsewhere."""
        found = [cell for cell, steps in self.table.cells.items() if steps[0].target != cell[0]]
        return self.dice.choice(found)

    def put(self, state: str, event: str, *steps: Step) -> None:
        self.table.cells[state, event] = steps

    def beside(self, head: str, *body: str) -> None:
        """Add a function beside the machine's own."""
        if self.style.storage == "local":
            raise Unfit
        text = ("", f"{head}({self.style.owner or 'void'})", "{", *body, "}")
        self.style = replace(self.style, extra=(*self.style.extra, *text))


def graph(edges: set[Edge]) -> "networkx.DiGraph[str]":
    found: networkx.DiGraph[str] = networkx.DiGraph()
    found.add_edges_from((source, target) for source, _, target in edges)
    return found


def check_fit(draft: Draft) -> None:
    """Raise ``Unfit`` where a state is not entered or not left besides what the slip is about."""
    table = draft.truth or draft.table
    steps = graph(set(table.edges()) | draft.loose)
    steps.add_nodes_from(table.states)
    gone = draft.style.unhandled
    if gone:
        steps.remove_edges_from(list(steps.out_edges(gone)))
    alive = networkx.descendants(steps, table.initial) | {table.initial}
    back = networkx.ancestors(steps, table.initial) | {table.initial}
    if set(table.states) - alive - draft.never_entered or set(table.states) - back - draft.never_left:
        raise Unfit


# ---------------------------------------------------------------------------------------------------------- slips

Slip = Callable[[Draft], None]


def break_missing(draft: Draft) -> None:
    """A case without ``break`` whose step the next case overwrites."""
    events = draft.table.events
    event = draft.dice.choice(events)
    names = list(draft.table.states)
    if draft.form in BY_EVENT:
        names = [state for state in names if (state, event) in draft.table.cells]
        if len(names) < 2:
            raise Unfit
    at = draft.dice.randrange(len(names) - 1)
    here, there = names[at], names[at + 1]
    first = draft.other(here)
    draft.put(here, event, Step(first))
    draft.put(there, event, Step(draft.other(there, first)))
    draft.style = replace(draft.style, falls=here, fall_event=event)
    cells: Cells = dict(draft.table.cells)
    for each in [event] if draft.form in BY_EVENT else events:
        steps = (*cells.get((there, each), ()), *cells.get((here, each), ()))
        if steps:
            cells[here, each] = steps
    draft.truth = replace(draft.table, cells=cells)


def break_missing_before_default(draft: Draft) -> None:
    """The last case without ``break``: the default stores over what it stored."""
    last = list(draft.table.states)[-1]
    event = draft.dice.choice(draft.table.events)
    draft.put(last, event, Step(draft.other(last, draft.table.initial)))
    draft.style = replace(draft.style, falls=last, default="recovers")
    cells = {cell: steps for cell, steps in draft.table.cells.items() if cell[0] != last}
    cells |= {(last, each): (Step(draft.table.initial),) for each in draft.table.events}
    draft.truth = replace(draft.table, cells=cells)


def state_never_entered(draft: Draft) -> None:
    """A state that no step leads to."""
    state = draft.inner()
    for cell, steps in draft.table.cells.items():
        instead = [draft.other(state) if step.target == state else step.target for step in steps]
        draft.table.cells[cell] = tuple(replace(step, target=to) for step, to in zip(steps, instead, strict=True))
    draft.about, draft.never_entered = (state,), {state}


def trap(draft: Draft) -> None:
    """A state that no step leaves."""
    state = draft.inner()
    for cell in [cell for cell in draft.table.cells if cell[0] == state]:
        del draft.table.cells[cell]
    draft.about, draft.never_left = (state,), {state}


def unhandled_state(draft: Draft) -> None:
    """A state that is stored and has no case."""
    state = draft.inner()
    draft.style = replace(draft.style, unhandled=state)
    draft.about, draft.never_left = (state,), {state}
    draft.follows = ("SM04",) if draft.style.default == "reports" else ()


def no_state(draft: Draft) -> None:
    """A stored value that is no state: a plain number, or another enumeration's constant."""
    cell = draft.moving()
    value, name = max(draft.table.states.values()) + draft.dice.randint(1, 3), ""
    if draft.dice.random() < 0.5 and value < 60:
        value, name = 62, "PUMP_JAMMED"
        draft.style = replace(draft.style, declared=PUMP)
    name = f"#{name or value}"
    draft.style = replace(draft.style, counted=False)
    step, *rest = draft.table.cells[cell]
    draft.put(*cell, replace(step, target=name, marked=True), *rest)
    draft.table = replace(draft.table, foreign={name: value})
    draft.about = (name.removeprefix("#"), str(value))
    draft.loose |= {(name, "*", draft.table.initial)}


def unreachable_code(draft: Draft) -> None:
    """A statement after the last of a case."""
    draft.style = replace(draft.style, stray=draft.other())


def transition_overwritten(draft: Draft) -> None:
    """A state stored and overwritten before anything can see it."""
    cell = draft.moving()
    step, *rest = draft.table.cells[cell]
    draft.put(*cell, replace(step, first=draft.other(step.target)), *rest)


def guard_never_holds(draft: Draft) -> None:
    """A guard that can never hold: by itself, or after an earlier branch."""
    cell = draft.moving()
    steps = draft.table.cells[cell]
    if draft.dice.random() < 0.5:
        draft.put(*cell, Step(draft.other(cell[0], steps[0].target), Guard("never", 60), marked=True), *steps)
    else:
        target = steps[0].target
        draft.put(*cell, Step(target, Guard("over", 20)), Step(draft.other(target), Guard("over", 40), marked=True))


def silent_default(draft: Draft) -> None:
    """A default that does nothing."""
    draft.style = replace(draft.style, default="silent")


def not_committed(draft: Draft) -> None:
    """A next state that is worked out and not committed: a handler's answer, or on a path that leaves before."""
    if draft.form == "next returned":
        state = draft.inner()
        draft.style = replace(draft.style, dropped=state, variant=0)
        cells = {cell: steps for cell, steps in draft.table.cells.items() if cell[0] != state}
        draft.truth = replace(draft.table, cells=cells)
        draft.never_left, draft.follows = {state}, ("SM04",)
        return
    cell = draft.moving()
    step, *rest = draft.table.cells[cell]
    draft.put(*cell, replace(step, lost=True, marked=True), *rest)


def hole(draft: Draft) -> None:
    """A cell that a table leaves out, which then leads to the state of value 0."""
    state, event = draft.inner(), draft.dice.choice(draft.table.events)
    for name in draft.table.states:
        for each in draft.table.events:
            draft.table.cells.setdefault((name, each), (Step(name),))
    del draft.table.cells[state, event]
    check_fit(draft)  # whether a hole leads anywhere is the question
    draft.put(state, event, Step(draft.table.initial))
    draft.loose = {(state, event, draft.table.initial)}
    draft.style = replace(draft.style, left_out=(state, event), variant=0)
    draft.about = (state,)


def handler_missing(draft: Draft) -> None:
    """A table of handlers without one for a state that is entered."""
    state = draft.inner()
    draft.style = replace(draft.style, no_handler=state, variant=1)
    draft.stops = {(state, event) for event in draft.table.events}
    draft.loose = {edge for edge in draft.table.edges() if edge[0] == state}
    draft.about, draft.follows = (state,), ("SM02", "SM04")


def assigned(draft: Draft) -> None:
    """``=`` for ``==`` in a function beside the machine."""
    state = draft.inner()
    test = f"    if ({draft.style.lvalue} = {draft.style.s(state)}) {{{MARK}"
    draft.beside(f"void {draft.table.noun}_lamp", test, "        fault_report();", "    }")
    draft.loose = {(source, "*", state) for source in draft.table.states}
    draft.follows = ("SM17",)


def other_enumeration(draft: Draft) -> None:
    """The state compared with a constant of another enumeration."""
    draft.style = replace(draft.style, declared=PUMP)
    test = f"    if ({draft.style.lvalue} == PUMP_RUNNING) {{{MARK}"
    draft.beside(f"void {draft.table.noun}_lamp", test, "        fault_report();", "    }")
    draft.follows = ("SM08", "SM18")


def event_dropped(draft: Draft) -> None:
    """An event that every state handles but one."""
    state, event = draft.inner(), draft.dice.choice(draft.table.events)
    for name in draft.table.states:
        draft.table.cells.setdefault((name, event), (Step(draft.table.initial),))
    del draft.table.cells[state, event]
    draft.about = (state,)


def zero_is_no_state(draft: Draft) -> None:
    """States from 1 upward, and a variable that starts as 0."""
    draft.table = replace(draft.table, states={name: value + 1 for name, value in draft.table.states.items()})
    draft.style = replace(draft.style, storage="static", uninitialised=True, default="reports", counted=False)


def dispatches_differ(draft: Draft) -> None:
    """Two dispatches on one variable: the second leaves a state out."""
    state = draft.inner()
    lines = [f"    switch ({draft.style.lvalue}) {{{MARK}"]
    for number, name in enumerate(draft.table.states):
        if name != state:
            lines += [f"    case {draft.style.s(name)}:", f"        return {number % 7 + 1}u;"]
    draft.beside(f"unsigned {draft.table.noun}_colour", *lines, "    default:", "        return 0u;", "    }")
    draft.about = (state,)


def no_time_limit(draft: Draft) -> None:
    """A state that waits on one event for ever, where its siblings give up after a time."""
    state = draft.inner()
    tick, event = draft.table.events[:2]
    for name in draft.table.states:
        if name != draft.table.initial:
            draft.put(name, tick, Step(draft.table.initial, Guard("late")))
    for each in draft.table.events:
        draft.table.cells.pop((state, each), None)
    draft.put(state, event, Step(draft.other(state)))
    draft.about = (state,)
    draft.follows = ("SM11",)


def entered_again(draft: Draft) -> None:
    """A state stored after a call that steps the machine itself."""
    if draft.style.owner or draft.style.storage == "local":
        raise Unfit
    noun = draft.table.noun
    state, event = draft.moving()
    step, *rest = draft.table.cells[state, event]
    nested = draft.dice.choice([each for each in draft.table.events if each != event])
    if (state, nested) not in draft.table.cells:
        raise Unfit
    draft.put(state, event, replace(step, actions=(*step.actions, f"{noun}_notify"), marked=True), *rest)
    kg = ", 0" if draft.table.guarded() else ""
    draft.style = replace(
        draft.style,
        internal=(f"{noun}_notify",),
        declared=(*draft.style.declared, f"static void {noun}_notify(void);"),
    )
    draft.beside(f"static void {noun}_notify", f"    {noun}_step({nested}{kg});")


def busy_left(draft: Draft) -> None:
    """A busy flag that one way out of the function leaves set, where the others clear it."""
    working(draft)
    cells = draft.dice.sample(sorted(draft.table.cells), 3)
    for cell in cells:
        step, *rest = draft.table.cells[cell]
        draft.put(*cell, replace(step, leaves="forgets" if cell == cells[0] else "clears"), *rest)


def working(draft: Draft) -> None:
    """A flag that is set while the machine works."""
    flag = f"static bool {draft.table.noun}_busy;"
    draft.style = replace(draft.style, busy=True, declared=(*draft.style.declared, flag))


# ---------------------------------------------------------------------------------------------------------- variety


def run_on_as_meant(draft: Draft) -> None:
    """A case that runs on, with a comment that says so."""
    break_missing(draft)
    draft.style = replace(draft.style, fall_marked=True)


def stacked_labels(draft: Draft) -> None:
    """Two states that share a case."""
    names = list(draft.table.states)
    at = draft.dice.randrange(len(names) - 1)
    for event in draft.table.events:
        draft.table.cells.pop((names[at], event), None)
        if (names[at + 1], event) in draft.table.cells:
            draft.put(names[at], event, *draft.table.cells[names[at + 1], event])
    draft.style = replace(draft.style, stacked=names[at])


def early_returns(draft: Draft) -> None:
    """A busy flag that every way out clears."""
    working(draft)
    for cell in draft.dice.sample(sorted(draft.table.cells), 2):
        step, *rest = draft.table.cells[cell]
        draft.put(*cell, replace(step, leaves="clears"), *rest)


def reset(draft: Draft) -> None:
    """A function that starts the machine again."""
    start = draft.table.initial
    draft.beside(f"void {draft.table.noun}_restart", f"    {draft.style.lvalue} = {draft.style.s(start)};")
    draft.loose |= {(state, "*", start) for state in draft.table.states}


def query(draft: Draft) -> None:
    """A function that says whether the machine is in one of two states."""
    one = draft.inner()
    tests = [f"{draft.style.lvalue} == {draft.style.s(state)}" for state in (one, draft.other(one))]
    draft.beside(f"bool {draft.table.noun}_moves", f"    return {tests[0]} || {tests[1]};")


def names(draft: Draft) -> None:
    """A function that gives each state a text."""
    lines = [f"    switch ({draft.style.lvalue}) {{"]
    for state in draft.table.states:
        lines += [f"    case {draft.style.s(state)}:", f'        return "{state.split("_", 1)[1].lower()}";']
    draft.beside(f"const char *{draft.table.noun}_text", *lines, "    default:", '        return "?";', "    }")


def interrupt(draft: Draft) -> None:
    """A function that looks at the state and stores another, as an interrupt does."""
    state = draft.inner()
    to = draft.other(state)
    lvalue = draft.style.lvalue
    lines = [f"    if ({lvalue} == {draft.style.s(state)}) {{", f"        {lvalue} = {draft.style.s(to)};", "    }"]
    draft.beside(f"void {draft.table.noun}_jammed", *lines)
    draft.loose |= {(state, "*", to)}


def machine_in_a_state(draft: Draft) -> None:
    """A state that has a machine of its own."""
    noun = draft.table.noun
    names = [f"{noun.upper()}_PUSH_{phase}" for phase in PHASES]
    words = (
        f"enum {noun}_push {{ {', '.join(names)} }};",
        f"static enum {noun}_push {noun}_push = {names[0]};",
        "extern bool push_ready(void);",
    )
    state = draft.other(draft.style.stacked)
    draft.style = replace(draft.style, nested=state, declared=(*draft.style.declared, *words))


VARIETY: tuple[tuple[Slip, tuple[str, ...]], ...] = (
    (run_on_as_meant, SWITCHES),
    (stacked_labels, SWITCHES),
    (early_returns, AT_ONCE),
    (machine_in_a_state, SWITCHES),
    (reset, VALUED),
    (query, VALUED),
    (names, VALUED),
    (interrupt, VALUED),
)
"""What right programs have besides, and the forms that can have it."""

SLIPS: dict[str, tuple[Slip, tuple[str, ...], tuple[str, ...]]] = {
    "break missing": (break_missing, ("SM06",), (*SWITCHES, *BY_EVENT)),
    "break missing before default": (break_missing_before_default, ("SM06",), SWITCHES),
    "state never entered": (state_never_entered, ("SM03",), tuple(FORMS)),
    "trap": (trap, ("SM04",), tuple(FORMS)),
    "unhandled state": (unhandled_state, ("SM02",), (*SWITCHES, "if-chain")),
    "stored value is no state": (no_state, ("SM05",), VALUED),
    "unreachable code": (unreachable_code, ("SM15",), SWITCHES),
    "transition overwritten": (
        transition_overwritten,
        ("SM07",),
        (*[form for form in ASSIGNING if form != "setter"], "function pointer"),
    ),
    "guard never holds": (guard_never_holds, ("SM08",), (*ASSIGNING, "next returned", "function pointer", "goto")),
    "silent default": (silent_default, ("SM09",), SWITCHES),
    "not committed": (not_committed, ("SM10",), ("next variable", "next returned")),
    "hole in a table": (hole, ("SM16",), ("table",)),
    "handler missing": (handler_missing, ("SM16",), ("next returned",)),
    "= for ==": (assigned, ("SM14",), ASSIGNING),
    "other enumeration": (other_enumeration, ("SM14",), ASSIGNING),
    "event dropped": (event_dropped, ("SM11",), ("switch", "event then state", "if-chain", "next variable")),
    "zero is no state": (zero_is_no_state, ("SM13",), ("switch", "next variable", "setter")),
    "no time limit": (no_time_limit, ("SM12",), ("switch", "if-chain", "next variable", "event then state")),
    "entered again": (entered_again, ("SM19",), AT_ONCE),
    "busy flag left set": (busy_left, ("SM20",), AT_ONCE),
    "dispatches differ": (dispatches_differ, ("SM18",), (*SWITCHES, "if-chain")),
}
"""Each slip with the rules that should speak of it and the forms that it is made in."""

AS_WELL = {
    # Where each event has its own switch or row, a state that knows no event is one that nothing handles.
    **{("trap", form): ("SM02", "SM05") for form in (*BY_EVENT, "rows")},
    # Among plain numbers a state is what has a case.
    ("unhandled state", "numbers"): ("SM05",),
}
"""Rules that see the same slip in a form or a family of constants."""

REVIEWS = frozenset({"SM11", "SM12", "SM17", "SM18", "SM19", "SM20"})
"""Rules that cannot know the intent: a ``review`` of theirs counts as found."""
