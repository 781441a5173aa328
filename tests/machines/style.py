"""What C texts of state tables are made of: how a state is kept and spelled, and the parts that all forms share.

A ``Style`` holds all that a text depends on besides its form, slips included. ``MARK`` ends the lines on which a slip
stands; ``clean`` takes it off and says which they are.
"""

import textwrap
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from typing import Literal, TypeAlias

from tests.machines.tables import Step, Table

MARK = "\x01"
Storage: TypeAlias = Literal["static", "local", "member", "object member", "pointer", "element", "bit-field"]
Family: TypeAlias = Literal["enum", "define", "numbers"]
Default: TypeAlias = Literal["recovers", "reports", "silent"]
Store: TypeAlias = Callable[[Step], list[str]]


@dataclass(frozen=True, slots=True)
class Style:
    """All that a text depends on besides its form; the last fields are slips in the way it is written."""

    table: Table
    storage: Storage = "static"
    family: Family = "enum"
    default: Default = "recovers"
    chains: bool = False  # events told apart by if, not by switch
    variant: int = 0
    falls: str = ""  # the state whose case lacks its break
    fall_event: str = ""  # where each event has a switch of its own: the event of that case
    unhandled: str = ""  # the state without a case
    stray: str = ""  # the state whose case is followed by a statement that nothing reaches
    left_out: tuple[str, str] | None = None  # the cell that a table leaves out
    dropped: str = ""  # the state whose handler's answer is not stored
    no_handler: str = ""  # the state without an entry in a table of handlers
    uninitialised: bool = False
    fall_marked: bool = False  # a comment says that the case is meant to run on
    stacked: str = ""  # the state that shares the next one's case
    nested: str = ""  # the state with a machine of its own
    named_type: bool = False  # the enumeration has a typedef name and no tag
    counted: bool = False  # a last enumerator counts the states
    volatile: bool = False
    busy: bool = False  # a flag is set while the machine works
    internal: tuple[str, ...] = ()  # actions that are functions of the program
    extra: tuple[str, ...] = ()  # functions beside the machine's own
    declared: tuple[str, ...] = field(default=())  # declarations of what those use
    comment: tuple[str, ...] = ()  # what stands at the top
    event_word: str = "event"

    def s(self, state: str) -> str:
        """A state as the source spells it."""
        if state in self.table.foreign:
            return state.removeprefix("#")
        return str(self.table.states[state]) if self.family == "numbers" else state

    @property
    def type(self) -> str:
        if self.storage == "bit-field":
            return "unsigned"
        if self.family != "enum":
            return "uint8_t"
        return f"{self.table.noun}_state_t" if self.named_type else f"enum {self.table.noun}_state"

    @property
    def kept(self) -> str:
        """The type with which the state is kept."""
        return f"volatile {self.type}" if self.volatile else self.type

    @property
    def event(self) -> str:
        return f"enum {self.table.noun}_{self.event_word}"

    @property
    def lvalue(self) -> str:
        noun = self.table.noun
        return {
            "static": f"{noun}_state",
            "local": f"{noun}_state",
            "member": f"{noun[0]}->state",
            "object member": f"{noun}.state",
            "pointer": "*state",
            "element": f"{noun}_state[unit]",
            "bit-field": f"{noun[0]}->state",
        }[self.storage]

    @property
    def owner(self) -> str:
        """The parameter that says whose state it is, or nothing."""
        noun = self.table.noun
        return {
            "member": f"struct {noun} *{noun[0]}",
            "bit-field": f"struct {noun} *{noun[0]}",
            "pointer": f"{self.type} *state",
            "element": "unsigned unit",
        }.get(self.storage, "")

    @property
    def passed(self) -> str:
        return self.owner.split()[-1].lstrip("*") if self.owner else ""

    @property
    def inputs(self) -> str:
        return ", int kg" if self.table.guarded() else ""

    @property
    def kg(self) -> str:
        return ", kg" if self.table.guarded() else ""

    @property
    def takes(self) -> str:
        """The parameters of a function that takes an event."""
        return ", ".join(part for part in (self.owner, f"{self.event} ev{self.inputs}") if part)

    @property
    def takes_handler(self) -> str:
        """The parameters of a handler where the state is one."""
        noun = self.table.noun
        owner = f"struct {noun} *{noun[0]}, " if self.storage == "member" else ""
        return f"{owner}{self.event} ev{self.inputs}"

    @property
    def gives(self) -> str:
        """The arguments with which such a function calls another."""
        return ", ".join(part for part in (self.passed, f"ev{self.kg}") if part)


def clean(text: str) -> tuple[str, tuple[int, ...]]:
    """A text without its marks, and the lines they stood on; what is declared and not used goes."""
    if text.count("fault_report") == 1:
        text = text.replace("extern void fault_report(void);\n", "")
    lines = text.splitlines()
    return text.replace(MARK, ""), tuple(number for number, line in enumerate(lines, 1) if MARK in line)


def indented(lines: Iterable[str], by: int = 1) -> list[str]:
    return ["    " * by + line if line else line for line in lines]


# ---------------------------------------------------------------------------------------------------------- parts


def constants(style: Style, named: bool = True) -> list[str]:
    """The states' and the events' names, and what else is declared before the machine.

    ``named`` False: the states are functions or labels, and have no constants.
    """
    table = style.table
    lines = [*style.comment, "#include <stdbool.h>", "#include <stdint.h>", ""]
    if not named:
        pass
    elif style.family == "enum":
        counted = list(table.states.values()) == list(range(len(table.states)))
        lines += ["typedef enum {" if style.named_type else f"enum {table.noun}_state {{"]
        lines += [f"    {name}," if counted else f"    {name} = {value}," for name, value in table.states.items()]
        lines += [f"    {table.noun.upper()}_COUNT"] if style.counted else []
        lines += [f"}} {table.noun}_state_t;" if style.named_type else "};", ""]
    elif style.family == "define":
        lines += [*(f"#define {name} {value}u" for name, value in table.states.items()), ""]
    else:
        words = ", ".join(f"{value} {name.split('_', 1)[1].lower()}" for name, value in table.states.items())
        lines += [*textwrap.wrap(f"/* {words} */", 100, subsequent_indent=" * "), ""]
    lines += [f"{style.event} {{", *(f"    {event}," for event in table.events), "};", ""]
    lines += [f"extern void {action}(void);" for action in table.actions() if action not in style.internal]
    kinds = {step.guard.kind for steps in table.cells.values() for step in steps if step.guard is not None}
    lines += ["extern bool lid_shut(void);"] if "shut" in kinds else []
    lines += ["extern unsigned waited_ms(void);"] if "late" in kinds else []
    return [*lines, "extern void fault_report(void);", *style.declared, ""]


def storage(style: Style) -> list[str]:
    """The state variable and the function that sets it up."""
    table = style.table
    noun, start = table.noun, style.s(table.initial)
    match style.storage:
        case "static":
            start = "" if style.uninitialised else f" = {start}"
            return [f"static {style.kept} {noun}_state{start};{MARK if style.uninitialised else ''}", ""]
        case "member" | "bit-field":
            bits = " : 6" if style.storage == "bit-field" else ""
            lines = [f"struct {noun} {{", "    long ticks;", f"    {style.kept} state{bits};", "};", ""]
            body = [f"{noun[0]}->ticks = 0;", f"{noun[0]}->state = {start};"]
            return [*lines, *function(f"void {noun}_init(struct {noun} *{noun[0]})", body)]
        case "object member":
            lines = ["static struct {", "    long ticks;", f"    {style.type} state;"]
            return [*lines, f"}} {noun} = {{ .state = {start} }};", ""]
        case "pointer" | "local":
            return []
        case "element":
            body = ["for (unsigned unit = 0; unit < 4; unit++) {", f"    {noun}_state[unit] = {start};", "}"]
            return [f"static {style.type} {noun}_state[4];", "", *function(f"void {noun}_init(void)", body)]


def owners(style: Style) -> list[str]:
    """Where the state is reached through a pointer alone: the two objects, and the function that has them stepped."""
    if style.storage != "pointer":
        return []
    noun, start = style.table.noun, style.s(style.table.initial)
    ev = f"{style.event} ev{style.inputs}"
    lines = [f"static {style.type} {side}_state = {start};" for side in ("left", "right")]
    calls = [f"{noun}_step(&{side}_state, ev{style.kg});" for side in ("left", "right")]
    return ["", *lines, "", f"void {noun}s_step({ev})", "{", *indented(calls), "}"]


def assign(style: Style, lvalue: str) -> Store:
    """Transitions by assignment; an overwritten one is assigned first."""

    def store(step: Step) -> list[str]:
        mark = MARK if step.marked else ""
        calls = [f"{action}();" for action in step.actions]
        first = [f"{lvalue} = {style.s(step.first)};{MARK}"] if step.first else []
        return [*calls, *first, f"{lvalue} = {style.s(step.target)};{mark}", *leaving(style, step)]

    return store


def leaving(style: Style, step: Step) -> list[str]:
    """How a step leaves the function before its end, if it does."""
    clears = [f"{style.table.noun}_busy = false;"] if step.leaves == "clears" else []
    mark = "" if clears else MARK
    return [*clears, f"return;{mark}"] if step.lost or step.leaves else []


def returning(style: Style) -> Store:
    return lambda step: [
        *(f"{action}();" for action in step.actions),
        f"return {style.s(step.target)};{MARK if step.marked else ''}",
    ]


def taken(steps: Sequence[Step], store: Store) -> list[str]:
    """The steps of one cell: a chain of their guards."""
    lines: list[str] = []
    for step in steps:
        if step.guard is None and not lines:
            return store(step)
        mark = MARK if step.marked else ""
        before = "} else " if lines else ""
        head = f"{before}if ({step.guard.text}) {{{mark}" if step.guard else "} else {"
        lines += [head, *indented(store(step))]
    return [*lines, "}"]


def by_event(style: Style, state: str, store: Store, leaves: bool = False) -> list[str]:
    """What one state does: its events told apart by ``switch`` or ``if``. ``leaves``: the steps leave the function."""
    of = style.table.of(state)
    if not of:
        return []
    if style.chains:
        lines: list[str] = []
        for event, steps in of.items():
            lines.append(f"{'} else ' if lines else ''}if (ev == {event}) {{")
            lines += indented(taken(steps, store))
        return [*lines, "}"]
    lines = ["switch (ev) {"]
    for event, steps in of.items():
        plain = leaves and steps[-1].guard is None
        lines += [f"case {event}:", *indented(taken(steps, store)), *([] if plain else ["    break;"])]
    return [*lines, "default:", "    break;", "}"]


def default(style: Style, lvalue: str) -> list[str]:
    """What a dispatch does with a value that is no state."""
    match style.default:
        case "recovers":
            return [f"{lvalue} = {style.s(style.table.initial)};"]
        case "reports":
            return ["fault_report();"]
    return []


PHASES = ("OUT", "WAIT", "IN")
"""The states of a machine inside a state: each leads to the next, from the second on a condition."""


def nested(style: Style) -> list[str]:
    """A machine inside a state."""
    noun = style.table.noun
    names = [f"{noun.upper()}_PUSH_{phase}" for phase in PHASES]
    lines = [f"switch ({noun}_push) {{"]
    for at, name in enumerate(names):
        store = [f"{noun}_push = {names[(at + 1) % len(names)]};"]
        lines += [
            f"case {name}:",
            *indented([*(["if (push_ready()) {", *indented(store), "}"] if at == 1 else store), "break;"]),
        ]
    return [*lines, "default:", f"    {noun}_push = {names[0]};", "    break;", "}"]


def cases(style: Style, bodies: Iterable[tuple[str, list[str]]], last: list[str], event: str = "") -> list[str]:
    """The cases of a ``switch`` on the state (of one event); a missing ``break`` is marked where it is missing and
    where it leads."""
    falls = style.falls if event in ("", style.fall_event) else ""
    lines: list[str] = []
    mark = ""
    for state, body in bodies:
        if state == style.unhandled:
            continue
        if state == style.stacked:
            lines.append(f"case {style.s(state)}:")
            continue
        meant = ["/* falls through */"] if style.fall_marked else []
        end = meant if state == falls else ["break;"]
        stray = [f"fault_report();{MARK}"] if state == style.stray else []
        inner = nested(style) if state == style.nested else []
        lines += [f"case {style.s(state)}:{mark}", *indented([*inner, *body, *end, *stray])]
        mark = ""
        if state == falls:
            lines[-1] += MARK
            mark = MARK
    silent = MARK if style.default == "silent" else ""
    return [*lines, f"default:{mark}{silent}", *indented(last), f"    break;{silent}"]


def by_state(table: Table) -> list[tuple[tuple[str, str], tuple[Step, ...]]]:
    """The cells in the order of the states."""
    order = list(table.states)
    return sorted(table.cells.items(), key=lambda cell: order.index(cell[0][0]))


def function(head: str, body: Iterable[str]) -> list[str]:
    return [head, "{", *indented(body), "}", ""]


def whole(style: Style, *parts: list[str]) -> str:
    lines = [*constants(style), *(line for part in parts for line in part), *style.extra]
    return "\n".join(lines).rstrip("\n") + "\n"


def step_function(style: Style, body: list[str]) -> list[str]:
    """The function that takes an event."""
    noun = style.table.noun
    if style.busy:
        forgets = any(step.leaves == "forgets" for steps in style.table.cells.values() for step in steps)
        body = [f"{noun}_busy = true;{MARK if forgets else ''}", *body, f"{noun}_busy = false;"]
    if style.storage == "local":
        body = [f"static {style.kept} {noun}_state = {style.s(style.table.initial)};", "", *body]
    return function(f"void {noun}_step({style.takes})", body)
