"""Strided intervals as sets: making them, joining and meeting them, widening, and bringing them into a C type."""

from bisect import bisect_left, bisect_right
from collections.abc import Callable, Iterable, Sequence
from math import gcd
from typing import Final

from stepring.meaning.types import CType, IntType, PointerType
from stepring.values.types import Interval

FEW: Final = 24
"""Up to this many pairs of operands are computed one by one where no formula is exact."""

UNBOUNDED: Final = Interval(-(1 << 1100), 1 << 1100, 1)
"""Stands for a value of which nothing is known, not even an integer type (a real number, a type never declared)."""

FALSE: Final = Interval(0, 0, 0)
TRUE: Final = Interval(1, 1, 0)
TRUTH: Final = Interval(0, 1, 1)


# ---------------------------------------------------------------------------------------------------------- making


def constant(value: int) -> Interval:
    """The set of one integer."""
    return Interval(value, value, 0)


def interval(low: int, high: int, stride: int = 1) -> Interval | None:
    """The integers from ``low`` in steps of ``stride`` (at least 1) that do not exceed ``high``."""
    if low > high:
        return None
    if low == high:
        return Interval(low, low, 0)
    top = high - (high - low) % stride
    return Interval(low, top, stride if top > low else 0)


def hull(values: Iterable[int]) -> Interval | None:
    """The smallest strided interval that holds all of ``values``."""
    members = sorted(set(values))
    if not members:
        return None
    step = 0
    for value in members:
        step = gcd(step, value - members[0])
    return Interval(members[0], members[-1], step)


def number_type(kind: CType) -> IntType | None:
    """The integer type that stands for ``kind``: itself, an unsigned one of a pointer's width, None for all others."""
    if isinstance(kind, IntType):
        return kind
    if isinstance(kind, PointerType):
        return IntType("pointer", kind.width, False, 99)
    return None


def whole(kind: CType) -> Interval:
    """All the values of a type; ``UNBOUNDED`` for one that holds no integers or addresses."""
    number = number_type(kind)
    if number is None:
        return UNBOUNDED
    return Interval(number.low, number.high, 1) if number.low < number.high else Interval(number.low, number.low, 0)


# ---------------------------------------------------------------------------------------------------------- sets


def size(a: Interval) -> int:
    """How many integers the interval holds."""
    return 1 if a.stride == 0 else (a.high - a.low) // a.stride + 1


def members(a: Interval) -> range:
    """The integers of the interval, ascending."""
    return range(a.low, a.high + 1, a.stride or 1)


def contains(a: Interval | None, value: int) -> bool:
    """Whether ``value`` is one of the integers."""
    if a is None or not a.low <= value <= a.high:
        return False
    return a.stride == 0 or (value - a.low) % a.stride == 0


def is_subset(a: Interval | None, b: Interval | None) -> bool:
    """Whether every integer of ``a`` is in ``b``."""
    if a is None or a is b:
        return True
    if b is None or a.low < b.low or a.high > b.high:
        return False
    if b.stride == 1:
        return True
    if b.stride == 0:
        return a.low == b.low and a.stride == 0
    return (a.low - b.low) % b.stride == 0 and a.stride % b.stride == 0


def join(a: Interval | None, b: Interval | None) -> Interval | None:
    """The smallest strided interval that holds both."""
    if a is None or a is b:
        return b
    return a if b is None else union(a, b)


def union(a: Interval, b: Interval) -> Interval:
    """``join`` of two sets that are not empty."""
    if a == b:
        return a
    return Interval(min(a.low, b.low), max(a.high, b.high), gcd(a.stride, b.stride, a.low - b.low))


def meet(a: Interval | None, b: Interval | None) -> Interval | None:
    """The integers that are in both, exactly (the Chinese remainder theorem on the strides)."""
    if a is None or b is None:
        return None
    if a.stride == 0:
        return a if contains(b, a.low) else None
    if b.stride == 0:
        return b if contains(a, b.low) else None
    if b.stride == 1:
        return within(a, b.low, b.high)
    if a.stride == 1:
        return within(b, a.low, a.high)
    common = gcd(a.stride, b.stride)
    if (b.low - a.low) % common:
        return None
    step = a.stride // common * b.stride
    turns = (b.low - a.low) // common * pow(a.stride // common, -1, b.stride // common) % (b.stride // common)
    residue = a.low + turns * a.stride
    low = max(a.low, b.low)
    return interval(low + (residue - low) % step, min(a.high, b.high), step)


def within(a: Interval | None, low: int, high: int) -> Interval | None:
    """The integers of ``a`` from ``low`` to ``high``."""
    if a is None or (low <= a.low and a.high <= high):
        return a
    step = a.stride or 1
    start = a.low if low <= a.low else low + (a.low - low) % step
    return interval(start, min(a.high, high), step)


def without(a: Interval | None, value: int) -> Interval | None:
    """``a`` less one integer, where that is an end of it (a hole in the middle cannot be said)."""
    if a is None:
        return None
    if value == a.low:
        return interval(a.low + (a.stride or 1), a.high, a.stride or 1)
    if value == a.high:
        return interval(a.low, a.high - a.stride, a.stride)
    return a


def widen(old: Interval | None, new: Interval | None, thresholds: Sequence[int]) -> Interval | None:
    """``old`` joined with ``new``, a bound that moved being moved on to the next of the sorted ``thresholds``.

    Repeated widening ends: a bound can move once per threshold, and the stride can only be replaced by a divisor.
    Past the last threshold a bound is unbounded.
    """
    if old is None or new is None:
        return new if old is None else old
    both = union(old, new)
    low, high = both.low, both.high
    step = both.stride or 1
    if low < old.low:
        place = bisect_right(thresholds, low)
        floor = thresholds[place - 1] if place else UNBOUNDED.low
        low = floor + (low - floor) % step
    if high > old.high:
        place = bisect_left(thresholds, high)
        ceiling = thresholds[place] if place < len(thresholds) else UNBOUNDED.high
        high = ceiling - (ceiling - high) % step
    return interval(low, high, step)


def narrow(old: Interval | None, new: Interval | None) -> Interval | None:
    """A widened value ``old`` replaced by what it gives when computed once more; never larger than ``old``."""
    return meet(old, new)


# ---------------------------------------------------------------------------------------------------------- into a
# type


def fits(a: Interval, kind: IntType) -> bool:
    """Whether all the integers are values of the type."""
    return kind.low <= a.low and a.high <= kind.high


def wrap(a: Interval, kind: IntType) -> Interval:
    """The integers modulo two to the type's width, as values of the type.

    Exact where the wrapped set is an arithmetic sequence again; a set that is split by the wrap becomes the join of
    the halves.
    """
    if kind.low <= a.low and a.high <= kind.high:
        return a
    modulus = 1 << kind.width
    base = -(modulus >> 1) if kind.signed else 0
    top = base + modulus - 1
    if a.stride == 0:
        return constant((a.low - base) % modulus + base)
    if a.high - a.low < modulus:
        low = (a.low - base) % modulus + base
        high = a.high + low - a.low
        if high <= top:
            return Interval(low, high, a.stride)
        last = top - (top - low) % a.stride
        return union(
            Interval(low, last, a.stride if last > low else 0),
            Interval(last + a.stride - modulus, high - modulus, a.stride if high > last + a.stride else 0),
        )
    step = gcd(a.stride, modulus)
    if step == modulus:
        return constant((a.low - base) % modulus + base)
    first = base + (a.low - base) % step
    return Interval(first, top - (top - first) % step, step)


def truth(a: Interval) -> Interval:
    """``a != 0`` as an int."""
    if not contains(a, 0):
        return TRUE
    return FALSE if a.stride == 0 else TRUTH


def convert(a: Interval | None, kind: CType) -> Interval | None:
    """Conversion to a type (6.3.1.2, 6.3.1.3): to ``_Bool`` by ``!= 0``, else modulo; unknown for other types."""
    if a is None:
        return None
    number = number_type(kind)
    if number is None:
        return UNBOUNDED
    if number.name == "_Bool":
        return truth(a)
    return whole(number) if a.low <= UNBOUNDED.low or a.high >= UNBOUNDED.high else wrap(a, number)


def settle(exact: Interval, kind: IntType) -> Interval:
    """An arithmetic result computed in unbounded integers as the type has it; signed overflow gives its range."""
    if fits(exact, kind):
        return exact
    return whole(kind) if kind.signed else wrap(exact, kind)


# ---------------------------------------------------------------------------------------------------------- helpers


def between(x: int, y: int, step: int) -> Interval:
    """The interval between two ends in either order; ``step`` divides from the lower one."""
    low, high = min(x, y), max(x, y)
    return interval(low, high, step or 1) or constant(low)


def pairwise(
    operation: Callable[[int, int], int], a: Interval, b: Interval, *, skip_zero: bool = False
) -> Interval | None:
    """The hull of all results if the pairs are few, else None (also where every divisor is zero)."""
    if size(a) * size(b) > FEW:
        return None
    return hull(operation(x, y) for x in members(a) for y in members(b) if y or not skip_zero)
