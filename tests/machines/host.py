"""Runs generated machines with the host's compiler: is what they do what their table says?

Many programs go into one C file, each with its identifiers prefixed, so that one compiler run serves them all. A test
is a start state and the events with their inputs; machines without a state variable are led to the state by events.
"""

import itertools
import re
import shutil
import subprocess
from collections import deque
from collections.abc import Iterator, Sequence
from pathlib import Path

from tests.machines.programs import Made
from tests.machines.tables import INPUTS, Inputs
from tests.machines.written import event_function, handler

COMPILER = shutil.which("gcc") or shutil.which("cc") or shutil.which("clang")
BATCH = 60
_WORDS = (
    "auto bool break case char const continue default do else enum extern false for goto if int long return short "
    "signed sizeof volatile static struct switch true typedef unsigned void while uint8_t defined HOST_shut HOST_kg "
    "HOST_next HOST_show HOST_is setjmp HOST_end"
)
_KEPT = frozenset(_WORDS.split())
_WORD = re.compile(r'"(?:\\.|[^"\\])*"|/\*.*?\*/|#\s*\w+|\b[A-Za-z_]\w*', re.DOTALL)
# A machine inside a state, or what else the program calls, is answered alike each time.
_EXTERN = re.compile(r"^extern ((?:enum )?\w+) (\w+)\((.*)\);$", re.MULTILINE)
Event = tuple[str, Inputs]

HEAD = """#include <setjmp.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>
static bool HOST_shut;
static int HOST_kg, HOST_left, HOST_event, HOST_seen;
static const char *HOST_shown;
static jmp_buf HOST_end;
static int HOST_next(void)
{
    int shut;
    if (HOST_left-- == 0) longjmp(HOST_end, 1);
    if (scanf("%d %d %d", &HOST_event, &HOST_kg, &shut) != 3) longjmp(HOST_end, 1);
    HOST_shut = shut != 0;
    return HOST_event;
}
static void HOST_show(const char *text) { HOST_shown = text; }
static bool HOST_is(const char *text) { return strcmp(HOST_shown, text) == 0; }
"""


def renamed(text: str, prefix: str) -> str:
    """A text with a prefix before every identifier that the program chose."""

    def word(found: re.Match[str]) -> str:
        text = found[0]
        return text if text[0] in '"/#' or text in _KEPT else prefix + text

    return _WORD.sub(word, "\n".join(line for line in text.splitlines() if not line.startswith("#include")))


def bodies(made: Made) -> str:
    """What the functions outside the program do."""
    special = {
        "lid_shut": "return HOST_shut;",
        "waited_ms": "return HOST_kg > 0 ? HOST_kg * 100u : 0u;",
        "hopper_kg": "return HOST_kg;",
        "panel_show": "HOST_show(text);",
        f"{made.table.noun}_wait": "return HOST_next();",
    }
    lines = []
    for found in _EXTERN.finditer(made.text):
        kind, name, takes = found.groups()
        lines.append(f"{kind} {name}({takes}) {{ {special.get(name, '' if kind == 'void' else 'return 0;')} }}")
    return "\n".join(lines)


def reachable(made: Made) -> str:
    """The text with a state that is static in its function moved out of it, where the driver can set it."""
    if made.style.storage != "local":
        return made.text
    kept = re.search(rf"^    static .* {made.table.noun}_state = .*;$", made.text, re.MULTILINE)
    assert kept is not None
    before, head, after = made.text.replace(kept[0], "").rpartition(f"void {made.table.noun}_step(")
    return f"{before}{kept[0]}\n{head}{after}"


def driver(made: Made) -> str:
    """``host(state, count)``: from a state (its number, where states are functions or labels), through the events."""
    style, noun = made.style, made.table.noun
    states = list(made.table.states)
    if made.form == "goto":
        shown = "".join(f'if (HOST_is("{made.spelled(state)}")) return {at};' for at, state in enumerate(states))
        return f"static int host(int state)\n{{ if (!setjmp(HOST_end)) {noun}_run(); {shown} return -1; }}"
    lines = []
    kg = ", HOST_kg" if style.table.guarded() else ""
    if made.form == "function pointer":
        table = ", ".join(handler(style, state) for state in states)
        inside = style.storage == "member"
        if inside:
            lines.append(f"static struct {noun} unit;")
        place = "unit.handle" if inside else f"{noun}_handle"
        set_ = f"{place} = handlers[state];"
        get = "".join(f"if ({place} == handlers[{at}]) return {at};" for at in range(len(states))) + "return -1;"
        lines += [f"static void (*const handlers[])({style.takes_handler}) = {{ {table} }};"]
        call = f"{noun}_step({'&unit, ' if inside else ''}ev{kg});"
    else:
        place = {
            "static": f"{noun}_state",
            "local": f"{noun}_state",
            "object member": f"{noun}.state",
            "pointer": "one",
            "element": f"{noun}_state[2]",
        }.get(style.storage, "unit.state")
        argument = {"member": "&unit", "bit-field": "&unit", "pointer": "&one", "element": "2"}.get(style.storage, "")
        if style.storage in ("member", "bit-field"):
            lines.append(f"static struct {noun} unit;")
        if style.storage == "pointer":
            lines.append(f"static {style.type} one;")
        set_, get = f"{place} = state;", f"return (int){place};"
        call = f"{noun}_step({f'{argument}, ' if argument else ''}ev{kg});"
        if made.form == "event functions":
            each = ", ".join(part for part in (argument, kg.removeprefix(", ")) if part)
            named = {event: event_function(style, event) for event in style.table.events}
            call = "".join(f"if (ev == {event}) {name}({each});" for event, name in named.items())
    loop = f"if (!setjmp(HOST_end)) for (;;) {{ int ev = HOST_next(); {call} }}"
    return "\n".join([*lines, f"static int host(int state)\n{{ {set_} {loop} {get} }}"])


def program(batch: Sequence[Made]) -> str:
    parts = [HEAD]
    for made in batch:
        parts.append(renamed("\n".join([reachable(made), bodies(made), driver(made)]), f"{made.name}_"))
    choose = "".join(f"case {at}: got = {made.name}_host(start); break;" for at, made in enumerate(batch))
    return (
        "\n".join(parts)
        + f"""
int main(void)
{{
    int which, start, got;
    while (scanf("%d %d %d", &which, &start, &HOST_left) == 3) {{
        got = -2;
        switch (which) {{ {choose} }}
        printf("%d\\n", got);
    }}
    return 0;
}}
"""
    )


def paths(made: Made) -> dict[str, list[Event]]:
    """The events that lead from the start to each state."""
    found: dict[str, list[Event]] = {made.table.initial: []}
    pending = deque(found)
    while pending:
        state = pending.popleft()
        for event, inputs in itertools.product(made.table.events, INPUTS):
            target = made.after(state, event, inputs)
            if target not in found:
                found[target] = [*found[state], (event, inputs)]
                pending.append(target)
    return found


def questions(made: Made) -> Iterator[tuple[int, list[Event], str]]:
    """Start, events and the state that should follow, for every state, event and kind of input."""
    led = paths(made) if made.form == "goto" else {}
    for at, (state, value) in enumerate(made.table.states.items()):
        if made.form == "goto" and state not in led:
            continue  # nothing leads there
        start = at if made.form == "function pointer" else value
        for event in made.table.events:
            if (state, event) in made.stops:
                continue
            steps = made.table.cells.get((state, event), ())
            for inputs in INPUTS if any(step.guard for step in steps) else INPUTS[3:5]:
                yield start, [*led.get(state, []), (event, inputs)], made.after(state, event, inputs)


def differences(every: Sequence[Made], folder: Path) -> dict[int, str]:
    """What the programs do otherwise than their tables say, by number, in words."""
    found: dict[int, str] = {}
    for first in range(0, len(every), BATCH):
        batch = every[first : first + BATCH]
        source, binary = folder / f"batch{first}.c", folder / f"batch{first}"
        source.write_text(program(batch), encoding="utf-8")
        done = subprocess.run(
            [str(COMPILER), "-std=c11", "-O0", "-w", "-o", str(binary), str(source)], capture_output=True, text=True
        )
        assert done.returncode == 0, done.stderr[:3000]
        asked, wanted = [], []
        for at, made in enumerate(batch):
            number = {event: value for value, event in enumerate(made.table.events)}
            values = {**made.table.states, **made.table.foreign}
            if made.form in ("function pointer", "goto"):
                values = {state: place for place, state in enumerate(made.table.states)}
            for start, events, target in questions(made):
                steps = " ".join(f"{number[event]} {kg} {int(shut)}" for event, (kg, shut) in events)
                asked.append(f"{at} {start} {len(events)} {steps}")
                wanted.append((made, start, events[-1], values[target]))
        answers = subprocess.run([str(binary)], input="\n".join(asked), capture_output=True, text=True, check=True)
        for (made, start, event, value), got in zip(wanted, answers.stdout.split(), strict=True):
            if int(got) != value:
                found.setdefault(made.number, f"from {start} by {event}: {got} for {value}")
    return found
