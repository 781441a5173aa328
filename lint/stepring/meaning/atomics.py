"""Atomic operations as the loads and stores that they are.

The one idea: what an atomic operation (N1570 7.17.7) does to the values is what the plain access does; that nothing
comes between its load and its store is a fact about other threads and interrupts, for which the object's qualifier
stands. Compilers spell the operations as built-in functions of the address, some with the value behind a second
address.
"""

from collections.abc import Callable
from typing import Any

from stepring.meaning.builder import Work, emit, int_type, saved
from stepring.meaning.expressions import binary
from stepring.meaning.lowering import converted, effect, has_effects, value
from stepring.meaning.types import (
    AddressOf,
    Assign,
    Cast,
    DerefPlace,
    Expr,
    Load,
    PlaceExpr,
    PointerType,
    Unknown,
    VoidType,
)
from stepring.places import Position

Handler = Callable[[Work, list[Any], Position], Expr]
_OPERATORS = {"add": "+", "sub": "-", "and": "&", "or": "|", "xor": "^"}


def _target(pointer: Expr, at: Position) -> PlaceExpr | None:
    """The object that an address leads to."""
    while isinstance(pointer, Cast) and pointer.type == pointer.operand.type:
        pointer = pointer.operand
    if isinstance(pointer, AddressOf):
        return pointer.place
    if isinstance(pointer.type, PointerType) and not isinstance(pointer.type.to, VoidType):
        return DerefPlace(pointer, pointer.type.to, at)
    return None


def _operands(work: Work, arguments: list[Any], count: int) -> list[Expr]:
    """The first operands' values, each safe from what the later ones do; the memory orders are only evaluated."""
    found = []
    for number, argument in enumerate(arguments[:count]):
        operand = value(work, argument)
        changed = any(has_effects(work, later) for later in arguments[number + 1 :])
        found.append(saved(work, operand) if changed else operand)
    for order in arguments[count:]:
        effect(work, order)
    return found


def _load(work: Work, arguments: list[Any], at: Position) -> Expr:
    (pointer,) = _operands(work, arguments, 1)
    place = _target(pointer, at)
    if place is None:
        return Unknown(int_type(work), "an atomic load of an unknown object")
    return saved(work, Load(place, place.type, at), at)


def _load_into(work: Work, arguments: list[Any], at: Position) -> Expr:
    pointer, result = _operands(work, arguments, 2)
    place, kept = _target(pointer, at), _target(result, at)
    if place is not None and kept is not None:
        emit(work, Assign(kept, converted(work, Load(place, place.type, at), kept.type), at))
    return Unknown(VoidType(), "void")


def _store(work: Work, arguments: list[Any], at: Position) -> Expr:
    pointer, new = _operands(work, arguments, 2)
    place = _target(pointer, at)
    if place is not None:
        emit(work, Assign(place, converted(work, new, place.type), at))
    return Unknown(VoidType(), "void")


def _store_from(work: Work, arguments: list[Any], at: Position) -> Expr:
    pointer, source = _operands(work, arguments, 2)
    place, kept = _target(pointer, at), _target(source, at)
    if place is not None and kept is not None:
        emit(work, Assign(place, converted(work, Load(kept, kept.type, at), place.type), at))
    return Unknown(VoidType(), "void")


def _exchange(work: Work, arguments: list[Any], at: Position) -> Expr:
    pointer, new = _operands(work, arguments, 2)
    place = _target(pointer, at)
    if place is None:
        return Unknown(int_type(work), "an atomic exchange of an unknown object")
    old = saved(work, Load(place, place.type, at), at)
    emit(work, Assign(place, converted(work, new, place.type), at))
    return old


def _modify(operator: str, new_wanted: bool) -> Handler:
    def handler(work: Work, arguments: list[Any], at: Position) -> Expr:
        pointer, by = _operands(work, arguments, 2)
        place = _target(pointer, at)
        if place is None:
            return Unknown(int_type(work), "an atomic operation on an unknown object")
        old = saved(work, Load(place, place.type, at), at)
        new = saved(work, converted(work, binary(work, operator, old, by, at), place.type), at)
        emit(work, Assign(place, new, at))
        return new if new_wanted else old

    return handler


ATOMICS: dict[str, tuple[int, Handler]] = {
    "__atomic_load_n": (1, _load),
    "__c11_atomic_load": (1, _load),
    "__atomic_load": (2, _load_into),
    "__atomic_store_n": (2, _store),
    "__c11_atomic_store": (2, _store),
    "__c11_atomic_init": (2, _store),
    "__atomic_store": (2, _store_from),
    "__atomic_exchange_n": (2, _exchange),
    "__c11_atomic_exchange": (2, _exchange),
    **{f"__atomic_fetch_{name}": (2, _modify(operator, False)) for name, operator in _OPERATORS.items()},
    **{f"__c11_atomic_fetch_{name}": (2, _modify(operator, False)) for name, operator in _OPERATORS.items()},
    **{f"__atomic_{name}_fetch": (2, _modify(operator, True)) for name, operator in _OPERATORS.items()},
}
"""The built-in functions by name: how many operands come before the memory orders, and what they are lowered to."""
