"""Expressions as Python functions, for running code on concrete index values with everything else unknown.

The one idea: a value is an integer where it is known and a ``Range`` where it is not. A range says whether every one of
its values can really occur (``exact``: a parameter, an input) or whether it merely bounds what some code not looked at
left behind. Integers that came to be by going below zero in an unsigned type are marked (``Low``), so that a slot
number of 255 can be told from a counter that really counted that far. Arithmetic is that of the target
(``meaning.fold``, ``values.intervals``).
"""

import operator
from collections.abc import Callable, Mapping
from typing import Any, NamedTuple, TypeAlias

from stepring.meaning.fold import convert
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Binary,
    Cast,
    Const,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    Unary,
    VariablePlace,
)
from stepring.shapes.ring_keys import Key, Points, is_local, is_scalar, place_keys
from stepring.values import intervals
from stepring.values.types import Interval


class Range(NamedTuple):
    """The integers from ``low`` to ``high``; ``exact``: each of them can occur."""

    low: int
    high: int
    exact: bool


class Ptr(NamedTuple):
    """A pointer to an object, or (key with a final ``[]``) to the element ``offset`` of an array."""

    key: Key
    offset: Any


class Low(int):
    """An unsigned integer that came to be by going below zero."""


Value: TypeAlias = Any
"""An int, a ``Range``, a ``Ptr``, or None for what is no integer."""
Env: TypeAlias = dict[Key, Value]
Code: TypeAlias = Callable[[Env], Value]

WIDE = 4096
_BIT = Range(0, 1, False)


def whole(type_: CType, exact: bool) -> Value:
    """All values of an integer type, None for other types."""
    return Range(type_.low, type_.high, exact) if isinstance(type_, IntType) else None


def bounds(value: Value, type_: CType) -> Interval | None:
    """A value as an interval; None where it is no integer."""
    if isinstance(value, int):
        return Interval(int(value), int(value), 0)
    if isinstance(value, Range):
        return Interval(value.low, value.high, 1 if value.low < value.high else 0)
    return Interval(type_.low, type_.high, 1) if isinstance(type_, IntType) else None


class Compiler:
    """Turns the expressions of one flat function into Python functions of an environment.

    ``tracked`` are the lasting integers whose values the environment holds; ``ranges`` bounds others.
    """

    def __init__(self, points: Points, tracked: frozenset[Key], ranges: Mapping[Key, Range]) -> None:
        self.points = points
        self.tracked = tracked
        self.ranges = ranges

    def expr(self, expr: Expr, frame: str) -> Code:
        """The function that gives an expression's value."""
        match expr:
            case Const(value=value):
                return lambda env: value
            case Load(place=place, type=type_):
                return self._load(place, frame, type_)
            case Cast(operand=operand, type=IntType() as type_):
                return _cast(self.expr(operand, frame), operand.type, type_)
            case Cast(operand=operand, type=PointerType()):
                return self.expr(operand, frame)
            case Unary(op=op, operand=operand, type=IntType() as type_):
                return _unary(op, self.expr(operand, frame), operand.type, type_)
            case Binary(op=op, left=left, right=right, type=IntType() as type_):
                return _binary(op, self.expr(left, frame), self.expr(right, frame), left.type, right.type, type_)
            case AddressOf(place=place):
                return self._address(place, frame)
            case PointerStep(pointer=pointer, steps=steps):
                return _step(self.expr(pointer, frame), self.expr(steps, frame))
            case PointerDistance(left=left, right=right, type=type_):
                return _distance(self.expr(left, frame), self.expr(right, frame), type_)
        unknown = whole(expr.type, False)
        return lambda env: unknown

    def key(self, place: PlaceExpr, frame: str) -> tuple[Key | None, Code | None]:
        """Where a place is: one key, or the pointer that tells it at run time, or nothing."""
        keys = place_keys(place, frame, self.points)
        if len(keys) == 1:
            return next(iter(keys)), None
        if len(keys) > 1 and isinstance(place, DerefPlace):
            return None, self.expr(place.pointer, frame)
        return None, None

    def _load(self, place: PlaceExpr, frame: str, type_: CType) -> Code:
        key, pointer = self.key(place, frame)
        if pointer is not None:
            unknown = whole(type_, False)
            through = pointer

            def follow(env: Env) -> Value:
                target = through(env)
                return env.get(target.key, unknown) if isinstance(target, Ptr) else unknown

            return follow
        if key is not None and (is_local(key) or key in self.tracked):
            if isinstance(type_, PointerType) and key not in self.tracked:
                known = self.points.get(key, frozenset())
                target = Ptr(next(iter(known)), Range(0, (1 << 31) - 1, False)) if len(known) == 1 else None
                return lambda env: env.get(key, target)
            unknown = whole(type_, False)
            return lambda env: env.get(key, unknown)
        if key is not None and key in self.ranges:
            known_range = self.ranges[key]
            return lambda env: known_range
        if isinstance(type_, PointerType):
            known = self.points.get(key, frozenset()) if key is not None else frozenset()
            target = Ptr(next(iter(known)), Range(0, (1 << 31) - 1, False)) if len(known) == 1 else None
            return lambda env: target
        unknown = whole(type_, is_input(place))
        if key is not None and key[0] == "var" and is_scalar(key) and isinstance(type_, IntType):
            return lambda env: env.get(key, unknown)
        return lambda env: unknown

    def _address(self, place: PlaceExpr, frame: str) -> Code:
        keys = place_keys(place, frame, self.points)
        if len(keys) != 1:
            return lambda env: None
        key = next(iter(keys))
        if isinstance(place.type, ArrayType):
            found = Ptr((*key, "[]"), 0)
            return lambda env: found
        if isinstance(place, ElementPlace):
            index = self.expr(place.index, frame)
            return lambda env: Ptr(key, index(env))
        if isinstance(place, DerefPlace):
            return self.expr(place.pointer, frame)
        target = Ptr(key, 0)
        return lambda env: target


def is_input(place: PlaceExpr) -> bool:
    """Whether a place holds data from outside: a register at a fixed address, or what a parameter points to."""
    while isinstance(place, MemberPlace | ElementPlace):
        place = place.base
    if isinstance(place, VariablePlace):
        return place.variable.storage == "extern" and place.variable.volatile
    if not isinstance(place, DerefPlace):
        return False
    pointer = place.pointer
    while isinstance(pointer, Cast | PointerStep):
        pointer = pointer.operand if isinstance(pointer, Cast) else pointer.pointer
    if isinstance(pointer, Load) and isinstance(pointer.place, VariablePlace):
        return pointer.place.variable.storage == "parameter" and isinstance(place.type, IntType)
    return isinstance(pointer, Const)


def _cast(code: Code, source: CType, type_: IntType) -> Code:
    low, high = type_.low, type_.high
    if type_.name == "_Bool":
        return _unary("!", _unary("!", code, source, type_), type_, type_)
    if isinstance(source, IntType) and source.low >= low and source.high <= high:
        return code

    def run(env: Env) -> Value:
        value = code(env)
        if isinstance(value, int):
            if low <= value <= high:
                return value
            result = _wrapped(value, type_)
            return Low(result) if isinstance(value, Low) and not type_.signed else result
        if isinstance(value, Range):
            if low <= value.low and value.high <= high:
                return value
            inside = intervals.convert(Interval(value.low, value.high, 1), type_)
            exact = value.exact and value.high - value.low >= high - low  # then every value of the type is met
            return Range(inside.low, inside.high, exact) if inside is not None else Range(low, high, False)
        return Range(low, high, False)

    return run


def _wrapped(value: int, type_: IntType) -> int:
    result = convert(value, type_)
    return Low(result) if value < 0 and not type_.signed else result


def _unary(op: str, code: Code, source: CType, type_: IntType) -> Code:
    def run(env: Env) -> Value:
        value = code(env)
        if isinstance(value, int):
            if op == "!":
                return int(value == 0)
            result = -value if op == "-" else ~value
            return result if type_.low <= result <= type_.high else _wrapped(result, type_)
        if isinstance(value, Ptr):
            return 0 if op == "!" else whole(type_, False)
        if isinstance(value, Range):
            known = intervals.unary(op, Interval(value.low, value.high, 1), type_)
            if known is None:
                return whole(type_, False)
            return known.low if known.low == known.high else Range(known.low, known.high, value.exact)
        if op == "!":
            return Range(0, 1, isinstance(source, PointerType))
        return whole(type_, False)

    return run


def _quotient(left: int, right: int) -> int | None:
    if right == 0:
        return None
    result = abs(left) // abs(right)
    return result if (left < 0) == (right < 0) else -result


def _remainder(left: int, right: int) -> int | None:
    quotient = _quotient(left, right)
    return None if quotient is None else left - quotient * right


def _shift_left(left: int, right: int) -> int | None:
    return left << right if 0 <= right < 64 else None


def _shift_right(left: int, right: int) -> int | None:
    return left >> right if 0 <= right < 64 else None


_ARITHMETIC: dict[str, Callable[[int, int], int | None]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": _quotient,
    "%": _remainder,
    "<<": _shift_left,
    ">>": _shift_right,
    "&": operator.and_,
    "|": operator.or_,
    "^": operator.xor,
}
_COMPARE: dict[str, Callable[[Any, Any], bool]] = {
    "<": operator.lt,
    "<=": operator.le,
    ">": operator.gt,
    ">=": operator.ge,
    "==": operator.eq,
    "!=": operator.ne,
}


def _binary(op: str, left: Code, right: Code, one: CType, other: CType, type_: IntType) -> Code:
    compare = _COMPARE.get(op)
    if compare is not None:
        decide = compare

        def comparison(env: Env) -> Value:
            a, b = left(env), right(env)
            if isinstance(a, int) and isinstance(b, int):
                return int(decide(a, b))
            if isinstance(a, Range | int) and isinstance(b, Range | int):
                return _compare_ranges(op, a, b)
            return _compare_pointers(op, a, b)

        return comparison
    compute = _ARITHMETIC[op]
    low, high = type_.low, type_.high

    def arithmetic(env: Env) -> Value:
        a, b = left(env), right(env)
        if type(a) is int and type(b) is int:
            result = compute(a, b)
            if result is None:
                return Range(low, high, False)
            return result if low <= result <= high else _wrapped(result, type_)
        return _slow(op, compute, a, b, one, other, type_)

    return arithmetic


def _slow(
    op: str, compute: Callable[[int, int], int | None], a: Value, b: Value, one: CType, other: CType, type_: IntType
) -> Value:
    if isinstance(a, int) and isinstance(b, int):
        result = compute(int(a), int(b))
        if result is None:
            return whole(type_, False)
        if type_.low <= result <= type_.high:
            return Low(result) if op in "+-" and result > 0 else result
        return _wrapped(result, type_)
    x, y = bounds(a, one), bounds(b, other)
    known = intervals.binary(op, x, y, type_) if x is not None and y is not None else None
    if known is None:
        return whole(type_, False)
    if known.low == known.high:
        return known.low
    if op in "+-*" and known.high - known.low > WIDE:
        return whole(type_, False)
    # A constant on one side leaves what is free to take any value free enough for a comparison to go either way.
    exact = op in ("+", "-", "&", "%", ">>", "/") and (
        (isinstance(a, Range) and a.exact and isinstance(b, int))
        or (isinstance(b, Range) and b.exact and isinstance(a, int) and op in "+-&")
    )
    return Range(known.low, known.high, exact)


def _compare_ranges(op: str, a: Any, b: Any) -> Value:
    one = a if isinstance(a, Range) else Range(a, a, True)
    other = b if isinstance(b, Range) else Range(b, b, True)
    if op in (">", ">="):
        one, other, op = other, one, "<" if op == ">" else "<="
    if op == "<":
        known = 1 if one.high < other.low else 0 if one.low >= other.high else None
    elif op == "<=":
        known = 1 if one.high <= other.low else 0 if one.low > other.high else None
    else:
        apart = one.high < other.low or other.high < one.low
        known = None if not apart else int(op == "!=")
    return Range(0, 1, one.exact and other.exact) if known is None else known


def _compare_pointers(op: str, a: Value, b: Value) -> Value:
    if isinstance(a, Ptr) and isinstance(b, Ptr) and a.key == b.key:
        if isinstance(a.offset, int) and isinstance(b.offset, int):
            return int(_COMPARE[op](a.offset, b.offset))
        return _BIT
    if (isinstance(a, Ptr) and b == 0) or (isinstance(b, Ptr) and a == 0):
        return int(op == "!=")
    # A pointer from outside against null: either can be.
    return Range(0, 1, (a is None and b == 0) or (b is None and a == 0))


def _step(pointer: Code, steps: Code) -> Code:
    def run(env: Env) -> Value:
        base = pointer(env)
        if not isinstance(base, Ptr):
            return None
        return Ptr(base.key, add_offsets(base.offset, steps(env)))

    return run


def add_offsets(offset: Value, steps: Value) -> Value:
    """A pointer's element number after a step."""
    if isinstance(offset, int) and isinstance(steps, int):
        if offset == 0:
            return steps  # keeps the mark of a number that came from below zero
        return offset + steps
    if isinstance(offset, Range | int) and isinstance(steps, Range | int):
        one = offset if isinstance(offset, Range) else Range(offset, offset, True)
        other = steps if isinstance(steps, Range) else Range(steps, steps, True)
        return Range(one.low + other.low, one.high + other.high, False)
    return None


def _distance(left: Code, right: Code, type_: CType) -> Code:
    unknown = whole(type_, False)

    def run(env: Env) -> Value:
        a, b = left(env), right(env)
        if isinstance(a, Ptr) and isinstance(b, Ptr) and a.key == b.key:
            if isinstance(a.offset, int) and isinstance(b.offset, int):
                return a.offset - b.offset
        return unknown

    return run


# ---------------------------------------------------------------------------------------------------------- cutting

NEGATED = {"<": ">=", "<=": ">", ">": "<=", ">=": "<", "==": "!=", "!=": "=="}
MIRRORED = {"<": ">", "<=": ">=", ">": "<", ">=": "<=", "==": "==", "!=": "!="}


def cut_range(value: Range, operator: str, other: Value) -> Range | None:
    """The part of a range for which ``value operator other`` can hold."""
    if isinstance(other, int):
        least = most = int(other)
    elif isinstance(other, Range):
        least, most = other.low, other.high
    else:
        return value
    low, high = value.low, value.high
    match operator:
        case "<":
            high = min(high, most - 1)
        case "<=":
            high = min(high, most)
        case ">":
            low = max(low, least + 1)
        case ">=":
            low = max(low, least)
        case "==":
            low, high = max(low, least), min(high, most)
        case "!=" if least == most:
            low += low == least
            high -= high == least
    exact = value.exact and (isinstance(other, int) or other.exact)
    return Range(low, high, exact) if low <= high else None


def keeps(source: CType, target: CType) -> bool:
    """Whether a conversion leaves every value as it is."""
    return (
        isinstance(source, IntType)
        and isinstance(target, IntType)
        and source.low >= target.low
        and source.high <= target.high
    )
