"""A ring program from its seed number: the text to inspect, and the text that joins it to the driver."""

import random
from dataclasses import dataclass

from tests.rings.histories import write_history
from tests.rings.parts import Plan, plan
from tests.rings.queues import write_queue
from tests.rings.writer import Operation, Writer


@dataclass(frozen=True, slots=True)
class Made:
    """A program. ``joined`` is the unit that includes it (as ``name``) and offers it to the driver; ``functions`` gives
    the C functions of each operation, ``moves`` the (line, index, function) of each advance."""

    number: int
    plan: Plan
    name: str
    text: str
    joined: str
    functions: dict[str, frozenset[str]]
    moves: tuple[tuple[int, str, str], ...]


def make(number: int) -> Made:
    """The program of a seed number; the same number gives the same text."""
    chosen = plan(number)
    w = Writer(chosen, random.Random(f"text {number}"))
    w.begin()
    if chosen.kind == "queue":
        write_queue(w)
    else:
        write_history(w)
    text = "\n".join(w.lines).rstrip("\n") + "\n"
    functions = {role: frozenset(names) for role, names in w.functions.items()}
    name = f"{w.prefix}_{w.what}s.c"
    return Made(number, chosen, name, text, _joined(w, name), functions, tuple(w.moves))


# ------------------------------------------------------------------------------------------------------- the driver's


def _joined(w: Writer, name: str) -> str:
    """The unit that includes the program and fills a ``struct ring_ops``."""
    n = w.plan.number
    renamed = [f"#define {item.name} {item.name}_{n}" for item in w.operations]
    lines = ['#include "../driver.h"', *renamed, f'#include "p{n}/{name}"', ""]
    if w.own == "q->" and not (w.plan.wrapped and w.plan.storage == "embedded"):
        lines.append(f"static {w.pointer} ring_;")
        objects = ["ring_"]
    else:
        objects = list(w.objects)
    objects += [item for item in w.objects if item not in objects]
    spans = ", ".join(f"{{&{item}, sizeof({item})}}" for item in objects)
    lines.append(f"static const struct span spans_[] = {{{spans}}};")
    fields = {"number": str(n), "kind": w.plan.kind.upper(), "spans": "spans_", "span_count": str(len(objects))}
    fields |= _facts(w)
    lines.append(f"static const long sizes_[] = {{{', '.join(map(str, _sizes(w)))}, 0}};")
    lines += _memory(w)
    for item in w.operations:
        fields[item.role] = f"{item.role}_"
        lines += _adapter(w, item)
    for role, index in (("head", w.head), ("tail", w.tail)):
        if index:
            lines.append(f"static long {role}_(void) {{ return {_slot_number(w, index)}; }}")
            fields[role] = f"{role}_"
    if _may_start_high(w):
        indices = [_there(w, index) for index in (w.head, w.tail) if index]
        lines.append(f"static void preset_(int which) {{ static const unsigned long less[] = {{{_low(w)}, 1, 0}};")
        lines += [f"    {index} = ({w.plan.index.name})({w.plan.index.high}ul - less[which]);" for index in indices]
        lines.append("}")
        fields["preset"] = "preset_"
    lines.append(f"const struct ring_ops ops_{n} = {{")
    lines += [f"    .{field} = {value}," for field, value in fields.items()]
    return "\n".join([*lines, "    .storage = storage_, .sizes = sizes_,", "};"]) + "\n"


def _facts(w: Writer) -> dict[str, str]:
    plan = w.plan
    place = next((item for item in w.operations if item.role == "at"), None)
    top = 0 if place is None else 255 if place.arguments[0][0] == "uint8_t" else 700
    total = next((item.style for item in w.operations if item.role == "total"), "")
    return {
        "spare": "1" if plan.scheme == "one_slot" else "0",
        "direction": str(plan.direction),
        "overwrites": str(int(plan.scheme == "overwrite")),
        "whole": "0",
        "at_filled": str(int(place is not None and place.style == "filled")),
        "total_is": "1" if total == "max" else "0",
        # Long enough for a counter of 16 bits to overflow.
        "long_run": str(int(plan.index.bits == 16 and plan.walk in ("free_modulo", "free_mask"))),
        "at_max": str(top),
        "other_capacity": str(plan.sibling - (plan.scheme == "one_slot") if plan.slip == "sibling" else 0),
        "mask": "0xFFFFFF" if w.members else hex((1 << plan.element.bits) - 1),
        "element": f"sizeof({w.element})",
    }


def _sizes(w: Writer) -> list[int]:
    """The sizes to run with: the planned one, and others where it is set at run time."""
    plan = w.plan
    if plan.storage != "pointer" or plan.walk == "natural":
        return [plan.slots]
    others = [2, 3, 5, 8, 16]
    if plan.walk in ("mask", "free_mask", "free_modulo"):
        # Without a check at the start, a size that is no power of two is what the program invites.
        others = [2, 8, 16] if plan.slip not in ("mask_odd", "range") else others
    top = plan.index.high if plan.index.bits > 8 else 0xFFFF
    return [plan.slots, *(item for item in others if item != plan.slots and item <= top)]


def _there(w: Writer, text: str) -> str:
    """A place as the driver's unit reaches it."""
    if w.own == "q->":
        inside = w.plan.wrapped and w.plan.storage == "embedded"
        return text.replace("q->", f"{w.prefix}_ring." if inside else "ring_.")
    return text


def _memory(w: Writer) -> list[str]:
    data = _there(w, w.data)
    head = "static struct span storage_(long slots)\n{"
    if w.plan.storage == "pointer":
        size = f"(size_t)slots * sizeof({w.element})"
        return [head, f"    return (struct span){{arena_ + sizeof arena_ / 2, {size}}};", "}"]
    return [head, "    (void)slots;", f"    return (struct span){{(void *){data}, sizeof({data})}};", "}"]


def _slot_number(w: Writer, index: str) -> str:
    place = _there(w, index)
    size = "(long)ring_.size" if w.plan.storage == "pointer" else str(w.plan.slots)
    if w.plan.walk == "pointer":
        return f"(long)({place} - {_there(w, w.data)}) % {size}"
    return (
        f"(long)((unsigned long){place} % (unsigned long){size})"
        if not w.plan.index.signed
        else f"(long){place} % {size}"
    )


def _may_start_high(w: Writer) -> bool:
    """Whether an index that only ever counts up gets, in so many calls, to where its type ends."""
    plan = w.plan
    return plan.walk in ("free_modulo", "free_mask") and plan.index.bits in (16, 32)


def _low(w: Writer) -> str:
    return str(2 * w.plan.slots + 3)


def _value(w: Writer, text: str) -> str:
    """An element as a number."""
    if w.members:
        one, two = w.members
        return f"((unsigned){text}.{one} | (unsigned)(uint16_t){text}.{two} << 8)"
    return f"((unsigned){text} & {hex((1 << w.plan.element.bits) - 1)})"


def _adapter(w: Writer, item: Operation) -> list[str]:
    mine = w.own == "q->" and not (w.plan.wrapped and w.plan.storage == "embedded") and item.role != "side"
    first = ["&ring_"] if mine else []

    def call(*rest: str) -> str:
        return f"{item.name}({', '.join([*first, *rest])})"

    element = f"struct {w.what}" if w.members else w.element
    match item.role:
        case "start":
            if item.result == "void":
                return [f"static int start_(long slots) {{ (void)slots; {call()}; return 1; }}"]
            kind = item.arguments[1][0]
            buffer = "(void *)(arena_ + sizeof arena_ / 2)"
            return [f"static int start_(long slots) {{ return {call(buffer, f'({kind})slots')}; }}"]
        case "side":
            return [f"static void side_(unsigned v) {{ {call('(uint8_t)v')}; }}"]
        case "flush":
            return [f"static void flush_(void) {{ {call()}; }}"]
        case "count" | "room" | "empty" | "full":
            return [f"static long {item.role}_(void) {{ return (long){call()}; }}"]
        case "total":
            return [f"static unsigned long total_(void) {{ return {call()}; }}"]
        case "skip":
            return [f"static long skip_(long n) {{ return (long){call(f'({item.arguments[0][0]})n')}; }}"]
        case "put":
            return _put(w, item, call)
        case "get" if not item.arguments:
            text = f"static int get_(unsigned *v) {{ {item.result} got = {call()}; "
            if item.style == "minus":
                return [text + "if (got < 0) return 0; *v = (unsigned)got; return 1; }"]
            return [text + f"*v = {_value(w, 'got')}; return 2; }}"]
        case "get" | "peek" | "latest" | "oldest":
            return _out(w, item, call, element)
        case "at":
            kind = item.arguments[0][0]
            return [
                f"static int at_(long place, unsigned *v) {{ {element} got; memset(&got, 0, sizeof got); "
                f"int told = {call(f'({kind})place', '&got')}; *v = {_value(w, 'got')}; return told; }}"
            ]
    return _many(w, item, call, element)


def _put(w: Writer, item: Operation, call: object) -> list[str]:
    assert callable(call)
    if not w.members:
        done = call(f"({w.element})v")
    elif len(item.arguments) == 1:
        done = call("&given")
    else:
        done = call("(uint8_t)v", "(int16_t)(v >> 8)")
    given = f"struct {w.what} given = {{(uint8_t)v, (int16_t)(v >> 8)}}; (void)given; " if w.members else ""
    told = {"bool": f"return {done};", "int": f"return {done} == 0;", "void": f"{done}; return 2;"}[item.style]
    return [f"static int put_(unsigned v) {{ {given}{told} }}"]


def _out(w: Writer, item: Operation, call: object, element: str) -> list[str]:
    assert callable(call)
    done = call("&got")
    told = {"bool": f"int told = {done};", "int": f"int told = {done} == 0;", "void": f"{done}; int told = 2;"}[
        item.result
    ]
    return [
        f"static int {item.role}_(unsigned *v) {{ {element} got; memset(&got, 0, sizeof got); {told} "
        f"*v = {_value(w, 'got')}; return told; }}"
    ]


def _many(w: Writer, item: Operation, call: object, element: str) -> list[str]:
    assert callable(call)
    kind = item.arguments[1][0]
    if item.role == "put_n":
        put = "many[k] = (element_)v[k];" if not w.members else (
            f"many[k].{w.members[0]} = (uint8_t)v[k]; many[k].{w.members[1]} = (int16_t)(v[k] >> 8);"
        )  # fmt: skip
        return [
            f"static long put_n_(const unsigned *v, long n) {{ typedef {element} element_; "
            f"element_ *many = (void *)scratch_; for (long k = 0; k < n; k++) {{ {put} }} "
            f"return (long){call('many', f'({kind})n')}; }}"
        ]
    return [
        f"static long get_n_(unsigned *v, long n) {{ {element} *many = (void *)scratch_; "
        f"long told = (long){call('many', f'({kind})n')}; "
        f"for (long k = 0; k < told && k < n; k++) {{ v[k] = {_value(w, 'many[k]')}; }} return told; }}"
    ]
