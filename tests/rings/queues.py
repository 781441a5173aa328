"""The operations of a queue: store at the head, load at the tail, and what else firmware offers beside them."""

from tests.rings.writer import Writer, is_free

Body = list[object]


def write_queue(w: Writer) -> None:
    """All operations of the planned queue."""
    w.helpers()
    _start(w)
    plan = w.plan
    wanted = set(plan.operations)
    if wanted & {"room", "put_n", "skip", "at", "get_n"}:
        wanted.add("count")
    if plan.walk == "pointer":
        wanted -= {"at", "put_n", "skip", "get_n"}
    if plan.direction < 0 or (plan.walk == "natural"):
        wanted -= {"at", "skip"}
    if plan.walk == "lazy":
        wanted -= {"at", "peek", "skip"}
    if plan.scheme == "overwrite":
        wanted -= {"put_n", "room"}
    order = ["count", "room", "empty", "full"]
    w.dice.shuffle(order)
    for name in order:
        if name in wanted:
            {"count": _count, "room": _room, "empty": _is_empty, "full": _is_full}[name](w)
    rest = ["put", "get"]
    w.dice.shuffle(rest)
    for name in rest:
        {"put": _put, "get": _get}[name](w)
    for name, write in (
        ("peek", _peek),
        ("at", _at),
        ("flush", _flush),
        ("put_n", _put_n),
        ("get_n", _get_n),
        ("skip", _skip),
    ):
        if name in wanted:
            write(w)


def _start(w: Writer) -> None:
    plan = w.plan
    pointer = plan.storage == "pointer"
    if not pointer and (plan.storage != "embedded" or w.dice.random() < 0.5):
        return
    data = w.data.removeprefix(w.own)
    lines: Body = []
    refuse = "size == 0" if plan.scheme not in ("one_slot", "overwrite") else "size < 2"
    if pointer:
        if plan.walk in ("mask", "free_mask", "free_modulo") and plan.slip not in ("mask_odd", "range"):
            refuse += " || (size & (size - 1)) != 0"
        lines += [f"if ({refuse}) {{", "    return false;", "}", f"q->{data} = {data};", "q->size = size;"]
    if plan.walk == "pointer":
        lines += [f"{w.head} = {w.data};", f"{w.tail} = {w.data};"]
    else:
        lines += [f"{name} = 0;" for name in (w.head, w.tail) if name]
    lines += [f"{w.count} = 0;"] if w.count else []
    lines += [f"{w.full} = false;"] if w.full else []
    size_type = plan.index.name if plan.index.bits > 8 else "uint16_t"
    if pointer:
        lines.append("return true;")
        arguments = ((f"{w.element} *", data), (size_type, "size"))
        w.function("start", "start", "bool", arguments, lines)
    else:
        w.function("start", "start", "void", (), lines)


# ------------------------------------------------------------------------------------------------------------ tests


def _next(w: Writer) -> Body:
    """A local ``next``: the slot after the head's."""
    plan = w.plan
    if plan.walk == "pointer":
        return [([f"{w.element} *next = {w.head};", *w.advance("head", "next")], "head")]
    lines = w.advance("head", "next")
    kind = plan.index.name
    if plan.walk == "natural":
        return [([f"uint8_t next = (uint8_t)({w.head} + 1);"], "head")]
    if lines[0] == "next++;":
        return [([f"{kind} next = {w.head} + 1;", *lines[1:]], "head")]
    if len(lines) == 1 and lines[0].startswith("next = "):
        first, rest = lines[0].split(" = ", 1)
        return [([f"{kind} {first} = {rest.replace('next', w.head)}"], "head")]
    return [([f"{kind} next = {w.head};", *lines], "head")]


def _full_test(w: Writer) -> str:
    plan = w.plan
    same = "!=" if w.slipped("full_inverted") else "=="
    size = w.size
    if plan.slip == "full_early":
        size = f"{size} - 1"
    elif plan.slip == "full_late":
        size = f"{size} + 1"
    match plan.scheme:
        case "one_slot":
            return f"next {same} {w.tail}"
        case "flag":
            return f"!{w.full}" if w.slipped("full_inverted") else w.full
        case "difference":
            raw = f"{w.head} - {w.tail}"
            used = raw if plan.slip == "promoted" else f"({plan.index.name})({raw})"
            return f"{used} {'<' if w.slipped('full_inverted') else '>='} {size}"
    test = "<" if w.slipped("full_inverted") else w.dice.choice((">=", "=="))
    return f"{w.count} {test} {size}"


def _empty_test(w: Writer) -> str:
    inverted = w.slipped("empty_inverted")
    if w.plan.scheme == "flag":
        return f"{w.head} != {w.tail} || {w.full}" if inverted else f"{w.head} == {w.tail} && !{w.full}"
    if w.count:
        return f"{w.count} {'!=' if inverted else '=='} 0"
    return f"{w.head} {'!=' if inverted else '=='} {w.tail}"


# --------------------------------------------------------------------------------------------------------- put, get


def _element_argument(w: Writer) -> tuple[tuple[tuple[str, str], ...], list[str]]:
    """The arguments of a put and what stores them; ``@`` stands for the slot."""
    if not w.members:
        return ((w.element, "value"),), ["@ = value;"]
    if w.dice.random() < 0.5:
        return ((f"const struct {w.what} *", "item"),), ["@ = *item;"]
    one, two = w.members
    return (("uint8_t", one), ("int16_t", two)), [f"@.{one} = {one};", f"@.{two} = {two};"]


def _put(w: Writer) -> None:
    plan = w.plan
    arguments, stores = _element_argument(w)
    style = w.dice.choice(("bool", "bool", "int", "void"))
    result = {"bool": "bool", "int": "int", "void": "void"}[style]
    if plan.masked_irq:
        style, result = "void", "void"
    refused = {"bool": "return false;", "int": "return -1;", "void": "return;"}[style]
    done = {"bool": "return true;", "int": "return 0;", "void": ""}[style]
    body: Body = []
    if plan.scheme == "derived":
        at = f"{plan.index.name} at" if plan.index.high >= 2 * plan.slots else "uint16_t at"
        wrap = w.dice.choice(([f"if (at >= {w.size}) {{", f"    at -= {w.size};", "}"], [f"at %= {w.size};"]))
        write: Body = [f"{at} = {w.tail} + {w.count};", *wrap, *(line.replace("@", f"{w.data}[at]") for line in stores)]
        moving: Body = []
    else:
        write = [w.placed(line, "head") for line in stores]
        moving = [([f"{w.head} = next;"], "head")] if plan.scheme == "one_slot" else [(w.advance("head"), "head")]
        if plan.walk == "lazy":
            write = [f"if ({w.head} >= {w.limit('head')}) {{", f"    {w.head} = 0;", "}", *write]
    if plan.scheme == "one_slot":
        body += _next(w)
    grow: Body = [f"{w.count}++;"] if w.count and plan.scheme != "overwrite" else []
    if plan.scheme == "flag":
        grow = [f"{w.full} = {w.head} == {w.tail};"]
    act = [*moving, *write, *grow] if w.slipped("store_late") else [*write, *moving, *grow]
    if plan.scheme == "overwrite":
        body += _overwriting(w, [*write, *moving])
        body += [done] if done else []
    elif plan.slip == "full_missing":
        body += [*act, *([done] if done else [])]
    elif style == "void" and w.dice.random() < 0.5:
        body += [f"if (!({_full_test(w)})) {{", *_deeper(act), "}"]
    else:
        refusal = [f"if ({_full_test(w)}) {{", f"    {refused}", "}"]
        if plan.masked_irq:
            body += [f"if (!({_full_test(w)})) {{", *_deeper(act), "}"]
        else:
            body += [*refusal, *act, *([done] if done else [])]
    w.function("put", w.verbs[0], result, arguments, body, style)


def _overwriting(w: Writer, act: Body) -> Body:
    """Store; if there was no room the oldest goes."""
    slip = w.plan.slip == "tail_wrong"
    which = w.dice.choice(("none", "raw", "always")) if slip else ""
    drop: Body = [] if which == "none" else [(w.advance("tail"), "tail")]
    if which == "raw":
        drop = [([f"{w.tail}++;"], "tail")]
    if which == "always":
        return [*act, *drop, f"if ({w.count} < {w.size}) {{", f"    {w.count}++;", "}"]
    return [
        f"if ({w.count} == {w.size}) {{", *_deeper(drop), "} else {", f"    {w.count}++;", "}", *act,
    ] if w.dice.random() < 0.5 else [
        *act, f"if ({w.count} < {w.size}) {{", f"    {w.count}++;", "} else {", *_deeper(drop), "}",
    ]  # fmt: skip


def _deeper(body: Body) -> Body:
    return [
        ([f"    {line}" for line in item[0]], item[1]) if isinstance(item, tuple) else f"    {item}" for item in body
    ]


def _get(w: Writer) -> None:
    plan = w.plan
    style = w.dice.choice(("out", "out", "out_int", "value"))
    if not w.members and w.element == "uint8_t" and w.dice.random() < 0.3:
        style = "minus"
    if w.members:
        style = w.dice.choice(("out", "out_int"))
    if plan.masked_irq:
        style = "out" if w.members else "value"
    refused = {"out": "return false;", "out_int": "return -1;", "value": "return 0;", "minus": "return -1;"}[style]
    result = {"out": "bool", "out_int": "int", "value": w.element, "minus": "int"}[style]
    slot = w.slot("tail")
    load: Body = [f"*out = {slot};"] if style.startswith("out") else [f"{w.element} value = {slot};"]
    if plan.walk == "lazy":
        load = [f"if ({w.tail} >= {w.limit('tail')}) {{", f"    {w.tail} = 0;", "}", *load]
    moving: Body = [(w.advance("tail"), "tail")]
    body: Body = [] if plan.slip == "empty_missing" else [f"if ({_empty_test(w)}) {{", f"    {refused}", "}"]
    body += [*load, *moving]
    if w.count:
        body.append(f"{w.count}--;")
    if w.full:
        body.append(f"{w.full} = false;")
    body.append(
        {"out": "return true;", "out_int": "return 0;", "value": "return value;", "minus": "return value;"}[style]
    )
    arguments = ((f"{w.element} *", "out"),) if style.startswith("out") else ()
    w.function("get", w.verbs[1], result, arguments, body, style)


def _peek(w: Writer) -> None:
    test = f"if ({_empty_test(w)}) {{"
    slot = w.slot("tail")
    if w.slipped("peek_next"):
        slot = f"{w.data}[({w.tail} + 1) % {w.size}]"
    body: Body = [test, "    return false;", "}", f"*out = {slot};", "return true;"]
    w.function("peek", "peek", "bool", ((f"{w.element} *", "out"),), body, "out")


# ----------------------------------------------------------------------------------------------------- occupancy


def _count(w: Writer) -> None:
    plan, dice = w.plan, w.dice
    kind = "uint16_t"
    one, two = (w.tail, w.head) if plan.direction < 0 else (w.head, w.tail)
    n = w.size
    body: Body = []
    if w.count:
        body = [f"return {w.count};"]
    elif plan.scheme == "difference":
        body = [f"return ({plan.index.name})({w.head} - {w.tail});"]
    elif plan.slip == "count_raw":
        body = [f"return {one} - {two};"]
    elif plan.slip == "promoted":
        body = [
            dice.choice(
                (
                    f"return ({one} - {two}) % {n};",
                    f"return {one} - {two} + {n};",
                    f"return ({one} - {two} + {n}) % ({n} - 1);",
                )
            )
        ]
    elif plan.walk == "pointer":
        body = [
            f"int between = (int)({one} - {two});",
            "if (between < 0) {",
            f"    between += {n};",
            "}",
            "return (uint16_t)between;",
        ]
    elif plan.walk == "mask":
        body = [f"return ({one} - {two}) & ({n} - 1);"]
    elif plan.walk == "natural":
        body = [f"return (uint8_t)({one} - {two});"]
    else:
        body = dice.choice((
            [f"return ({one} + {n} - {two}) % {n};"],
            [f"if ({one} >= {two}) {{", f"    return {one} - {two};", "}", f"return {n} - {two} + {one};"],
            [f"int gap = (int){one} - (int){two};", "if (gap < 0) {", f"    gap += {n};", "}", "return gap;"],
        ))  # fmt: skip
    if w.full:
        body = [f"if ({w.full}) {{", f"    return {n};", "}", *body]
    w.function("count", dice.choice(("count", "used", "pending")), kind, (), body)


def _used(w: Writer) -> str:
    """A call of the count function from within the program."""
    made = next(item for item in w.operations if item.role == "count")
    if w.plan.wrapped and w.plan.storage == "embedded":
        return f"ring_{made.name.removeprefix(w.prefix + '_')}(q)"
    return f"{made.name}({'q' if w.own == 'q->' else ''})"


def _usable(w: Writer) -> str:
    return f"({w.size} - 1)" if w.plan.scheme == "one_slot" else w.size


def _room(w: Writer) -> None:
    plan = w.plan
    if any(item.role == "count" for item in w.operations) and plan.slip != "promoted":
        text = f"{_usable(w)} - {_used(w)}"
    elif plan.scheme == "difference":
        raw = f"{w.head} - {w.tail}"
        text = f"{w.size} - ({raw})" if plan.slip == "promoted" else f"{w.size} - ({plan.index.name})({raw})"
    elif w.count:
        text = f"{w.size} - {w.count}"
    elif w.full or plan.walk == "pointer":
        return
    else:
        one, two = (w.tail, w.head) if plan.direction < 0 else (w.head, w.tail)
        text = (
            f"({two} + {w.size} - {one} - 1) % {w.size}"
            if plan.slip != "promoted"
            else f"({two} - {one} - 1) % {w.size}"
        )
    w.function("room", w.dice.choice(("room", "free", "space")), "uint16_t", (), [f"return {text};"])


def _is_empty(w: Writer) -> None:
    w.function("empty", "is_empty", "bool", (), [f"return {_empty_test(w)};"])


def _is_full(w: Writer) -> None:
    if w.plan.slip == "full_missing" or (w.plan.scheme == "overwrite" and not w.count):
        return
    if w.plan.scheme == "one_slot":
        w.function("full", "is_full", "bool", (), [*_next(w), f"return {_full_test(w)};"])
    else:
        w.function("full", "is_full", "bool", (), [f"return {_full_test(w)};"])


# --------------------------------------------------------------------------------------------- flush, many at a time


def _flush(w: Writer) -> None:
    plan = w.plan
    start = w.data if plan.walk == "pointer" else "0"
    half = plan.slip == "flush_half"
    stale = plan.slip == "count_stale"
    body: Body = []
    if half:
        body.append(f"{w.dice.choice((w.head, w.tail))} = {start};")
    elif plan.scheme == "derived":
        body += [f"{w.tail} = 0;"] if w.dice.random() < 0.5 else []
    elif w.dice.random() < 0.5 and plan.walk != "lazy":
        body.append(f"{w.tail} = {w.head};")
    else:
        body += [f"{w.head} = {start};", f"{w.tail} = {start};"]
    if w.count and not stale:
        body.append(f"{w.count} = 0;")
    if w.full:
        body.append(f"{w.full} = false;")
    w.function("flush", w.dice.choice(("flush", "clear", "drop_all")), "void", (), body)


def _amount(w: Writer) -> str:
    return w.dice.choice(("size_t", "uint16_t", "unsigned"))


def _put_n(w: Writer) -> None:
    plan = w.plan
    number = _amount(w)
    arguments = ((f"const {w.element} *", "from"), (number, "n"))
    copies = (
        plan.direction > 0 and not is_free(plan) and plan.walk not in ("natural", "lazy") and plan.scheme != "derived"
    )
    room = f"{_usable(w)} - {_used(w)}"
    body: Body = [f"{number} room = {room};", "if (n > room) {", "    n = room;", "}"]
    if not copies or (w.dice.random() < 0.4 and plan.slip not in ("bulk_split", "bulk_narrow", "unnormalised")):
        if plan.scheme == "derived":
            step: Body = [f"{w.data}[({w.tail} + {w.count}) % {w.size}] = from[k];", f"{w.count}++;"]
        else:
            step = [
                f"{w.slot('head')} = from[k];",
                (w.advance("head"), "head"),
                *([f"{w.count}++;"] if w.count else []),
            ]
            if plan.walk == "lazy":
                step = [f"if ({w.head} >= {w.limit('head')}) {{", f"    {w.head} = 0;", "}", *step]
            if plan.scheme == "flag":
                step.append(f"{w.full} = {w.head} == {w.tail};")
        body += [f"for ({number} k = 0; k < n; k++) {{", *_deeper(step), "}", "return n;"]
        w.function("put_n", f"{w.verbs[0]}_many", number, arguments, body)
        return
    split = {"bulk_split": w.dice.choice((f"{w.size} - {w.head} - 1", f"{w.size} - {w.head} + 1"))}.get(
        plan.slip, f"{w.size} - {w.head}"
    )
    body += [f"{number} first = {split};", "if (first > n) {", "    first = n;", "}"]
    body.append(f"memcpy(&{w.data}[{w.head}], from, first * sizeof({w.data}[0]));")
    body.append(f"memcpy({w.data}, from + first, (n - first) * sizeof({w.data}[0]));")
    body.append((_bulk_advance(w, w.head, "head"), "head"))
    if w.count and plan.slip != "count_stale":
        body.append(f"{w.count} += n;")
    if plan.scheme == "flag":
        body += ["if (n > 0) {", f"    {w.full} = {w.head} == {w.tail};", "}"]
    w.function("put_n", f"{w.verbs[0]}_many", number, arguments, [*body, "return n;"])


def _bulk_advance(w: Writer, i: str, role: str) -> list[str]:
    """An index moved on by ``n``."""
    if w.plan.slip == "unnormalised" and w.plan.site in (role, "both"):
        return [f"{i} += n;"]
    if w.plan.slip == "bulk_narrow":
        return [f"{i} += n;", f"if ({i} >= {w.size}) {{", f"    {i} -= {w.size};", "}"]
    if w.plan.walk == "mask":
        return [f"{i} = ({i} + n) & ({w.size} - 1);"]
    return w.dice.choice((
        [f"{i} = ({i} + n) % {w.size};"],
        [f"size_t end = (size_t){i} + n;", f"{i} = end >= {w.size} ? end - {w.size} : end;"],
    ))  # fmt: skip


def _get_n(w: Writer) -> None:
    plan = w.plan
    number = _amount(w)
    arguments = ((f"{w.element} *", "to"), (number, "n"))
    body: Body = [f"{number} held = {_used(w)};", "if (n > held) {", "    n = held;", "}"]
    copies = plan.direction > 0 and not is_free(plan) and plan.walk not in ("natural", "lazy")
    if not copies or w.dice.random() < 0.5:
        step: Body = [f"to[k] = {w.slot('tail')};", (w.advance("tail"), "tail")]
        if plan.walk == "lazy":
            step = [f"if ({w.tail} >= {w.limit('tail')}) {{", f"    {w.tail} = 0;", "}", *step]
        body += [f"for ({number} k = 0; k < n; k++) {{", *_deeper(step), "}"]
    else:
        body += [f"{number} first = {w.size} - {w.tail};", "if (first > n) {", "    first = n;", "}"]
        body.append(f"memcpy(to, &{w.data}[{w.tail}], first * sizeof({w.data}[0]));")
        body.append(f"memcpy(to + first, {w.data}, (n - first) * sizeof({w.data}[0]));")
        body.append((_bulk_advance(w, w.tail, "tail"), "tail"))
    if w.count and plan.slip != "count_stale":
        body.append(f"{w.count} -= n;")
    if w.full:
        body += ["if (n > 0) {", f"    {w.full} = false;", "}"]
    w.function("get_n", f"{w.verbs[1]}_many", number, arguments, [*body, "return n;"])


def _skip(w: Writer) -> None:
    plan = w.plan
    number = _amount(w)
    body: Body = [f"{number} held = {_used(w)};", "if (n > held) {", "    n = held;", "}"]
    body.append(([f"{w.tail} += n;"] if is_free(plan) else _bulk_advance(w, w.tail, "tail"), "tail"))
    if w.count and plan.slip != "count_stale":
        body.append(f"{w.count} -= n;")
    if w.full:
        body += ["if (n > 0) {", f"    {w.full} = false;", "}"]
    w.function("skip", w.dice.choice(("skip", "discard")), number, ((number, "n"),), [*body, "return n;"])


def _at(w: Writer) -> None:
    plan = w.plan
    kind = w.dice.choice(("uint8_t", "uint16_t", "unsigned"))
    guard: Body = [f"if (place >= {_used(w)}) {{", "    return false;", "}"]
    if plan.slip == "argument_open":
        guard = []
    n, i = w.size, w.tail
    if is_free(plan):
        body: Body = [f"*out = {w.data}[{w.subscript('tail', f'({i} + place)')}];"]
    elif plan.walk == "mask":
        body = [f"*out = {w.data}[({i} + place) & ({n} - 1)];"]
    elif plan.slip == "argument_open" or w.dice.random() < 0.3:
        body = [f"unsigned at = {i} + place;", f"if (at >= {n}) {{", f"    at -= {n};", "}", f"*out = {w.data}[at];"]
    else:
        body = [f"*out = {w.data}[({i} + place) % {n}];"]
    w.function(
        "at",
        w.dice.choice(("at", "look")),
        "bool",
        ((kind, "place"), (f"{w.element} *", "out")),
        [*guard, *body, "return true;"],
        "out",
    )
