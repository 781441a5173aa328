"""C that holds a state table, in the forms that firmware uses: a writer for each form, from a ``Style`` to the text."""

from collections.abc import Callable

from tests.machines.style import (
    MARK,
    Style,
    assign,
    by_event,
    by_state,
    cases,
    constants,
    default,
    function,
    indented,
    owners,
    returning,
    step_function,
    storage,
    taken,
    whole,
)
from tests.machines.tables import Step


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
        calls = [f"{action}();" for action in step.actions]
        return [*calls, f"{noun}_enter({pass_on}{style.s(step.target)});{MARK if step.marked else ''}"]

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
    calls = {state: f"{handler(style, state)}({gives});" for state in table.states}
    bodies = [
        (state, [f"{call}{MARK}" if state == style.dropped else f"{style.lvalue} = {call}"])
        for state, call in calls.items()
    ]
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
        calls = [f"{action}();" for action in step.actions]
        first = [f"{lvalue} = {handler(style, step.first)};{MARK}"] if step.first else []
        return [*calls, *first, f"{lvalue} = {handler(style, step.target)};{MARK if step.marked else ''}"]

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
