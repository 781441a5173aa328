"""What an expression can be, given what the places that it loads can hold.

Evaluation needs nothing but a way to read a place, so the same function serves a map of cells (``evaluate``), the
engine's own states and the walk. Addresses are integers of the pointer's width of which only one thing is known:
that of an object or function is not zero. Real numbers, and types that were never declared, are ``UNBOUNDED``.
"""

from collections.abc import Callable, Mapping
from typing import Final, Protocol, TypeAlias, runtime_checkable

from stepring.meaning.types import (
    AddressOf,
    Binary,
    Cast,
    Const,
    CType,
    Expr,
    FunctionName,
    IntType,
    Load,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    TextConst,
    Unary,
)
from stepring.values import intervals as iv
from stepring.values.cells import cell_of
from stepring.values.intervals import UNBOUNDED, constant, contains, convert, number_type, whole
from stepring.values.types import Cell, Interval

Read: TypeAlias = Callable[[PlaceExpr], Interval]


@runtime_checkable
class Environment(Protocol):
    """What can be asked for the value that a place holds."""

    def read(self, place: PlaceExpr) -> Interval:
        """The values that the place may hold."""


def evaluate(expression: Expr, environment: Mapping[Cell, Interval] | Environment) -> Interval | None:
    """What the expression can be; cells that the environment does not name can hold all values of their type.

    ``None`` is given only for an environment in which some loaded place has no value at all, which none of this
    package's is.
    """
    if isinstance(environment, Environment):
        return compute(expression, environment.read)

    def read(place: PlaceExpr) -> Interval:
        cell = cell_of(place)
        known = environment.get(cell) if cell is not None else None
        if known is None:
            return whole(place.type)
        kind = number_type(place.type)
        return known if kind is not None and iv.fits(known, kind) else whole(place.type)

    return compute(expression, read)


def may_overflow(expression: Expr, read: Read) -> bool:
    """Whether the outermost operation can have an exact result that is no value of its type."""
    if isinstance(expression, Unary) and expression.op == "-":
        kind = number_type(expression.type)
        return kind is not None and not iv.fits(iv.negate(compute(expression.operand, read)), kind)
    if not isinstance(expression, Binary):
        return False
    kind = number_type(expression.type)
    if kind is None:
        return False
    return iv.may_overflow(expression.op, compute(expression.left, read), compute(expression.right, read), kind)


def compute(expression: Expr, read: Read) -> Interval:
    """What the expression can be, given what each loaded place can hold."""
    handler = _HANDLERS.get(type(expression))
    return handler(expression, read) if handler is not None else whole(expression.type)


def address(kind: CType) -> Interval:
    """The values of a pointer that is not null."""
    number = number_type(kind)
    return Interval(1, number.high, 1) if number is not None else UNBOUNDED


def _const(expression: Const, read: Read) -> Interval:
    return constant(expression.value) if number_type(expression.type) is not None else UNBOUNDED


def _load(expression: Load, read: Read) -> Interval:
    return read(expression.place)


def _address(expression: AddressOf | FunctionName | TextConst, read: Read) -> Interval:
    return address(expression.type)


def _unary(expression: Unary, read: Read) -> Interval:
    operand = compute(expression.operand, read)
    kind = number_type(expression.type)
    if kind is None:
        return UNBOUNDED
    if operand is UNBOUNDED:
        return iv.TRUTH if expression.op == "!" else whole(kind)
    return iv.unary(expression.op, operand, kind) or whole(kind)


def _binary(expression: Binary, read: Read) -> Interval:
    left = compute(expression.left, read)
    right = compute(expression.right, read)
    kind = number_type(expression.type)
    if kind is None:
        return UNBOUNDED
    if left is UNBOUNDED or right is UNBOUNDED:
        return iv.TRUTH if expression.op in iv.COMPARISONS else whole(kind)
    return iv.binary(expression.op, left, right, kind) or whole(kind)


def _cast(expression: Cast, read: Read) -> Interval:
    operand = compute(expression.operand, read)
    if operand is UNBOUNDED:
        kind = expression.type
        return iv.TRUTH if isinstance(kind, IntType) and kind.name == "_Bool" else whole(kind)
    return convert(operand, expression.type) or whole(expression.type)


def _step(expression: PointerStep, read: Read) -> Interval:
    pointer = compute(expression.pointer, read)
    if contains(pointer, 0) and compute(expression.steps, read) == iv.FALSE:
        return pointer
    return whole(expression.type) if contains(pointer, 0) else address(expression.type)


def _distance(expression: PointerDistance, read: Read) -> Interval:
    return whole(expression.type)


_HANDLERS: Final[dict[type, Callable[..., Interval]]] = {
    Const: _const,
    Load: _load,
    AddressOf: _address,
    FunctionName: _address,
    TextConst: _address,
    Unary: _unary,
    Binary: _binary,
    Cast: _cast,
    PointerStep: _step,
    PointerDistance: _distance,
}
