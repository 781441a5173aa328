"""Names for the objects that a function touches, so that a store to one is known not to change, or to maybe change,
another.

A *cell* (``values.types``) names what one summary of the program speaks of: a variable, or a member of every
structure of a type. Inside one run of a function that is too coarse: after ``a->head = 0`` nothing is known of
``b->head``. A *spot* is an access path that starts at a variable and goes through members, elements and pointers,
as in ``a -> .head``. It is *definite* while the pointers and index variables in it are not changed; a change of one
of them ends the names that depend on it. A spot that is not definite stands for the remaining objects of its cell.

Which spots may be one object follows the rules of 6.5p7: members are the same member of the same structure type,
and an access through a pointer to an integer may reach integers of the same width whose address was taken. An
access through a pointer to a character may reach every object whose bytes were exposed by a cast to such a pointer.

A pointer that is set once, to an address that stays the same (``struct ring *r = &rx;``), is replaced by what it
points to.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Final, TypeAlias

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Begin,
    Call,
    Cast,
    Clobber,
    Const,
    CType,
    DerefPlace,
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
from stepring.values.intervals import number_type, whole
from stepring.values.scan import expressions_of, places_of, walk_expression
from stepring.values.types import Cell, FieldCell, Interval, VariableCell

Bucket: TypeAlias = tuple[object, ...]
LOCAL_STORAGE: Final = ("automatic", "parameter", "temporary")


@dataclass(frozen=True, slots=True)
class Exposure:
    """What the whole program does with addresses.

    ``variables``: identities of variables whose address, or a part's, is taken. ``cells``: cells whose own address
    is taken. ``bytes_of``: structures that are also reached through pointers to characters. ``unions``: structures
    that overlap with others in a union. ``members``: the integer and pointer members of each structure, by path, as
    far as the code names them.
    """

    variables: frozenset[str] = frozenset()
    cells: frozenset[Cell] = frozenset()
    bytes_of: frozenset[str] = frozenset()
    unions: frozenset[str] = frozenset()
    members: Mapping[str, Mapping[tuple[str, ...], CType]] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Access:
    """A place, taken apart.

    ``root`` is a variable's identity (with its frame's prefix) or ``?``; ``path`` the steps from it: ``.member``,
    ``[3]``, ``[i@12]``, ``[]``, ``->``. ``cell`` is the summary cell (None for what a pointer to a scalar points
    to), ``view`` the innermost structure and the steps in it, ``local`` whether the root is automatic and no
    pointer is in the path.
    """

    root: str
    path: tuple[str, ...]
    definite: bool
    depends: tuple["Spot", ...]
    cell: Cell | None
    view: tuple[str, ...]
    type: CType
    local: bool
    exposed: bool
    reached: bool
    tracked: bool
    volatile: bool


@dataclass(eq=False, slots=True)
class Spot:
    """One definite object, or (``definite`` False) the rest of a cell's objects. Compared by identity; made by
    ``Places`` only.

    ``tracked`` is False for what must always be taken to have any value that its summary allows. ``private`` says
    that no pointer and no other function can reach it.
    """

    root: str
    path: tuple[str, ...]
    cell: Cell | None
    type: CType
    definite: bool
    tracked: bool
    private: bool
    reached: bool
    pointee: bool
    depends: tuple["Spot", ...]
    buckets: tuple[Bucket, ...]
    default: Interval
    remainder: "Spot | None" = None
    dependents: list["Spot"] = field(default_factory=list)
    _aliases: tuple["Spot", ...] = ()
    _version: int = -1

    def __repr__(self) -> str:
        return f"<{self.root}{''.join(self.path)}{'' if self.definite else ' …'}>"


class Places:
    """All spots of one analysis, and which of them may be one object.

    ``steady`` says of a volatile cell that only the analysed code stores into it, ``foreign`` of any cell that
    another context may store into it at any moment. What a pointer to a scalar points to is tracked only with
    ``track_pointees``: the pointer may lead to a device register, which the types do not say.
    """

    def __init__(
        self,
        summaries: Mapping[Cell, Interval],
        exposure: Exposure | None,
        steady: Callable[[Cell], bool],
        foreign: Callable[[Cell], bool],
        track_pointees: bool = False,
    ) -> None:
        self.summaries = summaries
        self.exposure = exposure
        self._steady = steady
        self._foreign = foreign
        self._track_pointees = track_pointees
        self._spots: dict[tuple[object, ...], Spot] = {}
        self._named: dict[tuple[str, tuple[str, ...]], Spot] = {}
        self._buckets: dict[Bucket, list[Spot]] = {}
        self._version = 0

    def all(self) -> list[Spot]:
        """Every spot that was named so far."""
        return list(self._spots.values())

    def named(self, root: str, path: tuple[str, ...]) -> Spot | None:
        """The definite spot with that access path, if some place has named it."""
        return self._named.get((root, path))

    def spot(self, access: Access) -> Spot:
        """The spot of a place; the same one for every place with the same access path."""
        number = number_type(access.type)
        width = number.width if number is not None else 0
        definite = access.definite and not (access.path and _variable_index(access.path[-1]))
        key: tuple[object, ...]
        if definite:
            key = (access.root, access.path, access.cell, width)
        elif access.reached:
            key = ("?", access.cell, width)
        else:
            key = ("…", access.root, access.cell, width)
        found = self._spots.get(key)
        if found is not None:
            return found
        return self._add(key, access, definite, width)

    def _add(self, key: tuple[object, ...], access: Access, definite: bool, width: int) -> Spot:
        pointee = access.reached and access.cell is None
        cell = access.cell
        lasting = access.reached or not access.local
        summary = self.summaries.get(cell) if cell is not None and lasting and access.tracked else None
        volatile = access.volatile and not (cell is not None and self._steady(cell))
        spot = Spot(
            root=access.root if definite or not access.reached else "?",
            path=access.path if definite else tuple("[]" if step.startswith("[") else step for step in access.path),
            cell=cell,
            type=access.type,
            definite=definite,
            tracked=access.tracked
            and not volatile
            and width > 0
            and not (cell is not None and self._foreign(cell))
            and (self._track_pointees or not pointee),
            private=access.local and not access.exposed,
            reached=access.reached,
            pointee=pointee,
            depends=access.depends if definite else (),
            buckets=self._buckets_of(access, width, pointee),
            default=summary if summary is not None else whole(access.type),
        )
        self._spots[key] = spot
        if definite:
            self._named.setdefault((access.root, access.path), spot)
            for other in access.depends:
                other.dependents.append(spot)
            if access.depends or any(step.startswith("[") for step in access.path):
                spot.remainder = self.spot(_indefinite(access))
        for bucket in spot.buckets:
            self._buckets.setdefault(bucket, []).append(spot)
        self._version += 1
        return spot

    def _buckets_of(self, access: Access, width: int, pointee: bool) -> tuple[Bucket, ...]:
        buckets: list[Bucket] = []
        open_to_pointers = access.reached or access.exposed
        if access.view and open_to_pointers:
            buckets.append(("member", *access.view))
        if any(step.startswith("[") for step in access.path) and access.cell is not None:
            buckets.append(("cell", access.cell))
        if pointee:
            buckets.append(("scalar", width))
            if width == 8:
                buckets.append(("bytes",))
        elif width and open_to_pointers:
            known = self.exposure
            if known is None or access.cell in known.cells or (access.local and access.exposed):
                buckets += [("scalar", width), ("bytes",)]
            elif access.view and access.view[0] in known.bytes_of:
                buckets.append(("bytes",))
        return tuple(buckets)

    def aliases(self, spot: Spot) -> tuple[Spot, ...]:
        """The other spots that may be the same object."""
        if spot._version == self._version:
            return spot._aliases
        found: dict[int, Spot] = {}
        for bucket in spot.buckets:
            for other in self._buckets[bucket]:
                if other is not spot and id(other) not in found and _may_alias(spot, other, bucket[0]):
                    found[id(other)] = other
        spot._aliases = tuple(found.values())
        spot._version = self._version
        return spot._aliases


def _indefinite(access: Access) -> Access:
    """The access to some object of the same cell."""
    path = tuple("[]" if step.startswith("[") else step for step in access.path)
    return Access(
        access.root, path, False, (), access.cell, access.view, access.type, access.local, access.exposed,
        access.reached, access.tracked, access.volatile,
    )  # fmt: skip


def _variable_index(step: str) -> bool:
    """Whether a step is an element chosen by a variable or by an unknown index."""
    return step.startswith("[") and not step[1:-1].lstrip("-").isdigit()


def _may_alias(a: Spot, b: Spot, kind: object) -> bool:
    """Whether two spots of one bucket can be the same object."""
    if kind in ("scalar", "bytes") and not (a.pointee or b.pointee):
        return False
    if not a.reached and not b.reached and a.root != b.root:
        return False
    if a.root == b.root and a.root != "?":
        for place, (x, y) in enumerate(zip(a.path, b.path, strict=False)):
            if x == y:
                continue
            apart = not _variable_index(x) and not _variable_index(y) if x[0] == y[0] == "[" else x[0] == y[0] == "."
            if apart and "->" not in a.path[place:] and "->" not in b.path[place:]:
                return False
            break
        else:
            return len(a.path) == len(b.path)
        if not a.reached and not b.reached:
            return a.cell == b.cell
    return True


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


def same_object(a: CType, b: CType) -> bool:
    """Whether an object of one type can be taken for one of the other: equal, or of one kind and width."""
    if isinstance(a, IntType) and isinstance(b, IntType):
        return a.width == b.width
    if isinstance(a, StructType) and isinstance(b, StructType):
        return a.identity == b.identity
    if isinstance(a, PointerType) and isinstance(b, PointerType):
        return a.width == b.width
    return a == b


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


# ---------------------------------------------------------------------------------------------------------- a
# function's facts


@dataclass(frozen=True, slots=True)
class FunctionFacts:
    """What a function does with addresses.

    ``taken``: identities of variables whose address it takes (and does not use at once). ``taken_cells``: scalar
    cells whose own address is taken. ``fixed``: pointer variables that are set once, to an address that cannot
    change. ``unassigned``: its parameters that are never stored to.
    """

    taken: frozenset[str]
    taken_cells: frozenset[Cell]
    fixed: Mapping[str, Expr]
    unassigned: frozenset[str]


_facts: dict[int, tuple[Function, FunctionFacts]] = {}


def facts_of(function: Function) -> FunctionFacts:
    """The facts of a function, computed once."""
    known = _facts.get(id(function))
    if known is not None and known[0] is function:
        return known[1]
    facts = _find_facts(function)
    if len(_facts) > 4096:
        _facts.clear()
    _facts[id(function)] = (function, facts)
    return facts


def _find_facts(function: Function) -> FunctionFacts:
    taken: set[str] = set()
    cells: set[Cell] = set()
    stores: dict[str, list[Expr | None]] = {}
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                stores.setdefault(statement.place.variable.identity, []).append(statement.value)
            elif isinstance(statement, Call) and isinstance(statement.result, VariablePlace):
                stores.setdefault(statement.result.variable.identity, []).append(None)
            elif isinstance(statement, Clobber):
                for place in statement.places:
                    if isinstance(place, VariablePlace):
                        stores.setdefault(place.variable.identity, []).append(None)
            elif isinstance(statement, Begin):
                continue
            for expression in expressions_of(statement):
                collect_taken(expression, taken, cells)
            for place in places_of(statement):
                _taken_in_place(place, taken, cells)
        for expression in expressions_of(block.terminator):
            collect_taken(expression, taken, cells)
    unassigned = frozenset(
        p.identity
        for p in function.parameters
        if p.identity not in stores and p.identity not in taken and not p.volatile
    )
    fixed: dict[str, Expr] = {}
    once = {
        variable.identity: stores[variable.identity][0]
        for variable in function.variables
        if variable.storage in ("automatic", "temporary")
        and isinstance(variable.type, PointerType)
        and not variable.volatile
        and variable.identity not in taken
        and len(stores.get(variable.identity, ())) == 1
    }
    for _ in range(len(once) + 1):
        found = {
            identity: value
            for identity, value in once.items()
            if identity not in fixed and value is not None and is_fixed(value, unassigned, fixed)
        }
        if not found:
            break
        fixed.update(found)
    return FunctionFacts(frozenset(taken), frozenset(cells), fixed, unassigned)


def is_fixed(pointer: Expr, unassigned: frozenset[str], fixed: Mapping[str, Expr]) -> bool:
    """Whether a pointer has one value in the whole function: an address, or a parameter that is never stored to."""
    if isinstance(pointer, Cast):
        return isinstance(pointer.type, PointerType) and is_fixed(pointer.operand, unassigned, fixed)
    if isinstance(pointer, AddressOf):
        return _fixed_place(pointer.place, unassigned, fixed)
    if isinstance(pointer, Load) and isinstance(pointer.place, VariablePlace):
        identity = pointer.place.variable.identity
        return identity in unassigned or identity in fixed
    return False


def _fixed_place(place: PlaceExpr, unassigned: frozenset[str], fixed: Mapping[str, Expr]) -> bool:
    if isinstance(place, VariablePlace):
        return True
    if isinstance(place, MemberPlace):
        return _fixed_place(place.base, unassigned, fixed)
    if isinstance(place, ElementPlace):
        return isinstance(place.index, Const) and _fixed_place(place.base, unassigned, fixed)
    return is_fixed(place.pointer, unassigned, fixed)


def collect_taken(expression: Expr, taken: set[str], cells: set[Cell]) -> None:
    """Add the variables and scalar cells whose address an expression makes, except addresses that are used at once."""
    for part in walk_expression(expression):
        if isinstance(part, AddressOf):
            _take(part.place, taken, cells)
        elif isinstance(part, Load):
            _taken_in_place(part.place, taken, cells)


def _taken_in_place(place: PlaceExpr, taken: set[str], cells: set[Cell]) -> None:
    while not isinstance(place, VariablePlace):
        if isinstance(place, DerefPlace):
            plain: Expr = place.pointer
            while isinstance(plain, Cast):
                plain = plain.operand
            if isinstance(plain, PointerStep) and isinstance(plain.pointer, AddressOf):
                collect_taken(plain.steps, taken, cells)
                if not isinstance(plain.pointer.place.type, ArrayType):
                    _take(plain.pointer.place, taken, cells)
                place = plain.pointer.place
            elif isinstance(plain, AddressOf):
                if plain is not place.pointer:
                    _take(plain.place, taken, cells)
                place = plain.place
            else:
                collect_taken(place.pointer, taken, cells)
                return
            continue
        if isinstance(place, ElementPlace):
            collect_taken(place.index, taken, cells)
        place = place.base


def _take(place: PlaceExpr, taken: set[str], cells: set[Cell]) -> None:
    kind = place.type
    cell = cell_of(place)
    while isinstance(kind, ArrayType):
        kind = kind.element
        if isinstance(cell, VariableCell):
            cell = VariableCell(cell.variable, (*cell.path, "[]"))
        elif isinstance(cell, FieldCell):
            cell = FieldCell(cell.struct, (*cell.path, "[]"))
    if cell is not None and number_type(kind) is not None:
        cells.add(cell)
    base = place
    while isinstance(base, (MemberPlace, ElementPlace)):
        base = base.base
    if isinstance(base, VariablePlace):
        taken.add(base.variable.identity)
    else:
        _taken_in_place(place, taken, cells)


# ---------------------------------------------------------------------------------------------------------- cells


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
