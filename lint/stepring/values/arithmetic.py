"""Sums, products, quotients, remainders and shifts of strided intervals, in unbounded integers."""

from math import gcd

from stepring.values.sets import between, contains, join, members, pairwise, within
from stepring.values.types import Interval


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
    few = pairwise(quotient, a, b, skip_zero=True)
    if few is not None:
        return few
    if b.stride == 0 and a.low % b.low == 0 and a.stride % b.low == 0:
        return between(quotient(a.low, b.low), quotient(a.high, b.low), abs(a.stride // b.low))
    corners = [quotient(x, y) for part in parts for x in (a.low, a.high) for y in (part.low, part.high)]
    if contains(a, 0) or a.low < 0 < a.high:
        corners.append(0)
    return between(min(corners), max(corners), 1)


def modulo(a: Interval, b: Interval) -> Interval | None:
    """Every remainder with a divisor that is not zero; None if there is none."""
    few = pairwise(remainder, a, b, skip_zero=True)
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
        return between(first, min(largest - 1, a.high), step)
    return between(0, min(largest - 1, a.high), 1)


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
        result = join(result, between(low, high, a.stride >> by if exact else 1))
    return result
