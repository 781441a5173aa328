"""C that holds a state table, in the forms that firmware uses.

Each writer takes a ``Style`` (a table, where its state is stored, how its constants are spelled, and at most one slip)
and gives the text. ``MARK`` ends the lines on which a slip stands; ``clean`` takes it off and says which they are.
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
    no_handler: str = ""  # the state without an entry in a table of handlers
    uninitialised: bool = False
    fall_marked: bool = False  # a comment says that the case is meant to run on
    stacked: str = ""  # the state that shares the next one's case
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
        first = [f"{lvalue} = {style.s(step.first)};{MARK}", "fault_report();"] if step.first else []
        calls = [f"{action}();" for action in step.actions]
        return [*first, *calls, f"{lvalue} = {style.s(step.target)};{mark}", *leaving(style, step)]

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
        lines += [f"case {style.s(state)}:{mark}", *indented([*body, *end, *stray])]
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


# ---------------------------------------------------------------------------------------------------------- forms


def switch(style: Style) -> str:
    """A ``switch`` on the state; each case tells the events apart and stores the next state."""
    store = assign(style, style.lvalue)
    bodies = [(state, by_event(style, state, store)) for state in style.table.states]
    body = [f"switch ({style.lvalue}) {{", *cases(style, bodies, default(style, style.lvalue)), "}"]
    return whole(style, storage(style), step_function(style, body), owners(style))


def event_then_state(style: Style) -> str:
    """A ``switch`` on the event, and in each case one on the state."""
    store = assign(style, style.lvalue)
    body = ["switch (ev) {"]
    for event in style.table.events:
        bodies = [(state, taken(steps, store)) for (state, on), steps in by_state(style.table) if on == event]
        body += [f"case {event}:", f"    switch ({style.lvalue}) {{"]
        body += indented([*cases(style, bodies, [], event), "}", "break;"])
    body += ["default:", "    fault_report();", "    break;", "}"]
    return whole(style, storage(style), step_function(style, body), owners(style))


def if_chain(style: Style) -> str:
    """A chain of comparisons of the state."""
    store = assign(style, style.lvalue)
    body: list[str] = []
    for state in style.table.states:
        if state != style.unhandled:
            body.append(f"{'} else ' if body else ''}if ({style.lvalue} == {style.s(state)}) {{")
            body += indented(by_event(style, state, store))
    last = default(style, style.lvalue)
    body += ["} else {", *indented(last), "}"] if last else ["}"]
    return whole(style, storage(style), step_function(style, body), owners(style))


def next_variable(style: Style) -> str:
    """The cases work out the next state, which is committed after the ``switch``."""
    store = assign(style, "next")
    bodies = [(state, by_event(style, state, store)) for state in style.table.states]
    body = [f"{style.type} next = {style.lvalue};", "", f"switch ({style.lvalue}) {{"]
    body += [*cases(style, bodies, default(style, "next")), "}", f"{style.lvalue} = next;"]
    return whole(style, storage(style), step_function(style, body), owners(style))


def working_copy(style: Style) -> str:
    """The state is copied, dispatched on and stepped in the copy, and written back."""
    store = assign(style, "now")
    bodies = [(state, by_event(style, state, store)) for state in style.table.states]
    body = [f"{style.type} now = {style.lvalue};", "", "switch (now) {"]
    body += [*cases(style, bodies, default(style, "now")), "}", f"{style.lvalue} = now;"]
    return whole(style, storage(style), step_function(style, body), owners(style))


def setter(style: Style) -> str:
    """Every step goes through one function that stores the state."""
    noun = style.table.noun
    pass_on = f"{style.passed}, " if style.owner else ""
    head = f"static void {noun}_enter({f'{style.owner}, ' if style.owner else ''}{style.type} to)"

    def store(step: Step) -> list[str]:
        first = [f"{noun}_enter({pass_on}{style.s(step.first)});{MARK}", "fault_report();"] if step.first else []
        calls = [f"{action}();" for action in step.actions]
        return [
            *first,
            *calls,
            f"{noun}_enter({pass_on}{style.s(step.target)});{MARK if step.marked else ''}",
            *leaving(style, step),
        ]

    bodies = [(state, by_event(style, state, store)) for state in style.table.states]
    last = [f"{noun}_enter({pass_on}{style.s(style.table.initial)});"] if style.default == "recovers" else []
    body = [f"switch ({style.lvalue}) {{", *cases(style, bodies, last or default(style, "")), "}"]
    entered = function(head, ["note_entry((unsigned)to);", f"{style.lvalue} = to;"])
    return whole(style, ["extern void note_entry(unsigned to);", "", *storage(style)], entered,
                 step_function(style, body), owners(style))  # fmt: skip


def event_functions(style: Style) -> str:
    """One function for each event, with the states that know it."""
    parts = [storage(style)]
    owner = ", ".join(part for part in (style.owner, style.inputs.removeprefix(", ")) if part) or "void"
    store = assign(style, style.lvalue)
    for event in style.table.events:
        bodies = [(state, taken(steps, store)) for (state, on), steps in by_state(style.table) if on == event]
        body = [f"switch ({style.lvalue}) {{", *cases(style, bodies, [], event), "}"]
        parts.append(function(f"void {event_function(style, event)}({owner})", body))
    return whole(style, *parts)


def event_function(style: Style, event: str) -> str:
    return f"{style.table.noun}_{event.split('_', 1)[-1].lower()}"


def handler(style: Style, state: str) -> str:
    return f"{style.table.noun}_in_{state.split('_', 1)[-1].lower()}"


def returned(style: Style) -> str:
    """A handler for each state gives the next state back; called from a ``switch``, or through a table of them."""
    table = style.table
    takes, gives = f"{style.event} ev{style.inputs}", f"ev{style.kg}"
    parts = [storage(style)]
    for state in table.states:
        body = by_event(style, state, returning(style), leaves=True)
        unused = [] if body else ["(void)ev;"]
        body = [*unused, *body, f"return {style.s(state)};"]
        parts.append(function(f"static {style.type} {handler(style, state)}({takes})", body))
    if style.variant % 2:
        rows = [f"[{style.s(state)}] = {handler(style, state)}," for state in table.states if state != style.no_handler]
        mark = MARK if style.no_handler else ""
        name = f"{table.noun}_handlers"
        head = f"static {style.type} (*const {name}[{len(table.states)}])({takes}) = {{{mark}"
        lines = [head, *indented(rows), "};", ""]
        body = [f"{style.lvalue} = {name}[{style.lvalue}]({gives});"]
        return whole(style, *parts, lines, step_function(style, body), owners(style))
    bodies = [(state, [f"{style.lvalue} = {handler(style, state)}({gives});"]) for state in table.states]
    body = [f"switch ({style.lvalue}) {{", *cases(style, bodies, default(style, style.lvalue)), "}"]
    return whole(style, *parts, step_function(style, body), owners(style))


def composed(style: Style) -> tuple[dict[tuple[str, ...], str], list[str]]:
    """A function for each list of actions, so that a table can point to it."""
    lists = dict.fromkeys(step.actions for steps in style.table.cells.values() for step in steps if step.actions)
    names = {actions: "_then_".join(actions) for actions in lists}
    lines = [
        line
        for actions, name in names.items()
        if len(actions) > 1
        for line in function(f"static void {name}(void)", [f"{action}();" for action in actions])
    ]
    return names, lines


def table(style: Style) -> str:
    """A table [state][event] of next states, with actions where there are any; what is no step stays or says so."""
    of = style.table
    names, helpers = composed(style)
    complete = all((state, event) in of.cells for state in of.states for event in of.events)
    sentinel = not complete and style.variant % 2 == 1
    acts = bool(names)
    kind = "uint8_t" if sentinel else style.type
    stay = f"{of.noun.upper()}_STAY"
    lines = [f"#define {stay} 0xFFu", ""] if sentinel else []
    lines += helpers
    if acts:
        lines += [f"struct {of.noun}_cell {{", f"    {kind} next;", "    void (*act)(void);", "};", ""]
    what = f"struct {of.noun}_cell" if acts else kind
    lines.append(f"static const {what} {of.noun}_table[{len(of.states)}][{len(of.events)}] = {{")
    for state in of.states:
        row = []
        for event in of.events:
            if style.left_out == (state, event):
                continue
            step = of.cells.get((state, event), (Step(state),))[0]
            stays = (state, event) not in of.cells
            to = stay if sentinel and stays else style.s(step.target)
            mark = MARK if step.marked else ""
            act = names[step.actions] if step.actions else "0"
            named = f"[{event}] = " if style.variant // 2 % 2 == 0 or style.left_out else ""
            row.append(f"{named}{f'{{ {to}, {act} }}' if acts else to},{mark}")
        place = f"[{style.s(state)}] = " if style.variant // 2 % 2 == 0 or style.left_out else ""
        mark = MARK if style.left_out and style.left_out[0] == state else ""
        lines += [f"    {place}{{{mark}", *indented(row, 2), "    },"]
    lines += ["};", ""]
    cell = f"{of.noun}_table[{style.lvalue}][ev]"
    if acts:
        body = [f"const struct {of.noun}_cell *cell = &{cell};", ""]
        then = ["if (cell->act) {", "    cell->act();", "}", f"{style.lvalue} = cell->next;"]
        body += [f"if (cell->next != {stay}) {{", *indented(then), "}"] if sentinel else then
    elif sentinel:
        body = [f"{kind} next = {cell};", "", f"if (next != {stay}) {{", f"    {style.lvalue} = next;", "}"]
    else:
        body = [f"{style.lvalue} = {cell};"]
    return whole(style, storage(style), lines, step_function(style, body), owners(style))


def _unused(name: str, text: str) -> list[str]:
    return [] if name in text else [f"(void){name};"]


def rows(style: Style) -> str:
    """A list of rows (from, event, to, action, guard) that is searched at each event."""
    of = style.table
    names, helpers = composed(style)
    guards: dict[str, str] = {}
    guarded = of.guarded()
    listed = []
    for (state, event), steps in of.cells.items():
        for step in steps:
            mark = MARK if step.marked else ""
            act = names[step.actions] if step.actions else "0"
            test = ""
            if guarded:
                test = ", 0"
                if step.guard is not None:
                    name = guards.setdefault(step.guard.text, step.guard.name)
                    test = f", {name}"
            place = f"{style.s(state)}, {event}, {style.s(step.target)}, {act}{test}"
            if style.variant % 2:
                parts = dict(zip(("from", "on", "to", "act", "may"), place.split(", "), strict=False))
                place = ", ".join(f".{key} = {value}" for key, value in parts.items() if value != "0" or key != "act")
            listed.append(f"    {{ {place} }},{mark}")
    tests = [
        line
        for text, name in guards.items()
        for line in function(f"static bool {name}(int kg)", [*_unused("kg", text), f"return {text};"])
    ]
    row = [f"    {style.type} from;", f"    {style.event} on;", f"    {style.type} to;", "    void (*act)(void);"]
    if guarded:
        row.append("    bool (*may)(int kg);")
    name = f"{of.noun}_rows"
    lines = [f"struct {of.noun}_row {{", *row, "};", "", *tests, *helpers]
    lines += [f"static const struct {of.noun}_row {name}[] = {{", *listed, "};", ""]
    may = " && (!row->may || row->may(kg))" if guarded else ""
    body = [
        f"for (unsigned i = 0; i < sizeof {name} / sizeof {name}[0]; i++) {{",
        f"    const struct {of.noun}_row *row = &{name}[i];",
        "",
        f"    if (row->from == {style.lvalue} && row->on == ev{may}) {{",
        "        if (row->act) {",
        "            row->act();",
        "        }",
        f"        {style.lvalue} = row->to;",
        "        return;",
        "    }",
        "}",
    ]
    return whole(style, storage(style), lines, step_function(style, body), owners(style))


def pointer(style: Style) -> str:
    """The state is the function that handles the next event, kept in a field or a variable."""
    of = style.table
    noun = of.noun
    field_ = style.storage == "member"
    takes = style.takes_handler
    lvalue = f"{noun[0]}->handle" if field_ else f"{noun}_handle"

    def store(step: Step) -> list[str]:
        first = [f"{lvalue} = {handler(style, step.first)};{MARK}", "fault_report();"] if step.first else []
        calls = [f"{action}();" for action in step.actions]
        return [*first, *calls, f"{lvalue} = {handler(style, step.target)};{MARK if step.marked else ''}"]

    lines = [f"struct {noun};"] if field_ else []
    lines += [f"static void {handler(style, state)}({takes});" for state in of.states]
    start = handler(style, of.initial)
    if field_:
        lines += ["", f"struct {noun} {{", "    long ticks;", f"    void (*handle)({takes});", "};", ""]
        lines += function(f"void {noun}_init(struct {noun} *{noun[0]})", [f"{lvalue} = {start};"])
    else:
        lines += ["", f"static void (*{noun}_handle)({takes}) = {start};", ""]
    for state in of.states:
        body = by_event(style, state, store) or [*(["(void)" + noun[0] + ";"] if field_ else []), "(void)ev;"]
        lines += function(f"static void {handler(style, state)}({takes})", body)
    gives = f"{noun[0]}, ev{style.kg}" if field_ else f"ev{style.kg}"
    lines += function(f"void {noun}_step({takes})", [f"{lvalue}({gives});"])
    return "\n".join([*constants(style, named=False), *lines, *style.extra]).rstrip("\n") + "\n"


def goto(style: Style) -> str:
    """A label for each state; each waits for an event and jumps."""
    of = style.table
    again = style.variant % 2 == 1

    def label(state: str) -> str:
        return state.split("_", 1)[-1].lower()

    body = [f"{style.event} ev;", *(["int kg;"] if of.guarded() else []), ""]
    ask = [f"ev = {of.noun}_wait();", *(["kg = hopper_kg();"] if of.guarded() else [])]

    def store(step: Step) -> list[str]:
        mark = MARK if step.marked else ""
        return [*(f"{action}();" for action in step.actions), f"goto {label(step.target)};{mark}"]

    for state in of.states:
        steps = by_event(style, state, store, leaves=True)
        show = [f'panel_show("{label(state)}");']
        body.append(f"{label(state)}:")
        if again:
            body += indented([*show, *ask, *steps, f"goto {label(state)};"])
        else:
            body += indented([*show, "for (;;) {", *indented([*ask, *steps]), "}"])
    lines = [f"extern {style.event} {of.noun}_wait(void);", "extern void panel_show(const char *text);"]
    lines += ["extern int hopper_kg(void);"] if of.guarded() else []
    return (
        "\n".join(
            [*constants(style, named=False), *lines, "", *function(f"void {of.noun}_run(void)", body), *style.extra]
        ).rstrip("\n")
        + "\n"
    )


FORMS: dict[str, Callable[[Style], str]] = {
    "switch": switch,
    "event then state": event_then_state,
    "if-chain": if_chain,
    "table": table,
    "rows": rows,
    "function pointer": pointer,
    "next returned": returned,
    "event functions": event_functions,
    "goto": goto,
    "next variable": next_variable,
    "working copy": working_copy,
    "setter": setter,
}
"""The writers by the form's name; ``switch`` is two forms, with events told apart by ``switch`` or by ``if``."""
