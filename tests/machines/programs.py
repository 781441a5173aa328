"""Machines made at random: a table, a form, a place for the state, a family of constants, and one slip or none.

What is true of each program follows from how it was made: its transitions, what it does with each event in each
state, and the rule that should speak and on which lines. ``host`` runs the programs against the second of these.
"""

import random
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import networkx
from tests.machines.tables import Cells, Edge, Guard, Inputs, Step, Table, random_table
from tests.machines.written import FORMS, MARK, Family, Storage, Style, clean, event_function, handler

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
STORAGES: tuple[Storage, ...] = ("static", "local", "member", "object member", "pointer", "element", "bit-field")
COUNTS = (3, 4, 5, 6, 7, 8, 9, 10, 12, 15, 20, 28, 40)
PUMP = ("enum pump_state { PUMP_SHUT = 60, PUMP_RUNNING, PUMP_JAMMED };", "extern enum pump_state pump_state(void);")


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
    """A next state that is worked out on a path that leaves before it is committed."""
    cell = draft.moving()
    step, *rest = draft.table.cells[cell]
    draft.put(*cell, replace(step, lost=True, marked=True), *rest)


def hole(draft: Draft) -> None:
    """A cell that a table leaves out, which then leads to the state of value 0."""
    state, event = draft.inner(), draft.dice.choice(draft.table.events)
    for name in draft.table.states:
        for each in draft.table.events:
            draft.table.cells.setdefault((name, each), (Step(name),))
    draft.put(state, event, Step(draft.table.initial))
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


VARIETY: tuple[tuple[Slip, tuple[str, ...]], ...] = (
    (run_on_as_meant, SWITCHES),
    (stacked_labels, SWITCHES),
    (early_returns, AT_ONCE),
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
    "transition overwritten": (transition_overwritten, ("SM07",), (*ASSIGNING, "function pointer")),
    "guard never holds": (guard_never_holds, ("SM08",), (*ASSIGNING, "next returned", "function pointer", "goto")),
    "silent default": (silent_default, ("SM09",), SWITCHES),
    "not committed": (not_committed, ("SM10",), ("next variable",)),
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

LABELS = (*FORMS, "state then event", "handlers in a table")
"""All forms by their labels."""

AS_WELL = {
    # Where each event has its own switch, a state that knows no event is one that nothing handles.
    **{("trap", form): ("SM02", "SM05") for form in BY_EVENT},
    # Among plain numbers a state is what has a case.
    ("unhandled state", "numbers"): ("SM05",),
}
"""Rules that see the same slip in a form or a family of constants."""

REVIEWS = frozenset({"SM11", "SM12", "SM17", "SM18", "SM19", "SM20"})
"""Rules that cannot know the intent: a ``review`` of theirs counts as found."""


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
                if not (draft.style.falls and add in (stacked_labels, early_returns)):
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
