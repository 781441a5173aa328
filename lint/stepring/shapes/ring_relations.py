"""Candidates for what a ring's integers keep: where its indices stay, how they hang together with its capacity.

Each candidate is a relation that rings of one form or another keep; which of them this ring keeps is found out by
trying (``paths.induction``). Widths are such that no sum of two of the integers wraps round.
"""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import z3

from stepring.meaning.scope import size_of
from stepring.meaning.types import ArrayType, CType, IntType, PointerType, StructLayout, StructType
from stepring.paths.induction import Family, Relation, View
from stepring.paths.symbolic_terms import Number, Truth, bits, both, compared, either, equal
from stepring.shapes.ring_keys import Key, short_text
from stepring.shapes.types import Ring

Count = Callable[[View], Number]


@dataclass(frozen=True, slots=True, eq=False)
class Slots:
    """The number of slots as a formula, with its text as C; ``key`` holds it (plus ``plus``), None for a constant."""

    text: str
    key: Key | None
    plus: int
    number: Count


def field_type(structs: Mapping[str, StructLayout], variables: Mapping[str, CType], key: Key) -> CType | None:
    """The type of what a key names."""
    type_: CType | None = None
    if key[0] == "member":
        layout = structs.get(key[1])
        member = layout.field(key[2]) if layout is not None else None
        type_ = member.type if member is not None else None
        rest = key[3:]
    else:
        type_ = variables.get(key[1])
        rest = key[2:]
    for word in rest:
        if word == "[]" and isinstance(type_, ArrayType):
            type_ = type_.element
        elif word == "*" and isinstance(type_, PointerType):
            type_ = type_.to
        elif word.startswith(".") or word not in ("[]", "*"):
            return None
    return type_


def slots_of(ring: Ring) -> Slots | None:
    """The ring's capacity; None where the code does not show it as a constant, a member or a lasting variable."""
    bound = ring.bound
    if ring.capacity is not None and (bound is None or bound.form == "constant"):
        capacity = ring.capacity
        return Slots(str(capacity), None, capacity, lambda view: capacity)
    if bound is None or bound.form not in ("member", "variable"):
        return None
    key, plus = bound.key, bound.plus

    def number(view: View) -> Number:
        held = view.number(key)
        return held + plus if isinstance(held, int) else held + z3.BitVecVal(plus, view.width)

    text = short_text(key) if not plus else f"({short_text(key)} + {plus})"
    return Slots(text, key, plus, number)


def family_of(
    ring: Ring,
    slots: Slots | None,
    structs: Mapping[str, StructLayout],
    variables: Mapping[str, CType],
    companions: Sequence[Key] = (),
) -> Family | None:
    """What makes up one object of the ring; None where its integers are not all in one structure or in variables."""
    keys = [index.key for index in ring.indices if index.form == "integer"]
    if slots is not None and slots.key is not None:
        keys.append(slots.key)
    names = {key[1] for key in keys if key[0] == "member"}
    if len(names) > 1 or not keys:
        return None
    types: dict[Key, IntType] = {}
    for key in keys:
        type_ = field_type(structs, variables, key)
        if not isinstance(type_, IntType):
            return None
        types[key] = type_
    for key in companions:
        type_ = field_type(structs, variables, key)
        if isinstance(type_, IntType) and not any(other[-1] == "[]" for other in types):
            types[key] = type_
    pointers: dict[Key, object] = {}
    if ring.storage_key and ring.storage_key[-1] == "*":
        key = ring.storage_key[:-1]
        type_ = field_type(structs, variables, key)
        if isinstance(type_, PointerType) and (key[0] == "var" or key[1] in names):
            pointers[key] = type_
    for index in ring.indices:
        if index.form == "pointer":
            type_ = field_type(structs, variables, index.key)
            if not isinstance(type_, PointerType) or (index.key[0] == "member" and names and index.key[1] not in names):
                return None
            pointers[index.key] = type_
    offsets: dict[Key, int] = {}
    single: set[Key] = set()
    for key in (*types, *pointers):
        if key[-1] == "[]":
            offsets[key] = 0
        elif key[0] == "member":
            layout = structs.get(key[1])
            member = layout.field(key[2]) if layout is not None else None
            if member is None or len(key) != 3:
                return None
            offsets[key] = member.offset // 8
        else:
            single.add(key)
    if any(key[-1] == "[]" for key in offsets) and any(key[-1] != "[]" for key in offsets):
        return None
    widest = max([16, *(type_.width for type_ in types.values())])
    return Family(next(iter(names), "[]" if offsets else ""), offsets, frozenset(single), types, pointers, widest + 3)


# --------------------------------------------------------------------------------------------------------- candidates


def relations_of(
    ring: Ring, slots: Slots | None, family: Family, constants: frozenset[int], pointer: int
) -> Iterator[Relation]:
    """The candidates of a ring; ``constants`` are numbers of the program that its integers may stay below."""
    walkers = [index.key for index in ring.indices if index.form == "integer" and index.role != "count"]
    counts = [index.key for index in ring.indices if index.role == "count"]
    taken = {*walkers, *counts, *([slots.key] if slots is not None and slots.key is not None else [])}
    companions = [key for key in family.types if key not in taken]
    width = family.width
    elements = any(key[-1] == "[]" for key in family.offsets)
    for key in (*walkers, *counts, *companions):
        name = short_text(key)
        if family.types[key].signed:
            yield _order(family, f"{name} >= 0", key, ">=", None, 0)
        if slots is not None:
            yield _below(f"{name} < {slots.text}", key, "<", slots, width)
            yield _below(f"{name} <= {slots.text}", key, "<=", slots, width)
        for constant in sorted(constants):
            if constant < 1 << (width - 2):
                yield _order(family, f"{name} < {constant}", key, "<", None, constant)
    if slots is not None and slots.key is not None:
        yield from _capacity(slots, family, pointer)
    if elements:
        return
    for place, one in enumerate(walkers):
        for other in walkers[place + 1 :]:
            yield from _pair(one, other, slots, counts, family)
    for count in counts:
        for key in walkers:
            yield _either_order(f"{short_text(count)} <= {short_text(key)}", count, key, "<=", width)


def _capacity(slots: Slots, family: Family, pointer: int) -> Iterator[Relation]:
    width = family.width
    key = slots.key
    assert key is not None

    def some(view: View) -> Truth:
        return compared(">", slots.number(view), 0, width, True)

    def power(view: View) -> Truth:
        number = bits(slots.number(view), width)
        return equal(number & (number - z3.BitVecVal(1, width)), 0, width)

    yield Relation(f"{slots.text} > 0", (key,), some)
    yield Relation(f"{slots.text} is a power of two", (key,), power)
    if family.types[key].width >= pointer:
        # No object is larger than half of what can be addressed: pointers into it must have a difference.
        most = (1 << (pointer - 1)) - 1
        yield Relation(
            f"{slots.text} <= PTRDIFF_MAX", (key,), lambda view: compared("<=", slots.number(view), most, width, True)
        )


def _pair(one: Key, other: Key, slots: Slots | None, counts: list[Key], family: Family) -> Iterator[Relation]:
    width = family.width
    for write, read in ((one, other), (other, one)):
        yield _either_order(f"{short_text(write)} <= {short_text(read)}", write, read, "<=", width)
        if slots is None:
            continue
        for count in counts:
            yield _in_step(write, read, count, slots, width)
        if family.types[write] == family.types[read] and not family.types[write].signed:
            yield _ahead(write, read, slots, family)
            for count in counts:
                yield _is_difference(write, read, count, family)


def _in_step(write: Key, read: Key, count: Key, slots: Slots, width: int) -> Relation:
    """``count`` slots from ``read`` on, round the end, is ``write``."""

    def formula(view: View) -> Truth:
        reached = bits(view.number(read), width) + bits(view.number(count), width)
        here = bits(view.number(write), width)
        return either(equal(reached, here, width), equal(reached, here + bits(slots.number(view), width), width))

    text = f"({short_text(read)} + {short_text(count)}) % {slots.text} == {short_text(write)}"
    keys = (write, read, count) if slots.key is None else (write, read, count, slots.key)
    return Relation(text, keys, formula)


def _ahead(write: Key, read: Key, slots: Slots, family: Family) -> Relation:
    """A free-running counter is at most the capacity ahead of the other."""
    narrow = family.types[write].width

    def formula(view: View) -> Truth:
        away = bits(view.number(write), family.width) - bits(view.number(read), family.width)
        wrapped = z3.ZeroExt(family.width - narrow, z3.Extract(narrow - 1, 0, away))
        return compared("<=", wrapped, slots.number(view), family.width, True)

    keys = (write, read) if slots.key is None else (write, read, slots.key)
    return Relation(f"{short_text(write)} - {short_text(read)} <= {slots.text}", keys, formula)


def _is_difference(write: Key, read: Key, count: Key, family: Family) -> Relation:
    narrow = family.types[write].width

    def formula(view: View) -> Truth:
        away = bits(view.number(write), family.width) - bits(view.number(read), family.width)
        wrapped = z3.ZeroExt(family.width - narrow, z3.Extract(narrow - 1, 0, away))
        return equal(wrapped, view.number(count), family.width)

    text = f"{short_text(write)} - {short_text(read)} == {short_text(count)}"
    return Relation(text, (write, read, count), formula)


def _order(family: Family, text: str, key: Key, op: str, other: Key | None, constant: int) -> Relation:
    def formula(view: View) -> Truth:
        right = view.number(other) if other is not None else constant
        return compared(op, view.number(key), right, family.width, True)

    return Relation(text, (key,) if other is None else (key, other), formula)


def _below(text: str, key: Key, op: str, slots: Slots, width: int) -> Relation:
    def formula(view: View) -> Truth:
        return compared(op, view.number(key), slots.number(view), width, True)

    return Relation(text, (key,) if slots.key is None else (key, slots.key), formula)


def _either_order(text: str, one: Key, other: Key, op: str, width: int) -> Relation:
    def formula(view: View) -> Truth:
        return compared(op, view.number(one), view.number(other), width, True)

    return Relation(text, (one, other), formula)


def holds_for(relation: Relation, values: Mapping[Key, int], family: Family) -> bool:
    """Whether a relation holds for known values."""
    found = relation.formula(View(lambda key: values[key], family.types, family.width))
    if isinstance(found, bool):
        return found
    return bool(z3.is_true(z3.simplify(found)))


def object_size(structs: Mapping[str, StructLayout], struct: str) -> int | None:
    """A structure's size in bytes."""
    return size_of(structs, StructType(struct))


__all__ = ["Slots", "both", "family_of", "field_type", "holds_for", "object_size", "relations_of", "slots_of"]
