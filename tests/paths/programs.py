"""Random C programs with a fixed meaning: every statement form, every integer type, arrays, structures, unions, calls.

What C leaves unspecified (orders of evaluation that matter, indeterminate values) is left out by construction; what it
leaves undefined is let in now and then, in forms that the host's checks find. ``KEEP`` is explained in ``host``.
Everything is bounded: loops count, recursion takes a fuel argument.
"""

import random
from dataclasses import dataclass, field

from tests.paths.host import KINDS

NARROW = ("_Bool", "char", "signed char", "unsigned char", "short", "unsigned short")
UNSIGNED = ("unsigned char", "unsigned short", "unsigned int", "unsigned long", "unsigned long long")
LIBRARY = """
void *memcpy(void *, const void *, unsigned long);
void *memmove(void *, const void *, unsigned long);
void *memset(void *, int, unsigned long);
unsigned long strlen(const char *);
int abs(int);
"""

Places = tuple[list[str], list[tuple[str, str]], list[tuple[str, str]]]


@dataclass
class Maker:
    """A program being made: its random numbers, the places that may be read and written now, and its text."""

    draw: random.Random
    tag: str
    # Probability that a guard against undefined behaviour is left out.
    careless: float
    readable: list[str] = field(default_factory=list)
    writable: list[tuple[str, str]] = field(default_factory=list)
    steppable: list[tuple[str, str]] = field(default_factory=list)
    functions: list[str] = field(default_factory=list)
    counter: int = 0
    loops: int = 0
    switches: int = 0
    labels: list[str] = field(default_factory=list)


def program_text(draw: random.Random, tag: str) -> str:
    """A program whose entry is ``long long run_TAG(int, int)``; every name in it ends in ``_TAG``."""
    make = Maker(draw, tag, draw.choice((0.0, 0.0, 0.01, 0.04)))
    lines = _globals(make)
    everywhere = (list(make.readable), list(make.writable), list(make.steppable))
    lines += _struct_functions(make)
    for number in range(draw.randint(1, 3)):
        lines += _function(make, f"f{number}_{tag}", everywhere)
        make.functions.append(f"f{number}_{tag}")
    lines += _entry(make, everywhere)
    return "\n".join(lines) + "\n"


def _number(make: Maker, kind: str) -> str:
    if kind == "_Bool":
        return str(make.draw.randint(0, 1))
    width = {"char": 8, "signed char": 8, "unsigned char": 8, "short": 16, "unsigned short": 16}.get(kind, 31)
    high = (1 << (width - (0 if kind in UNSIGNED else 1))) - 1
    if make.draw.random() < 0.6:
        return str(make.draw.randint(0, 9))
    value = make.draw.choice((high, high - 1, high // 2, make.draw.randint(0, high)))
    return f"-{value}" if kind not in UNSIGNED and make.draw.random() < 0.4 else str(value)


def _globals(make: Maker) -> list[str]:
    draw, t = make.draw, make.tag
    lines = []
    for number in range(draw.randint(2, 4)):
        kind = draw.choice(KINDS)
        static = draw.choice(("", "static "))
        lines.append(f"{static}{kind} g{number}_{t} = {_number(make, kind)};")
        make.readable.append(f"g{number}_{t}")
        make.writable.append((f"g{number}_{t}", kind))
    kind, length = draw.choice(KINDS), draw.choice((4, 8))
    make.readable.append(f"ga_{t}[@{length}]")
    make.writable.append((f"ga_{t}[@{length}]", kind))
    items = ", ".join(_number(make, kind) for _ in range(3))
    lines.append(f"{kind} ga_{t}[{length}] = {{{items}, [{length - 1}] = {_number(make, kind)}}};")
    fields = [draw.choice(KINDS) for _ in range(3)]
    bits = [(draw.choice(("unsigned", "signed int", "unsigned char")), draw.randint(1, 7)) for _ in range(2)]
    lines.append(
        f"struct s_{t} {{ {fields[0]} a; {bits[0][0]} b : {bits[0][1]}; {bits[1][0]} c : {bits[1][1]};"
        f" struct {{ {fields[1]} x; {fields[1]} row[4]; }} in; union {{ unsigned w; unsigned char by[4]; }};"
        f" {fields[2]} *link; {fields[2]} z; _Bool on : 1; unsigned short wide : {draw.randint(8, 16)}; }};"
    )
    lines.append(
        f"struct s_{t} gs_{t} = {{ {_number(make, fields[0])}, 1, .in = {{ {_number(make, fields[1])}, {{1, 2}} }},"
        f" .z = {_number(make, fields[2])}, .link = &gs_{t}.z }};"
    )
    lines.append(f"struct s_{t} *const gp_{t} = &gs_{t};")
    literal = draw.choice(('"auger"', '"hop\\0per"', '"\\x81\\n7"'))
    lines.append(f"static const char *const text_{t} = {literal};")
    lines.append(f"enum e_{t} {{ IDLE_{t}, FEED_{t} = {draw.randint(2, 9)}, PURGE_{t} }};")
    lines.append(f"static enum e_{t} mode_{t} = FEED_{t};")
    for base in (f"gs_{t}.", f"gp_{t}->"):
        row = "in.row[@4]" if base.endswith(".") else "in.row[@@4]"  # the host checks no last member behind a pointer
        make.readable += [f"{base}a", f"{base}b", f"{base}c", f"{base}in.x", f"{base}{row}", f"{base}by[@@4]"]
        make.readable += [f"{base}z", f"(*{base}link)", f"{base}w"]
        make.writable += [(f"{base}a", fields[0]), (f"{base}{row}", fields[1]), (f"{base}w", "unsigned int")]
        make.writable += [(f"{base}b", "bits"), (f"{base}c", "bits"), (f"{base}by[@@4]", "unsigned char")]
        make.writable += [(f"{base}link[0]", fields[2])]
    make.readable += [f"text_{t}[@@4]", f"(int)mode_{t}", f"PURGE_{t}", f"gs_{t}.on", f"gp_{t}->wide"]
    make.writable += [(f"gs_{t}.on", "_Bool"), (f"gp_{t}->wide", "bits")]
    return lines + _arrays(make, fields)


def _arrays(make: Maker, fields: list[str]) -> list[str]:
    """An array of structures and one of arrays, with a pointer to an element of the first."""
    draw, t = make.draw, make.tag
    kind, link = draw.choice(KINDS), f"&gs_{t}.z"
    lines = [
        f"static struct s_{t} bins_{t}[4] = {{ {{ {_number(make, fields[0])}, .z = 1, .link = {link} }},"
        f" [2] = {{ .in = {{ 3 }}, .link = {link} }}, [1].link = {link}, [3].link = {link} }};",
        f"static struct s_{t} *at_{t} = &bins_{t}[1];",
        f"{kind} grid_{t}[2][4] = {{ {{ {_number(make, kind)}, 1 }}, {{ [3] = {_number(make, kind)} }} }};",
    ]
    make.readable += [f"bins_{t}[@4].a", f"bins_{t}[@@4].in.row[1]", f"bins_{t}[2].b", f"at_{t}->w", f"at_{t}->z"]
    make.readable += [f"(int)(at_{t} - bins_{t})", f"grid_{t}[@2][3]", f"grid_{t}[1][@4]"]
    make.writable += [(f"bins_{t}[@4].a", fields[0]), (f"bins_{t}[@@4].in.row[1]", fields[1]), (f"at_{t}->c", "bits")]
    make.writable += [(f"at_{t}->z", fields[2]), (f"bins_{t}[@4].w", "unsigned int")]
    make.writable += [(f"grid_{t}[@2][3]", kind), (f"grid_{t}[1][@4]", kind)]
    return lines


# --------------------------------------------------------------------------------------------------------- expressions


def _leaf(make: Maker) -> str:
    draw = make.draw
    if draw.random() < 0.2 or not make.readable:
        return draw.choice(("0", "1", "3", "7u", "(-2)", "100", "0x1fu", "255", "5L", "'A'", "1000"))
    return _place(make, draw.choice(make.readable))


def _place(make: Maker, place: str) -> str:
    """A place with its subscript filled in: ``[@8]`` stands for a subscript below 8.

    ``[@@8]`` is one that is always in range: the host does not check it.
    """
    head, mark, tail = place.partition("[@")
    if not mark:
        return place
    checked = not tail.startswith("@")
    tail = tail.lstrip("@")
    length, _, rest = tail.partition("]")
    names = [name for name in make.readable if name.isidentifier()]
    index = make.draw.choice(names) if names and make.draw.random() < 0.7 else str(make.draw.randrange(int(length)))
    if index.isdigit():
        return f"{head}[{index}]{rest}"
    if checked and make.draw.random() < make.careless:
        return f"{head}[{index}]{rest}"
    return f"{head}[({index}) & {int(length) - 1}]{rest}"


def _expression(make: Maker, depth: int) -> str:
    draw = make.draw
    if depth <= 0 or draw.random() < 0.15:
        return _leaf(make)

    def part() -> str:
        return _expression(make, depth - 1)

    def small() -> str:
        return f"({draw.choice(('signed char', 'unsigned char', 'short', '_Bool'))}){_expression(make, depth - 1)}"

    kind = draw.random()
    careless = draw.random() < make.careless
    if kind < 0.28:
        operator = draw.choice(("+", "-", "*"))
        if careless:
            return f"KEEP({part()} {operator} {part()})"
        if draw.random() < 0.5:
            return f"KEEP({small()} {operator} {small()})"
        return f"KEEP(({draw.choice(UNSIGNED[2:])}){part()} {operator} {part()})"
    if kind < 0.40:
        return f"KEEP({part()} {draw.choice(('&', '|', '^'))} {part()})"
    if kind < 0.52:
        return f"KEEP({part()} {draw.choice(('<', '<=', '>', '>=', '==', '!='))} {part()})"
    if kind < 0.60:
        divisor = part() if careless else f"(({part()} & 15) + 1)"
        return f"KEEP({part()} {draw.choice(('/', '%'))} {divisor})"
    if kind < 0.68:
        if careless:
            return f"KEEP({part()} {draw.choice(('<<', '>>'))} {part()})"
        return f"KEEP(({draw.choice(UNSIGNED)}){part()} {draw.choice(('>>', '>>', '<<'))} ({part()} & 15))"
    if kind < 0.75:
        operator = draw.choice(("~", "!", "+", "-"))
        return f"KEEP({operator}{small() if operator == '-' and not careless else part()})"
    if kind < 0.83:
        return f"(({draw.choice(KINDS)}){part()})"
    if kind < 0.91:
        return f"({part()} {draw.choice(('&&', '||'))} {part()})"
    if kind < 0.97:
        return f"({part()} ? {part()} : {part()})"
    return f"(int)sizeof(+{part()})"


# ---------------------------------------------------------------------------------------------------------- statements


def _new(make: Maker, stem: str) -> str:
    make.counter += 1
    return f"{stem}{make.counter}"


def _assign(make: Maker) -> str:
    draw = make.draw
    place, kind = draw.choice(make.writable)
    target = _place(make, place)
    form = draw.random()
    if form < 0.5:
        return f"{target} = {_expression(make, 3)};"
    if form < 0.6:
        other = draw.choice([name for name, _ in make.writable if name.isidentifier()])
        # Two stores of one expression must not meet, and the second must not decide where the first goes.
        return f"{target} = {other} = {_expression(make, 2)};" if other not in target else f"{target} = 1;"
    if form < 0.7:
        return f"{target}{draw.choice(('++', '--'))};" if kind in (*NARROW[1:], *UNSIGNED, "bits") else f"{target} = 2;"
    if form < 0.75:
        return f"{target} {draw.choice(('<<=', '>>='))} {_expression(make, 1)} & 7;" if kind in UNSIGNED else ";"
    if form < 0.8:
        return f"{target} {draw.choice(('/=', '%='))} ({_expression(make, 1)} & 7) + 1;"
    if kind in (*NARROW, "bits"):
        return f"{target} {draw.choice(('+=', '-=', '*='))} {_expression(make, 2)} & 0x7f;"
    if kind in UNSIGNED or draw.random() < make.careless:
        return f"{target} {draw.choice(('+=', '-=', '*='))} {_expression(make, 2)};"
    return f"{target} {draw.choice(('&=', '|=', '^='))} {_expression(make, 2)};"


def _effects(make: Maker) -> str:
    """A statement with side effects inside its expressions, each on a variable that occurs nowhere else in it."""
    draw = make.draw
    if not make.steppable:
        return ";"
    name, _ = draw.choice(make.steppable)
    saved = make.readable, make.writable
    make.readable = [place for place in make.readable if place != name]
    make.writable = [pair for pair in make.writable if pair[0] != name]
    step = f"{name}{draw.choice(('++', '--'))}" if draw.random() < 0.5 else f"{draw.choice(('++', '--'))}{name}"
    if draw.random() < 0.3:
        step = f"({name} {draw.choice(('=', '^=', '|='))} {_expression(make, 1)})"
    form = draw.randrange(5)
    left, right = _expression(make, 1), _expression(make, 1)
    target = _place(make, draw.choice(make.writable)[0])
    if form == 0:
        text = f"{target} = KEEP((unsigned long)({left}) + {step}) ^ {right};"
    elif form == 1:
        text = f"{target} = {left} && {step} || {right};"
    elif form == 2:
        text = f"{target} = {left} ? {step} : {right};"
    elif form == 3:
        text = f"{target} = ({step}, {right});"
    else:
        text = f"if ({step} > {left}) {{ {target} = {right}; }}"
    make.readable, make.writable = saved
    return text


def _call(make: Maker) -> str:
    if not make.functions:
        return ";"
    target = _place(make, make.draw.choice([pair for pair in make.writable if pair[0].isidentifier()])[0])
    function = make.draw.choice(make.functions)
    locals_ = [place for place in make.readable if place.isidentifier() and not place.endswith(f"_{make.tag}")]
    argument = make.draw.choice(locals_) if locals_ else "4"
    return f"{target} = {function}({argument}, {_new_number(make)}, fuel - 1);"


def _new_number(make: Maker) -> str:
    return make.draw.choice(("0", "1", "-1", "17", "300"))


def _block(make: Maker, depth: int, most: int = 4) -> str:
    """Statements in braces, with variables of their own."""
    kept = list(make.readable), list(make.writable), list(make.steppable)
    lines = []
    if make.draw.random() < 0.4:
        lines.append(_local(make))
    lines += [_statement(make, depth) for _ in range(make.draw.randint(1, most))]
    make.readable, make.writable, make.steppable = kept
    return "{ " + " ".join(lines) + " }"


def _local(make: Maker) -> str:
    draw = make.draw
    form = draw.random()
    if form < 0.6:
        name, kind = _new(make, "v"), draw.choice(KINDS)
        text = f"{kind} {name} = {_expression(make, 2)};"
        make.readable.append(name)
        make.writable.append((name, kind))
        if kind in (*NARROW[1:], *UNSIGNED):
            make.steppable.append((name, kind))
        return text
    if form < 0.72:
        name, kind = _new(make, "a"), draw.choice(KINDS)
        text = f"{kind} {name}[8] = {{ {_expression(make, 1)}, {_expression(make, 1)}, [5] = {_expression(make, 1)} }};"
        make.readable.append(f"{name}[@8]")
        make.writable.append((f"{name}[@8]", kind))
        pointer = _new(make, "p")
        text += f" {kind} *{pointer} = &{name}[{draw.randint(0, 4)}];"
        make.readable += [f"{pointer}[@@4]", f"(int)({pointer} - {name})", f"({pointer} > {name})"]
        make.writable += [(f"{pointer}[@@4]", kind), (f"(*({pointer} + {draw.randint(0, 3)}))", kind)]
        return text
    if form < 0.84:
        name = _new(make, "s")
        literal = f"{{ 1, .w = 77u, .link = &gs_{make.tag}.z }}"
        whole = (f"gs_{make.tag}", f"*gp_{make.tag}", literal, f"(struct s_{make.tag}){literal}", f"bins_{make.tag}[1]")
        text = f"struct s_{make.tag} {name} = {draw.choice(whole)};"
        make.readable += [f"{name}.a", f"{name}.b", f"{name}.in.row[@4]", f"{name}.by[@@4]", f"{name}.w"]
        make.writable += [(f"{name}.c", "bits"), (f"{name}.w", "unsigned int"), (f"{name}.by[@@4]", "unsigned char")]
        return text + f" {name}.in = gs_{make.tag}.in; if ({_expression(make, 1)}) gs_{make.tag} = {name};"
    if form < 0.92:
        name = _new(make, "n")
        make.readable.append(name)
        make.writable.append((name, "unsigned int"))
        return f"static unsigned {name} = {draw.randint(0, 9)}u; {name} += 3;"
    name, whole, given = _new(make, "d"), _new(make, "v"), _expression(make, 2)
    kind = draw.choice(("double", "float"))
    limit = "" if draw.random() < make.careless else f"if ({name} > 1000.0 || {name} < -1000.0) {name} = 3.25; "
    make.readable += [whole, f"({name} < {draw.randint(-5, 50)}.5)"]
    return f"{kind} {name} = {given}; {name} = {name} * 0.75 + 1; {limit}int {whole} = {name} / 3;"


def _statement(make: Maker, depth: int) -> str:
    draw = make.draw
    form = draw.random()
    if depth <= 0 or form < 0.32:
        return _assign(make)
    if form < 0.44:
        return _effects(make)
    if form < 0.50:
        return _call(make)
    if form < 0.62:
        text = f"if ({_expression(make, 2)}) {_block(make, depth - 1)}"
        return text + (f" else {_block(make, depth - 1)}" if draw.random() < 0.5 else "")
    if form < 0.78:
        return _loop(make, depth)
    if form < 0.88:
        return _switch(make, depth)
    if form < 0.92 and make.loops:
        return f"if ({_expression(make, 1)}) {draw.choice(('break', 'continue'))};"
    if form < 0.94 and make.labels:
        return f"if ({_expression(make, 1)}) goto {draw.choice(make.labels)};"
    if form < 0.95:
        return _library(make)
    if form < 0.97:
        return _by_pointer(make)
    if form < 0.985:
        return f"if ({_expression(make, 2)}) return {_expression(make, 1)};"
    return _block(make, depth - 1)


def _library(make: Maker) -> str:
    t = make.tag
    name = _place(make, make.draw.choice([pair for pair in make.writable if pair[0].isidentifier()])[0])
    return make.draw.choice(
        (
            f"{{ unsigned char raw[sizeof gs_{t}.in]; memcpy(raw, &gs_{t}.in, sizeof raw); {name} = raw[0]; }}",
            f"memset(gs_{t}.in.row, {make.draw.choice(('0', '1'))}, sizeof gs_{t}.in.row);",
            f"memmove(&gs_{t}.by[1], gs_{t}.by, 3);",
            f"{name} = strlen(text_{t}) + abs((short)({_expression(make, 1)}));",
        )
    )


def _by_pointer(make: Maker) -> str:
    """Structures handed over and given back, and objects that are changed through a pointer."""
    draw, t = make.draw, make.tag
    word = next(place for place, kind in reversed(make.writable) if kind == "unsigned int" and "@" not in place)
    name = draw.choice([place for place, _ in make.writable if place.isidentifier()])
    walker, counter = _new(make, "p"), _new(make, "i")
    return draw.choice(
        (
            f"bump_{t}(&{word}, {_expression(make, 1)});",
            f"{name} = copy_{t}({draw.choice((f'gs_{t}', f'bins_{t}[3]'))}, {_expression(make, 1)}).w;",
            f"at_{t} = &bins_{t}[({_expression(make, 1)}) & 3]; at_{t}->in = gp_{t}->in;",
            f"bins_{t}[({_expression(make, 1)}) & 3] = *gp_{t};",
            f"{{ const unsigned char *{walker} = gs_{t}.by; for (int {counter} = 0; {counter} < 4; {counter}++)"
            f" {name} ^= *{walker}++; }}",
            f"{{ struct s_{t} *{walker} = bins_{t}; while ({walker} < bins_{t} + 4) {{"
            f" {walker}->w += 3u; {walker}++; }} }}",
        )
    )


def _loop(make: Maker, depth: int) -> str:
    draw = make.draw
    counter = _new(make, "i")
    kept = make.loops, list(make.readable)
    make.loops += 1
    make.readable.append(counter)
    form = draw.randrange(5)
    most = draw.randint(1, 5)
    if form == 0:
        kind = draw.choice(("int", "unsigned char", "short"))
        text = f"for ({kind} {counter} = 0; {counter} < {most}; {counter}++) {_block(make, depth - 1, 3)}"
    elif form == 1:
        text = f"{{ int {counter} = {most}; while ({counter}-- > 0) {_block(make, depth - 1, 3)} }}"
    elif form == 2:
        body = _block(make, depth - 1, 3)
        make.readable.remove(counter)
        text = f"{{ int {counter} = 0; do {body} while (++{counter} < {most} && {_expression(make, 1)}); }}"
    elif form == 3:
        make.loops = 0  # no loop statement of its own: break and continue would leave it
        label = _new(make, f"again_{make.tag}_")
        body = _block(make, depth - 1, 3)
        text = f"{{ int {counter} = 0; {label}: {body} if (++{counter} < {most}) goto {label}; }}"
    else:
        body = _block(make, depth - 1, 3)
        label = _new(make, f"out_{make.tag}_")
        text = f"{{ int {counter} = 0; for (;;) {{ if ({counter}++ >= {most}) goto {label}; {body} }} {label}: ; }}"
    make.loops, make.readable = kept
    return text


def _switch(make: Maker, depth: int) -> str:
    """A switch: falls, stacked labels, default anywhere or nowhere, sometimes labels inside a loop."""
    draw = make.draw
    t = make.tag
    control = draw.choice((f"KEEP({_expression(make, 2)} & 7)", f"mode_{t}", f"(signed char)({_expression(make, 1)})"))
    values = draw.sample((0, 1, 2, 3, 4, 5, 6, 7, -1, 100), draw.randint(2, 6))
    labels = [f"case {value}:" for value in values]
    if draw.random() < 0.7:
        labels.insert(draw.randint(0, len(labels)), "default:")
    arms = []
    kept = make.loops
    for label in labels:
        make.loops = 0
        if draw.random() < 0.2:
            arms.append(label)
            continue
        arms.append(f"{label} {_assign(make)} {_statement(make, depth - 1) if draw.random() < 0.4 else ''}")
        if draw.random() < 0.7:
            arms.append("break;")
    make.loops = kept
    arms.append(";")
    if draw.random() < 0.15:
        count = _new(make, "i")
        return f"{{ int {count} = 3; switch ({control}) {{ do {{ {' '.join(arms)} }} while (--{count} > 0); }} }}"
    return f"switch ({control}) {{ {' '.join(arms)} }}"


# ----------------------------------------------------------------------------------------------------------- functions


def _function(make: Maker, name: str, everywhere: Places) -> list[str]:
    draw = make.draw
    kinds = [draw.choice(KINDS), draw.choice(KINDS)]
    make.readable, make.writable, make.steppable = (list(part) for part in everywhere)  # type: ignore[assignment]
    make.readable += ["one", "two"]
    make.writable += [("one", kinds[0]), ("two", kinds[1])]
    make.steppable += [(word, kind) for word, kind in zip(("one", "two"), kinds, strict=True) if kind in UNSIGNED]
    label = f"end_{name}"
    make.labels = [label]
    if draw.random() < 0.3:
        make.functions.append(name)  # it may call itself, with less fuel
    lines = [f"{draw.choice(('', 'static '))}{draw.choice(KINDS)} {name}({kinds[0]} one, {kinds[1]} two, int fuel) {{"]
    lines.append("  if (fuel <= 0) return one;")
    lines += [f"  {_local(make)}" for _ in range(draw.randint(1, 3))]
    lines += [f"  {_statement(make, 3)}" for _ in range(draw.randint(2, 5))]
    if name in make.functions:
        make.functions.remove(name)
    make.labels = []
    lines += [f"{label}:", f"  return {_expression(make, 2)};", "}"]
    return lines


def _struct_functions(make: Maker) -> list[str]:
    t = make.tag
    return [
        f"static struct s_{t} copy_{t}(struct s_{t} given, unsigned n) {{",
        "  given.w += n; given.in.row[1] = n; return given; }",
        f"static void bump_{t}(unsigned *at, unsigned by) {{ if (*at > 50u) *at -= 50u; *at += by & 31; }}",
        f"static unsigned take_{t}(struct s_{t} *at) {{ at->w ^= 5u; return at->w; }}",
        f"static unsigned (*const table_{t}[2])(struct s_{t} *) = {{ take_{t}, 0 }};",
    ]


def _entry(make: Maker, everywhere: Places) -> list[str]:
    draw, t = make.draw, make.tag
    make.readable, make.writable, make.steppable = (list(part) for part in everywhere)  # type: ignore[assignment]
    make.labels = []
    make.readable += ["first", "second"]
    lines = [f"long long run_{t}(int first, int second) {{", "  int fuel = 3; unsigned long sum = 17;"]
    lines += [f"  {_local(make)}" for _ in range(draw.randint(1, 4))]
    for function in make.functions:
        lines.append(f"  sum = sum * 31u + (unsigned long){function}(first, second, fuel);")
    lines += [f"  {_statement(make, 3)}" for _ in range(draw.randint(2, 6))]
    lines.append(
        f"  struct s_{t} copied = copy_{t}(gs_{t}, 9u); sum += copied.w + copied.in.row[1] + gs_{t}.in.row[1];"
    )
    index = "0" if draw.random() > make.careless else "1"
    lines.append(f"  sum ^= table_{t}[{index}](&gs_{t}) + (copied.link == &gs_{t}.z);")
    for place in dict.fromkeys(make.readable):
        head, mark, tail = place.partition("[@")
        if mark:
            length, _, rest = tail.lstrip("@").partition("]")
            for index in range(int(length)):
                lines.append(f"  sum = sum * 31u + (unsigned long){head}[{index}]{rest};")
        else:
            lines.append(f"  sum = sum * 31u + (unsigned long){place};")
    lines += ["  return (long long)sum;", "}"]
    return lines
