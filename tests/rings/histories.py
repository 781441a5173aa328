"""The operations of a history: every sample is stored, the oldest is overwritten, readers look back or over all."""

from tests.rings.queues import Body, _deeper, _element_argument, _start
from tests.rings.writer import Writer, is_free


def write_history(w: Writer) -> None:
    """All operations of the planned history."""
    w.helpers()
    _start(w)
    steps = [_add]
    if w.has("at"):
        steps.append(_at)
    if w.has("total") and not w.members:
        steps.append(_total)
    if w.has("latest"):
        steps.append(_latest)
    if w.has("oldest") and w.plan.walk != "lazy":
        steps.append(_oldest)
    if w.has("flush"):
        steps.append(_flush)
    if w.dice.random() < 0.3:
        w.dice.shuffle(steps)
    for step in steps:
        step(w)


def _summed(w: Writer) -> bool:
    return any(f"{w.what}_sum;" in line for line in w.lines)


def _sum(w: Writer) -> str:
    return f"{w.own}{w.what}_sum"


def _as_number(w: Writer, slot: str) -> str:
    return f"(uint16_t){slot}" if w.element == "int16_t" else f"(uint8_t){slot}" if w.element == "char" else slot


def _add(w: Writer) -> None:
    plan = w.plan
    arguments, stores = _element_argument(w)
    body: Body = []
    if plan.walk == "lazy":
        body += [f"if ({w.head} >= {w.limit('head')}) {{", f"    {w.head} = 0;", "}"]
    write = [w.placed(line, "head") for line in stores]
    if _summed(w) and not w.members:
        write = [f"{_sum(w)} -= {_as_number(w, w.slot('head'))};", *write, f"{_sum(w)} += {_as_number(w, 'value')};"]
    body += [*write, (w.advance("head"), "head")]
    if w.count:
        body += [f"if ({w.count} < {w.size}) {{", f"    {w.count}++;", "}"]
    w.function("put", w.verbs[0], "void", arguments, body, "void")


def _back(w: Writer, back: str) -> Body:
    """Statements that leave the slot of the sample ``back`` steps ago in a subscript ``at``."""
    plan, n, i = w.plan, w.size, w.head
    if w.slipped("back_raw"):
        raw = f"({i} - 1 - {back}) % {n}"
        wrong = w.dice.choice((raw, f"({i} + {n} - {back}) % {n}", f"({i} + {n} - 1) % {n} - {back}"))
        return [f"int at = {wrong};"]
    if plan.direction < 0:
        return [f"unsigned at = ({i} + 1u + {back}) % {n};"]
    if plan.walk == "free_modulo":
        return [
            f"{plan.index.name} at = ({i} - 1 - {back}) % {n};"
            if plan.index.bits > 16
            else f"unsigned at = ({i} - 1u - {back}) % {n};"
        ]
    if plan.walk in ("mask", "free_mask", "natural"):
        mask = "0xFFu" if plan.walk == "natural" else f"({n} - 1)"
        return [f"unsigned at = ({i} - 1u - {back}) & {mask};"]
    if w.slipped("argument_open"):
        return [f"int at = (int){i} - 1 - (int){back};", "if (at < 0) {", f"    at += {n};", "}"]
    return w.dice.choice((
        [f"unsigned at = ({i} + {n} - 1u - {back}) % {n};"],
        [f"int at = (int){i} - 1 - (int){back};", "if (at < 0) {", f"    at += {n};", "}"],
        [
            *(f"unsigned at = {i};", "do {", "    if (at == 0) {", f"        at = {n};", "    }", "    at--;"),
            f"}} while ({back}-- > 0);",
        ],
    ))  # fmt: skip


def _at(w: Writer) -> None:
    kind = w.dice.choice(("uint8_t", "uint16_t", "unsigned"))
    within = w.count if w.count and w.dice.random() < 0.5 else w.size
    guard: Body = [f"if (back >= {within}) {{", "    return false;", "}"]
    if w.slipped("argument_open"):
        guard = []
    body: Body = [*guard, *_back(w, "back"), f"*out = {w.data}[at];", "return true;"]
    style = "filled" if within == w.count else "out"
    w.function("at", "back", "bool", ((kind, "back"), (f"{w.element} *", "out")), body, style)


def _total(w: Writer) -> None:
    n = w.size
    value = _as_number(w, f"{w.data}[k]")
    over = w.dice.choice(("sum", "sum", "max"))
    loop = w.dice.choice(("unsigned", "size_t", "uint16_t"))
    if _summed(w):
        w.function("total", "total", "uint32_t", (), [f"return {_sum(w)};"], "sum")
    elif over == "sum":
        body: Body = [
            "uint32_t sum = 0;",
            "",
            f"for ({loop} k = 0; k < {n}; k++) {{",
            f"    sum += {value};",
            "}",
            "return sum;",
        ]
        w.function("total", "total", "uint32_t", (), body, "sum")
    else:
        inner: Body = [f"if ({value} > most) {{", f"    most = {value};", "}"]
        body = ["uint32_t most = 0;", "", f"for ({loop} k = 0; k < {n}; k++) {{", *_deeper(inner), "}", "return most;"]
        w.function("total", "most", "uint32_t", (), body, "max")


def _latest(w: Writer) -> None:
    back: Body = [f"unsigned at = {w.head};", "if (at == 0) {", f"    at = {w.size};", "}", "at--;"]
    if w.plan.direction < 0 or is_free(w.plan) or w.plan.walk in ("natural", "mask"):
        back = _back(w, "0u")
    w.function("latest", "latest", "void", ((f"{w.element} *", "out"),), [*back, f"*out = {w.data}[at];"], "out")


def _oldest(w: Writer) -> None:
    w.function("oldest", "oldest", "void", ((f"{w.element} *", "out"),), [f"*out = {w.slot('head')};"], "out")


def _flush(w: Writer) -> None:
    whole = f"sizeof({w.data})" if w.plan.storage != "pointer" else f"{w.size} * sizeof({w.data}[0])"
    body: Body = [f"memset({w.data}, 0, {whole});", f"{w.head} = 0;"]
    if w.count:
        body.append(f"{w.count} = 0;")
    if _summed(w):
        body.append(f"{_sum(w)} = 0;")
    w.function("flush", "clear", "void", (), body)
