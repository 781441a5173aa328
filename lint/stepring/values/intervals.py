"""Arithmetic on strided intervals: the sets ``{low, low + stride, …, high}`` of integers.

The one idea: compute in unbounded integers, where the bounds of sums, products and quotients are simple, then bring
the result into its C type as that type does: modulo two to the width for unsigned types (6.2.5p9), and for a signed
one the type's whole range if it can overflow, because that is undefined behaviour (6.5p5). Conversions to a signed
type wrap in two's complement, as every compiler in use defines 6.3.1.3p3. A set of few pairs is computed pair by
pair, so results for it are the tightest strided interval there is.

Every function is sound: each concrete result lies in the interval that is returned. ``None`` is the empty set.
"""

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


# ----------------------------------------------------------------------------------------------------------
# arithmetic The functions of this part compute in unbounded integers.


def add(a: Interval, b: Interval) -> Interval:
    """Every sum."""
    return Interval(a.low + b.low, a.high + b.high, gcd(a.stride, b.stride))


def negate(a: Interval) -> Interval:
    """Every negation."""
    return Interval(-a.high, -a.low, a.stride)


def subtract(a: Interval, b: Interval) -> Interval:
    """Every difference."""
    return Interval(a.low - b.high, a.high - b.low, gcd(a.stride, b.stride))


def multiply(a: Interval, b: Interval) -> Interval:
    """Every product; the stride is what divides all differences of products."""
    corners = (a.low * b.low, a.low * b.high, a.high * b.low, a.high * b.high)
    low, high = min(corners), max(corners)
    step = gcd(a.stride * b.stride, a.stride * b.low, b.stride * a.low)
    return Interval(low, high, step if high > low else 0)


def quotient(a: int, b: int) -> int:
    """``a / b``, truncated toward zero (6.5.5p6)."""
    return abs(a) // abs(b) if (a < 0) == (b < 0) else -(abs(a) // abs(b))


def remainder(a: int, b: int) -> int:
    """``a % b``, with the sign of ``a`` (6.5.5p6)."""
    return abs(a) % abs(b) if a >= 0 else -(abs(a) % abs(b))


def divide(a: Interval, b: Interval) -> Interval | None:
    """Every quotient with a divisor that is not zero; None if there is none."""
    parts = [part for part in (within(b, b.low, -1), within(b, 1, b.high)) if part is not None]
    if not parts:
        return None
    few = _pairwise(quotient, a, b, skip_zero=True)
    if few is not None:
        return few
    if b.stride == 0 and a.low % b.low == 0 and a.stride % b.low == 0:
        return _between(quotient(a.low, b.low), quotient(a.high, b.low), abs(a.stride // b.low))
    corners = [quotient(x, y) for part in parts for x in (a.low, a.high) for y in (part.low, part.high)]
    if contains(a, 0) or a.low < 0 < a.high:
        corners.append(0)
    return _between(min(corners), max(corners), 1)


def modulo(a: Interval, b: Interval) -> Interval | None:
    """Every remainder with a divisor that is not zero; None if there is none."""
    few = _pairwise(remainder, a, b, skip_zero=True)
    if few is not None:
        return few
    if b.low == b.high == 0:
        return None
    above = within(a, 0, a.high)
    below = within(a, a.low, -1)
    result = _remainder_above(above, b) if above is not None else None
    if below is not None:
        result = join(result, negate(_remainder_above(negate(below), b)))
    return result


def _remainder_above(a: Interval, b: Interval) -> Interval:
    """Remainders of dividends that are not negative."""
    largest = max(abs(b.low), abs(b.high))
    smallest = min(abs(b.low), abs(b.high)) if b.low > 0 or b.high < 0 else 1
    if a.high < smallest:
        return a
    if b.stride == 0:
        if a.low // largest == a.high // largest:
            return Interval(a.low % largest, a.high % largest, a.stride)
        step = gcd(a.stride, largest)
        first = a.low % step
        return _between(first, min(largest - 1, a.high), step)
    return _between(0, min(largest - 1, a.high), 1)


def _between(x: int, y: int, step: int) -> Interval:
    """The interval between two ends in either order; ``step`` divides from the lower one."""
    low, high = min(x, y), max(x, y)
    return interval(low, high, step or 1) or constant(low)


def _pairwise(
    operation: Callable[[int, int], int], a: Interval, b: Interval, *, skip_zero: bool = False
) -> Interval | None:
    """The hull of all results if the pairs are few, else None (also where every divisor is zero)."""
    if size(a) * size(b) > FEW:
        return None
    return hull(operation(x, y) for x in members(a) for y in members(b) if y or not skip_zero)


def shift_left(a: Interval, b: Interval, width: int) -> Interval | None:
    """Every ``a * 2**b`` for shifts from 0 to ``width - 1``; other shifts are undefined (6.5.7p3)."""
    shifts = within(b, 0, width - 1)
    if shifts is None:
        return None
    result: Interval | None = None
    for by in members(shifts):
        result = join(result, Interval(a.low << by, a.high << by, a.stride << by))
    return result


def shift_right(a: Interval, b: Interval, width: int) -> Interval | None:
    """Every ``a >> b`` for shifts from 0 to ``width - 1``; negative values keep their sign (common practice)."""
    shifts = within(b, 0, width - 1)
    if shifts is None:
        return None
    result: Interval | None = None
    for by in members(shifts):
        low, high = a.low >> by, a.high >> by
        exact = a.stride % (1 << by) == 0
        result = join(result, _between(low, high, a.stride >> by if exact else 1))
    return result


# ---------------------------------------------------------------------------------------------------------- bits


def bit_and(a: Interval, b: Interval, width: int) -> Interval:
    """Every ``a & b``."""
    few = _pairwise(int.__and__, a, b)
    if few is not None:
        return few
    if a.stride == 0:
        a, b = b, a
    if b.stride == 0:
        masked = _and_mask(a, b.low, width)
        if masked is not None:
            return masked
    known = _known_bits("&", a, b, width)
    if a.low >= 0 or b.low >= 0:
        tops = [x.high for x in (a, b) if x.low >= 0]
        return within(known, 0, min(tops)) or known
    return known


def _and_mask(a: Interval, mask: int, width: int) -> Interval | None:
    """``a & mask`` for a mask that is a run of low ones, or of high ones; None for others."""
    if mask >= 0 and mask & (mask + 1) == 0:
        modulus = mask + 1
        if a.high - a.low < modulus and a.low // modulus == a.high // modulus:
            return Interval(a.low % modulus, a.high % modulus, a.stride)
        step = gcd(a.stride, modulus)
        return interval(a.low % step, mask, step)
    low_zeros = (mask & -mask).bit_length() - 1
    unit = 1 << low_zeros
    full = mask == -unit or (mask == (1 << width) - unit and a.low >= 0 and a.high < 1 << width)
    if not full:
        return None
    step = a.stride if a.stride % unit == 0 else unit
    return _between(a.low - a.low % unit, a.high - a.high % unit, step)


def bit_or(a: Interval, b: Interval, width: int) -> Interval:
    """Every ``a | b``."""
    few = _pairwise(int.__or__, a, b)
    if few is not None:
        return few
    if _disjoint(a, b):
        return add(a, b)
    known = _known_bits("|", a, b, width)
    if a.low >= 0 and b.low >= 0:
        return within(known, max(a.low, b.low), known.high) or known
    return known


def bit_xor(a: Interval, b: Interval, width: int) -> Interval:
    """Every ``a ^ b``."""
    few = _pairwise(int.__xor__, a, b)
    if few is not None:
        return few
    if _disjoint(a, b):
        return add(a, b)
    return _known_bits("^", a, b, width)


def complement(a: Interval) -> Interval:
    """Every ``~a`` in unbounded two's complement."""
    return Interval(-1 - a.high, -1 - a.low, a.stride)


def _low_known(a: Interval) -> int:
    """How many of the lowest bits are the same in all members."""
    return (a.stride & -a.stride).bit_length() - 1 if a.stride else 1 << 20


def _disjoint(a: Interval, b: Interval) -> bool:
    """Whether no bit can be set in a member of each, so that ``|`` and ``^`` are sums."""
    if a.low < 0 or b.low < 0:
        return False
    return _possible(a) & _possible(b) == 0


def _possible(a: Interval) -> int:
    """The bits that may be set in a member (none negative)."""
    ones, unknown = _bits(a, max(a.high.bit_length(), 1))
    return ones | unknown


def _bits(a: Interval, width: int) -> tuple[int, int]:
    """(bits that are one in all members, bits that differ), in two's complement of ``width`` bits."""
    modulus = 1 << width
    if a.low < 0 <= a.high:
        changing = modulus - 1
    else:
        changing = (1 << ((a.low ^ a.high) & (modulus - 1)).bit_length()) - 1
    steady = _low_known(a)
    unknown = changing if steady >= width + 1 and a.stride else changing >> steady << steady
    if a.stride == 0:
        unknown = 0
    return (a.low % modulus) & ~unknown, unknown


def _known_bits(operator: str, a: Interval, b: Interval, width: int) -> Interval:
    """The interval of what is known bit by bit of the result; operands must fit in ``width`` bits (signed or not)."""
    signed = a.low < 0 or b.low < 0
    bits = width + 1 if signed and max(a.high, b.high) >= 1 << (width - 1) else width
    (ones_a, unknown_a), (ones_b, unknown_b) = _bits(a, bits), _bits(b, bits)
    if operator == "&":
        ones = ones_a & ones_b
        unknown = (ones_a | unknown_a) & (ones_b | unknown_b) & ~ones
    elif operator == "|":
        ones = ones_a | ones_b
        unknown = (unknown_a | unknown_b) & ~ones
    else:
        unknown = unknown_a | unknown_b
        ones = (ones_a ^ ones_b) & ~unknown
    step = unknown & -unknown
    sign = 1 << (bits - 1)
    if not signed:
        low, high = ones, ones | unknown
    elif unknown & sign:
        low, high = (ones | sign) - (sign << 1), ones | (unknown & ~sign)
        step = step if step != sign else high - low
    else:
        offset = (sign << 1) if ones & sign else 0
        low, high = ones - offset, (ones | unknown) - offset
    return interval(low, high, step or 1) or constant(low)


# ---------------------------------------------------------------------------------------------------------- C
# operators


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
