"""Arithmetic on strided intervals: the sets ``{low, low + stride, …, high}`` of integers.

The one idea: compute in unbounded integers, where the bounds of sums, products and quotients are simple, then bring
the result into its C type as that type does: modulo two to the width for unsigned types (6.2.5p9), and for a signed
one the type's whole range if it can overflow, because that is undefined behaviour (6.5p5). Conversions to a signed
type wrap in two's complement, as every compiler in use defines 6.3.1.3p3. A set of few pairs is computed pair by
pair, so results for it are the tightest strided interval there is.

Every function is sound: each concrete result lies in the interval that is returned. ``None`` is the empty set.
"""

from typing import Final

from stepring.meaning.types import IntType
from stepring.values.arithmetic import (
    add,
    divide,
    modulo,
    multiply,
    negate,
    quotient,
    remainder,
    shift_left,
    shift_right,
    subtract,
)
from stepring.values.bits import bit_and, bit_or, bit_xor, complement
from stepring.values.sets import (
    FALSE,
    FEW,
    TRUE,
    TRUTH,
    UNBOUNDED,
    constant,
    contains,
    convert,
    fits,
    hull,
    interval,
    is_subset,
    join,
    meet,
    members,
    narrow,
    number_type,
    settle,
    size,
    truth,
    union,
    whole,
    widen,
    within,
    without,
    wrap,
)
from stepring.values.types import Interval

__all__ = [
    "COMPARISONS",
    "FALSE",
    "FEW",
    "TRUE",
    "TRUTH",
    "UNBOUNDED",
    "add",
    "binary",
    "bit_and",
    "bit_or",
    "bit_xor",
    "compare",
    "complement",
    "constant",
    "contains",
    "convert",
    "divide",
    "exact_binary",
    "fits",
    "hull",
    "interval",
    "is_subset",
    "join",
    "may_overflow",
    "meet",
    "members",
    "modulo",
    "multiply",
    "narrow",
    "negate",
    "number_type",
    "quotient",
    "remainder",
    "settle",
    "shift_left",
    "shift_right",
    "size",
    "subtract",
    "truth",
    "unary",
    "union",
    "whole",
    "widen",
    "within",
    "without",
    "wrap",
]


def compare(operator: str, a: Interval, b: Interval) -> Interval:
    """A comparison of two integers as an int: 0, 1 or both."""
    if operator == ">":
        return compare("<", b, a)
    if operator == ">=":
        return compare("<=", b, a)
    if operator == "<":
        return TRUE if a.high < b.low else FALSE if a.low >= b.high else TRUTH
    if operator == "<=":
        return TRUE if a.high <= b.low else FALSE if a.low > b.high else TRUTH
    same = TRUTH
    if meet(a, b) is None:
        same = FALSE
    elif a.stride == b.stride == 0:
        same = TRUE
    if operator == "==":
        return same
    return same if same is TRUTH else (TRUE if same is FALSE else FALSE)


COMPARISONS: Final = frozenset(("<", "<=", ">", ">=", "==", "!="))


def exact_binary(operator: str, a: Interval, b: Interval, width: int) -> Interval | None:
    """An arithmetic operator in unbounded integers; None where no pair of operands has a defined result."""
    if operator == "+":
        return add(a, b)
    if operator == "-":
        return subtract(a, b)
    if operator == "*":
        return multiply(a, b)
    if operator == "/":
        return divide(a, b)
    if operator == "%":
        return modulo(a, b)
    if operator == "<<":
        return shift_left(a, b, width)
    if operator == ">>":
        return shift_right(a, b, width)
    if operator == "&":
        return bit_and(a, b, width)
    return bit_or(a, b, width) if operator == "|" else bit_xor(a, b, width)


def binary(operator: str, a: Interval | None, b: Interval | None, kind: IntType) -> Interval | None:
    """A binary operator whose result has the type ``kind`` (for comparisons: ``int``).

    The operands are values of their type. Undefined results (division by nothing but zero, a shift by the width or
    more) give the type's range. ``<<`` of a signed type is taken modulo, as compilers for embedded targets do.
    """
    if a is None or b is None:
        return None
    if operator in COMPARISONS:
        return compare(operator, a, b)
    exact = exact_binary(operator, a, b, kind.width)
    if exact is None:
        return whole(kind)
    return wrap(exact, kind) if operator == "<<" else settle(exact, kind)


def unary(operator: str, a: Interval | None, kind: IntType) -> Interval | None:
    """``-``, ``~`` or ``!`` with a result of the type ``kind``."""
    if a is None:
        return None
    if operator == "!":
        return compare("==", a, FALSE)
    if operator == "~":
        return wrap(complement(a), kind)
    return settle(negate(a), kind)


def may_overflow(operator: str, a: Interval | None, b: Interval | None, kind: IntType) -> bool:
    """Whether the exact result of some operands is no value of the type (undefined if signed, else a wrap)."""
    if a is None or b is None or operator in COMPARISONS:
        return False
    exact = exact_binary(operator, a, b, kind.width)
    return exact is not None and not fits(exact, kind)
