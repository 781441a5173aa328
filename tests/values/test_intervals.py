"""Each operation on intervals against every concrete pair of small types."""

from math import gcd

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stepring.meaning.types import IntType
from stepring.values import intervals as iv
from stepring.values.types import Interval

U4 = IntType("unsigned four", 4, False, 1)
S4 = IntType("signed four", 4, True, 1)
U6 = IntType("unsigned six", 6, False, 2)
S6 = IntType("signed six", 6, True, 2)
BOOL = IntType("_Bool", 8, False, 0)
TYPES = (U4, S4, U6, S6)
ARITHMETIC = ("+", "-", "*", "/", "%", "<<", ">>", "&", "|", "^")


@st.composite
def intervals_in(draw: st.DrawFn, low: int, high: int) -> Interval:
    """A strided interval of a range."""
    start = draw(st.integers(low, high))
    step = draw(st.integers(1, 9))
    count = draw(st.integers(0, (high - start) // step))
    made = iv.interval(start, start + step * count, step)
    assert made is not None
    return made


def concrete(operator: str, x: int, y: int, width: int) -> int | None:
    """The result in unbounded integers, None if C leaves it undefined."""
    if operator in "/%" and y == 0:
        return None
    if operator in ("<<", ">>"):
        if not 0 <= y < width:
            return None
        return x << y if operator == "<<" else x >> y
    simple = {
        "+": lambda: x + y, "-": lambda: x - y, "*": lambda: x * y, "&": lambda: x & y, "|": lambda: x | y,
        "^": lambda: x ^ y, "/": lambda: int(abs(x) // abs(y)) * (1 if (x < 0) == (y < 0) else -1),
        "%": lambda: abs(x) % abs(y) * (1 if x >= 0 else -1),
    }  # fmt: skip
    return simple[operator]()


def wrapped(value: int, kind: IntType) -> int:
    modulus = 1 << kind.width
    value %= modulus
    return value - modulus if kind.signed and value >= modulus // 2 else value


@pytest.mark.parametrize("operator", ARITHMETIC)
@pytest.mark.parametrize("kind", TYPES, ids=lambda kind: kind.name)
@given(data=st.data())
@settings(max_examples=150, deadline=None)
def test_every_pair_lies_in_the_result(operator: str, kind: IntType, data: st.DataObject) -> None:
    a = data.draw(intervals_in(kind.low, kind.high))
    b = data.draw(intervals_in(kind.low, kind.high))
    result = iv.binary(operator, a, b, kind)
    exact = iv.exact_binary(operator, a, b, kind.width)
    assert result is not None
    assert iv.fits(result, kind)
    overflows = False
    for x in iv.members(a):
        for y in iv.members(b):
            value = concrete(operator, x, y, kind.width)
            if value is None:
                continue
            assert iv.contains(exact, value), (operator, a, b, x, y, value, exact)
            assert iv.contains(result, wrapped(value, kind)), (operator, a, b, x, y, value, result)
            overflows |= not kind.low <= value <= kind.high
    if overflows:
        assert iv.may_overflow(operator, a, b, kind)


@pytest.mark.parametrize("operator", ARITHMETIC)
@pytest.mark.parametrize("kind", TYPES, ids=lambda kind: kind.name)
def test_single_values_are_exact(operator: str, kind: IntType) -> None:
    for x in range(kind.low, kind.high + 1, 3):
        for y in range(kind.low, kind.high + 1):
            value = concrete(operator, x, y, kind.width)
            if value is None or (kind.signed and operator != "<<" and not kind.low <= value <= kind.high):
                continue
            assert iv.binary(operator, iv.constant(x), iv.constant(y), kind) == iv.constant(wrapped(value, kind))


@given(a=intervals_in(-100, 100), b=intervals_in(-100, 100))
def test_meet_is_exact_and_join_holds_both(a: Interval, b: Interval) -> None:
    common = set(iv.members(a)) & set(iv.members(b))
    assert iv.meet(a, b) == iv.hull(common)
    met = iv.meet(a, b)
    assert set(() if met is None else iv.members(met)) == common
    assert iv.join(a, b) == iv.hull([*iv.members(a), *iv.members(b)])
    assert iv.is_subset(a, b) == (set(iv.members(a)) <= set(iv.members(b)))


@given(a=intervals_in(-60, 60), low=st.integers(-70, 70), high=st.integers(-70, 70))
def test_within_and_without(a: Interval, low: int, high: int) -> None:
    assert iv.within(a, low, high) == iv.hull(x for x in iv.members(a) if low <= x <= high)
    rest = iv.without(a, low)
    assert {x for x in iv.members(a) if x != low} <= set(() if rest is None else iv.members(rest))
    assert iv.without(a, a.low) == iv.hull(x for x in iv.members(a) if x != a.low)
    assert iv.without(a, a.high) == iv.hull(x for x in iv.members(a) if x != a.high)


@pytest.mark.parametrize("kind", (*TYPES, BOOL), ids=lambda kind: kind.name)
@given(a=intervals_in(-200, 200))
def test_conversion_holds_every_value_and_is_exact_where_a_sequence_results(kind: IntType, a: Interval) -> None:
    result = iv.convert(a, kind)
    assert result is not None
    values = [int(x != 0) if kind is BOOL else wrapped(x, kind) for x in iv.members(a)]
    assert all(iv.contains(result, value) for value in values)
    if len(set(values)) == 1:
        assert iv.size(result) == 1
    if values == sorted(values) and kind is not BOOL:
        assert result == iv.hull(values)


@pytest.mark.parametrize("kind", (U6, S6), ids=lambda kind: kind.name)
@pytest.mark.parametrize("mask", range(64))
def test_masks_of_contiguous_sets(kind: IntType, mask: int) -> None:
    mask = wrapped(mask, kind)
    for low in range(kind.low, kind.high + 1, 5):
        for high in range(low, kind.high + 1, 3):
            result = iv.bit_and(Interval(low, high, 1 if high > low else 0), iv.constant(mask), kind.width)
            exact = iv.hull(x & mask for x in range(low, high + 1))
            assert exact is not None
            assert iv.is_subset(exact, result)
            low_run = mask >= 0 and mask & (mask + 1) == 0
            whole_turn = high - low >= mask
            if low_run and (whole_turn or low // (mask + 1) == high // (mask + 1)):
                assert result == exact
            if mask < 0 and -mask & (-mask - 1) == 0:
                assert result == exact


@given(a=intervals_in(0, 200), c=st.integers(1, 40))
def test_remainder_by_a_constant(a: Interval, c: int) -> None:
    result = iv.modulo(a, iv.constant(c))
    if a.high < c:
        assert result == a
    if a.stride == 1 and a.high - a.low >= c:
        assert result == Interval(0, c - 1, 1 if c > 1 else 0)
    if a.stride and iv.size(a) * gcd(a.stride, c) >= c:
        assert result == iv.hull(x % c for x in iv.members(a)) or iv.size(a) < c


@given(a=intervals_in(-40, 40), by=st.integers(0, 5), c=st.integers(-9, 9).filter(bool))
def test_linear_operations_are_exact(a: Interval, by: int, c: int) -> None:
    assert iv.multiply(a, iv.constant(c)) == iv.hull(x * c for x in iv.members(a))
    assert iv.shift_left(a, iv.constant(by), 8) == iv.hull(x << by for x in iv.members(a))
    multiples = iv.multiply(a, iv.constant(c))
    assert iv.divide(multiples, iv.constant(c)) == a
    assert iv.shift_right(iv.shift_left(a, iv.constant(by), 12) or a, iv.constant(by), 12) == a
    if a.stride <= 1:
        assert iv.shift_right(a, iv.constant(by), 8) == iv.hull(x >> by for x in iv.members(a))
        assert iv.divide(a, iv.constant(c)) == iv.hull(concrete("/", x, c, 8) or 0 for x in iv.members(a))
    assert iv.complement(a) == iv.hull(~x for x in iv.members(a))


@pytest.mark.parametrize("operator", ("<", "<=", ">", ">=", "==", "!="))
@given(a=intervals_in(-30, 30), b=intervals_in(-30, 30))
def test_comparisons_are_decided_exactly_when_all_pairs_agree(operator: str, a: Interval, b: Interval) -> None:
    tests = {
        "<": int.__lt__, "<=": int.__le__, ">": int.__gt__, ">=": int.__ge__, "==": int.__eq__, "!=": int.__ne__
    }  # fmt: skip
    values = {int(tests[operator](x, y)) for x in iv.members(a) for y in iv.members(b)}
    assert iv.compare(operator, a, b) == iv.hull(values)


@given(chain=st.lists(intervals_in(-500, 500), min_size=2, max_size=60))
def test_widening_ends_and_holds_all(chain: list[Interval]) -> None:
    thresholds = [-128, -1, 0, 7, 8, 127]
    current: Interval | None = chain[0]
    changes = 0
    for step in chain[1:]:
        wider = iv.widen(current, step, thresholds)
        assert iv.is_subset(current, wider)
        assert iv.is_subset(step, wider)
        changes += wider != current
        current = wider
    assert changes <= 2 * (len(thresholds) + 1) + 8


def test_a_mask_keeps_the_stride_and_a_byte_wraps() -> None:
    assert iv.bit_and(Interval(0, 252, 4), iv.constant(0x3F), 32) == Interval(0, 60, 4)
    byte = IntType("unsigned char", 8, False, 1)
    assert iv.convert(Interval(1, 256, 1), byte) == Interval(0, 255, 1)
    assert iv.convert(Interval(256, 263, 1), byte) == Interval(0, 7, 1)
    assert iv.convert(Interval(-1, -1, 0), byte) == iv.constant(255)
