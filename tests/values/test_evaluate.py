"""Evaluating expressions in a plain map of cells."""

from stepring.meaning.types import FloatConst, FloatType, IntType, UnknownType
from stepring.values.evaluate import evaluate, may_overflow
from stepring.values.intervals import UNBOUNDED, constant, whole
from stepring.values.types import FieldCell, Interval, VariableCell

from .build import BOOL, I8, INT, U8, U16, address, arrow, at, cast, load, negation, num, op, parameter, pointer, static

HEAD, COUNT = static("head", U8), static("count", U16)
HEAD_CELL = VariableCell(HEAD.identity)


def test_missing_cells_hold_all_values_of_their_type() -> None:
    assert evaluate(load(HEAD), {}) == Interval(0, 255, 1)
    assert evaluate(op("+", load(HEAD), load(COUNT)), {HEAD_CELL: constant(3)}) == Interval(3, 65538, 1)


def test_a_range_that_the_type_cannot_hold_is_not_believed() -> None:
    assert evaluate(load(HEAD), {HEAD_CELL: Interval(0, 300, 1)}) == Interval(0, 255, 1)


def test_members_behind_pointers_are_field_cells() -> None:
    from .build import STRUCT

    q = parameter("q", pointer(STRUCT))
    place = arrow(load(q), "head", U8)
    assert evaluate(op("%", load(place), 6), {FieldCell("struct hopper", ("head",)): Interval(0, 3, 1)}) == Interval(
        0, 3, 1
    )


def test_addresses_are_not_null_and_reals_are_unknown() -> None:
    assert evaluate(negation(cast(BOOL, address(HEAD))), {}) == constant(0)
    real = FloatConst(1.5, FloatType("double", 64))
    assert evaluate(real, {}) is UNBOUNDED
    assert evaluate(cast(U8, real), {}) == whole(U8)
    assert evaluate(cast(BOOL, real), {}) == Interval(0, 1, 1)


def test_a_value_of_an_undeclared_type_is_unknown_until_it_is_converted() -> None:
    thing = static("thing", UnknownType("feed_rate_t"))
    assert evaluate(load(thing), {}) is UNBOUNDED
    assert evaluate(cast(I8, load(thing)), {}) == whole(I8)


def test_overflow_is_told_of_the_outermost_operation() -> None:
    wide = IntType("int", 16, True, 3)
    read = lambda place: constant(30000) if place == at(COUNT) else whole(place.type)  # noqa: E731
    total = op("+", load(COUNT), 1)
    assert not may_overflow(total, read)
    from stepring.meaning.types import Binary

    assert may_overflow(Binary("*", cast(wide, load(COUNT)), num(2, wide), wide), read)
    assert not may_overflow(Binary("+", cast(wide, load(COUNT)), num(2767, wide), wide), read)
    assert evaluate(Binary("*", cast(wide, load(COUNT)), num(2, wide), wide), {}) == whole(wide)
    assert may_overflow(op("+", load(static("level", INT)), 1), lambda place: whole(place.type))
