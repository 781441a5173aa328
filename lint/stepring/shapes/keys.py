"""Which variable a place is: the identity under which a program's facts about a state or an index are gathered.

A file's static and a global go by their own identity, a structure's member by the structure and its name whatever
object is meant (half of all firmware states are reached through a pointer), an array's elements by the array. Within
one function two objects of a structure are told apart by the way that leads to them (``instance``).
"""

from dataclasses import dataclass
from typing import Literal

from stepring.meaning.types import (
    AddressOf,
    Cast,
    DerefPlace,
    ElementPlace,
    Expr,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    UnknownType,
    Variable,
    VariablePlace,
)


@dataclass(frozen=True, slots=True)
class PlaceKey:
    """A place's key, the way to the object in this function, and how it lasts."""

    key: str
    instance: str
    shown: str
    kind: Literal["variable", "member"]
    scope: Literal["lasting", "local", "parameter"]
    root: Variable | None


def place_key(place: PlaceExpr, function: str) -> PlaceKey | None:
    """The key of a place, or None where no stable object is named (``*p`` and what hangs on it)."""
    match place:
        case VariablePlace(variable=variable):
            return _variable_key(variable, function)
        case MemberPlace(struct=struct, name=name):
            outer = instance_text(place)
            root = root_variable(place)
            return PlaceKey(f"{struct}.{name}", outer, f"{struct.split('@', 1)[0]}.{name}", "member", "lasting", root)
        case ElementPlace(base=base):
            inner = place_key(base, function)
            if inner is None:
                return None
            return PlaceKey(
                f"{inner.key}[]", instance_text(place), f"{inner.shown}[]", inner.kind, inner.scope, inner.root
            )
    return None


def _variable_key(variable: Variable, function: str) -> PlaceKey:
    if variable.lasting:
        return PlaceKey(variable.identity, variable.identity, variable.name, "variable", "lasting", variable)
    # Functions of several programs in one tree can have one name.
    file = variable.position.file if variable.position is not None else ""
    key = f"{file}:{function}:{variable.identity}"
    scope: Literal["local", "parameter"] = "parameter" if variable.storage == "parameter" else "local"
    return PlaceKey(key, variable.identity, variable.name, "variable", scope, variable)


def instance_text(place: PlaceExpr) -> str:
    """The way to an object, the same text for the same way within one function."""
    match place:
        case VariablePlace(variable=variable):
            return variable.identity
        case MemberPlace(base=base, name=name):
            return f"{instance_text(base)}.{name}"
        case ElementPlace(base=base, index=index):
            return f"{instance_text(base)}[{_expr_text(index)}]"
        case DerefPlace(pointer=pointer):
            return f"*{_expr_text(pointer)}"


def _expr_text(expr: Expr) -> str:
    expr = uncast(expr)
    match expr:
        case Load(place=place):
            return instance_text(place)
        case AddressOf(place=place):
            return f"&{instance_text(place)}"
        case PointerStep(pointer=pointer, steps=steps):
            return f"({_expr_text(pointer)}+{_expr_text(steps)})"
    return str(getattr(expr, "value", expr))


def root_variable(place: PlaceExpr) -> Variable | None:
    """The variable that a place is part of or reached through."""
    while True:
        match place:
            case VariablePlace(variable=variable):
                return variable
            case MemberPlace(base=base) | ElementPlace(base=base):
                place = base
            case DerefPlace(pointer=pointer):
                inner = uncast(pointer)
                while isinstance(inner, PointerStep):
                    inner = uncast(inner.pointer)
                if isinstance(inner, Load | AddressOf):
                    place = inner.place
                else:
                    return None


def uncast(expr: Expr) -> Expr:
    """The expression without the conversions around it."""
    while isinstance(expr, Cast):
        expr = expr.operand
    return expr


def is_integral(place: PlaceExpr) -> bool:
    """Whether a place can hold a state: an integer, or of a type whose header is missing."""
    return isinstance(place.type, IntType | UnknownType)
