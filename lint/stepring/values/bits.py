"""Bitwise operators on strided intervals: exact for masks that are runs of ones, else what is known bit by bit."""

from math import gcd

from stepring.values.arithmetic import add
from stepring.values.sets import between, constant, interval, pairwise, within
from stepring.values.types import Interval


def bit_and(a: Interval, b: Interval, width: int) -> Interval:
    """Every ``a & b``."""
    few = pairwise(int.__and__, a, b)
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
    return between(a.low - a.low % unit, a.high - a.high % unit, step)


def bit_or(a: Interval, b: Interval, width: int) -> Interval:
    """Every ``a | b``."""
    few = pairwise(int.__or__, a, b)
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
    few = pairwise(int.__xor__, a, b)
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
