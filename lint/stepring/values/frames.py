"""How the places of one activation of a function become spots.

A pointer that is set once, to an address that stays the same (``struct ring *r = &rx;``), is replaced by what it
points to; so is a pointer parameter of a callee that is run inside its caller.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Cast,
    Const,
    CType,
    ElementPlace,
    Expr,
    Function,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    PointerType,
    StructType,
    Variable,
    VariablePlace,
)
from stepring.values.addresses import facts_of
from stepring.values.cells import same_object
from stepring.values.intervals import number_type
from stepring.values.spots import Access, Places, Spot
from stepring.values.types import Cell, FieldCell, VariableCell

LOCAL_STORAGE: Final = ("automatic", "parameter", "temporary")


@dataclass(frozen=True, slots=True)
class Binding:
    """What a pointer that never changes points to: an expression, and the frame that it belongs to."""

    frame: "Frame"
    value: Expr


class Frame:
    """A function as it takes part in an analysis: how its places become spots.

    ``prefix`` tells the automatic variables of one activation from those of others; ``bindings`` give the values of
    its pointer parameters.
    """

    def __init__(
        self, places: Places, function: Function, prefix: str = "", bindings: Mapping[str, Binding] | None = None
    ) -> None:
        self.places = places
        self.function = function
        self.prefix = prefix
        facts = facts_of(function)
        self.taken = facts.taken
        self._taken_cells = facts.taken_cells
        self.bindings: dict[str, Binding] = dict(bindings or {})
        for identity, value in facts.fixed.items():
            self.bindings.setdefault(identity, Binding(self, value))
        self._cache: dict[int, tuple[PlaceExpr, Spot]] = {}

    def spot(self, place: PlaceExpr) -> Spot:
        """The spot that a place names."""
        cached = self._cache.get(id(place))
        if cached is not None and cached[0] is place:
            return cached[1]
        spot = self.places.spot(self.access(place))
        self._cache[id(place)] = (place, spot)
        return spot

    def access(self, place: PlaceExpr) -> Access:
        """The access path of a place."""
        if isinstance(place, VariablePlace):
            return self._variable(place.variable)
        if isinstance(place, MemberPlace):
            return self._member(self.access(place.base), place)
        if isinstance(place, ElementPlace):
            return self._element(self.access(place.base), place.index, place.type)
        return self.pointed(place.pointer, place.type)

    def _variable(self, variable: Variable) -> Access:
        local = variable.storage in LOCAL_STORAGE
        root = self.prefix + variable.identity if local else variable.identity
        exposure = self.places.exposure
        if local:
            exposed = variable.identity in self.taken
        else:
            exposed = exposure is None or variable.identity in exposure.variables
        return Access(
            root, (), True, (), VariableCell(root), (), variable.type, local, exposed, False, True, variable.volatile
        )

    def _member(self, base: Access, place: MemberPlace) -> Access:
        exposure = self.places.exposure
        in_union = isinstance(base.type, StructType) and base.type.union
        overlaps = exposure is not None and place.struct in exposure.unions
        step = "." + place.name
        cell: Cell | None = None
        if isinstance(base.cell, VariableCell):
            cell = VariableCell(base.cell.variable, (*base.cell.path, step))
        elif isinstance(base.cell, FieldCell):
            cell = FieldCell(base.cell.struct, (*base.cell.path, place.name))
        return Access(
            base.root, (*base.path, step), base.definite, base.depends, cell, (place.struct, place.name), place.type,
            base.local, base.exposed, base.reached, base.tracked and not in_union and not overlaps,
            base.volatile or place.volatile,
        )  # fmt: skip

    def _element(self, base: Access, index: Expr, kind: CType) -> Access:
        step, depends = self._index(index)
        cell: Cell | None = None
        if isinstance(base.cell, VariableCell):
            cell = VariableCell(base.cell.variable, (*base.cell.path, "[]"))
        elif isinstance(base.cell, FieldCell) and base.cell.path:
            cell = FieldCell(base.cell.struct, (*base.cell.path, "[]"))
        elif isinstance(kind, StructType):
            cell = FieldCell(kind.identity, ())
        return Access(
            base.root, (*base.path, step), base.definite and step != "[]", base.depends + depends, cell,
            (*base.view, "[]") if base.view else (), kind, base.local, base.exposed, base.reached, base.tracked,
            base.volatile,
        )  # fmt: skip

    def _index(self, index: Expr) -> tuple[str, tuple[Spot, ...]]:
        """The path's step for an element, and the spot whose change would make it another element."""
        plain = index
        while isinstance(plain, Cast) and isinstance(plain.type, IntType):
            plain = plain.operand
        if isinstance(index, Const) or isinstance(plain, Const):
            return f"[{plain.value if isinstance(plain, Const) else 0}]", ()
        if isinstance(plain, Load) and isinstance(plain.place, VariablePlace):
            variable = plain.place.variable
            if variable.storage in LOCAL_STORAGE and not variable.volatile and variable.identity not in self.taken:
                if _widens(index):
                    spot = self.spot(plain.place)
                    return f"[{spot.root}]", (spot,)
        return "[]", ()

    def pointed(self, pointer: Expr, kind: CType) -> Access:
        """The access path of what a pointer points to, seen as an object of the type ``kind``."""
        target = self.target(pointer, kind)
        if target is not None:
            return target
        cell = FieldCell(kind.identity, ()) if isinstance(kind, StructType) else None
        return Access("?", ("->",), False, (), cell, (), kind, False, True, True, not _is_union(kind), False)

    def target(self, pointer: Expr, kind: CType) -> Access | None:
        """As ``pointed``; None where the pointer's value has no name."""
        plain = pointer
        while isinstance(plain, Cast) and isinstance(plain.type, PointerType):
            plain = plain.operand
        if isinstance(plain, AddressOf):
            return self._addressed(plain.place, kind)
        if isinstance(plain, PointerStep):
            return self._stepped(plain, kind)
        if not isinstance(plain, Load):
            return None
        if isinstance(plain.place, VariablePlace):
            bound = self.bindings.get(plain.place.variable.identity)
            if bound is not None and plain.place.variable.storage in LOCAL_STORAGE:
                found = bound.frame.target(bound.value, kind)
                if found is not None:
                    return found
        access = self.access(plain.place)
        spot = self.places.spot(access)
        if not (spot.definite and spot.tracked and isinstance(access.type, PointerType)):
            return None
        cell = FieldCell(kind.identity, ()) if isinstance(kind, StructType) else None
        return Access(
            access.root, (*access.path, "->"), True, (*access.depends, spot), cell, (), kind, False, True, True,
            not _is_union(kind), False,
        )  # fmt: skip

    def _addressed(self, place: PlaceExpr, kind: CType) -> Access | None:
        access = self.access(place)
        if same_object(access.type, kind):
            return access
        if isinstance(access.type, ArrayType) and same_object(access.type.element, kind):
            return self._element(access, Const(0, IntType("int", 32, True, 4)), access.type.element)
        return None

    def _stepped(self, step: PointerStep, kind: CType) -> Access | None:
        plain = step.pointer
        while isinstance(plain, Cast) and isinstance(plain.type, PointerType):
            plain = plain.operand
        if isinstance(plain, AddressOf):
            access = self.access(plain.place)
            if isinstance(access.type, ArrayType) and same_object(access.type.element, kind):
                return self._element(access, step.steps, kind)
            if isinstance(plain.place, ElementPlace) and same_object(access.type, kind):
                unknown = Load(plain.place, access.type)
                return self._element(self.access(plain.place.base), unknown, kind)
        if not (isinstance(step.type, PointerType) and same_object(step.type.to, kind)):
            return None
        base = self.target(step.pointer, kind)
        if base is None:
            return None
        token, depends = self._index(step.steps)
        if token == "[0]":
            return base
        if not base.reached:
            # A step from a single object or from an element: some element of the same array.
            path = tuple("[]" if part.startswith("[") else part for part in base.path)
            return Access(
                base.root, path, False, (), base.cell, base.view, kind, base.local, base.exposed, False, base.tracked,
                base.volatile,
            )  # fmt: skip
        return Access(
            base.root, (*base.path, token), base.definite and token != "[]", base.depends + depends, base.cell,
            base.view, kind, base.local, base.exposed, True, base.tracked, base.volatile,
        )  # fmt: skip


def _is_union(kind: CType) -> bool:
    return isinstance(kind, StructType) and kind.union


def _widens(index: Expr) -> bool:
    """Whether the casts around an index variable cannot change its value."""
    while isinstance(index, Cast):
        inner = index.operand
        source = number_type(inner.type) if isinstance(inner, (Cast, Load)) else None
        if source is None or not isinstance(index.type, IntType):
            return False
        if not (index.type.low <= source.low and source.high <= index.type.high):
            return False
        index = inner
    return True
