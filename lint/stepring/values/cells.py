"""The cell of a place: the name under which the whole program speaks of what the place holds."""

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Cast,
    CType,
    ElementPlace,
    IntType,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    PointerType,
    StructType,
    VariablePlace,
)
from stepring.values.types import Cell, FieldCell, VariableCell


def same_object(a: CType, b: CType) -> bool:
    """Whether an object of one type can be taken for one of the other: equal, or of one kind and width."""
    if isinstance(a, IntType) and isinstance(b, IntType):
        return a.width == b.width
    if isinstance(a, StructType) and isinstance(b, StructType):
        return a.identity == b.identity
    if isinstance(a, PointerType) and isinstance(b, PointerType):
        return a.width == b.width
    return a == b


def cell_of(place: PlaceExpr) -> Cell | None:
    """The cell of a place, known without its function: None for what a pointer to a scalar points to and for unions.

    ``x.state`` is ``VariableCell("x", (".state",))``, ``x[i].state`` has ``("[]", ".state")``; ``p->a.b`` is
    ``FieldCell(S, ("a", "b"))`` with the structure that ``p`` points to.
    """
    if isinstance(place, VariablePlace):
        return VariableCell(place.variable.identity)
    if isinstance(place, MemberPlace):
        if isinstance(place.base.type, StructType) and place.base.type.union:
            return None
        base = cell_of(place.base)
        if isinstance(base, VariableCell):
            return VariableCell(base.variable, (*base.path, "." + place.name))
        return FieldCell(base.struct, (*base.path, place.name)) if base is not None else None
    if isinstance(place, ElementPlace):
        base = cell_of(place.base)
        if isinstance(base, VariableCell):
            return VariableCell(base.variable, (*base.path, "[]"))
        return FieldCell(base.struct, (*base.path, "[]")) if base is not None else None
    pointer = place.pointer
    while isinstance(pointer, (Cast, PointerStep)):
        pointer = pointer.operand if isinstance(pointer, Cast) else pointer.pointer
    if isinstance(pointer, AddressOf):
        if same_object(pointer.place.type, place.type):
            return cell_of(pointer.place)
        if isinstance(pointer.place.type, ArrayType) and same_object(pointer.place.type.element, place.type):
            base = cell_of(pointer.place)
            if isinstance(base, VariableCell):
                return VariableCell(base.variable, (*base.path, "[]"))
            return FieldCell(base.struct, (*base.path, "[]")) if base is not None else None
    return FieldCell(place.type.identity, ()) if isinstance(place.type, StructType) else None
