"""What a function does with addresses: whose it takes, and which pointers have one value all the time."""

from collections.abc import Mapping
from dataclasses import dataclass

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Begin,
    Call,
    Cast,
    Clobber,
    Const,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    PointerType,
    VariablePlace,
)
from stepring.values.cells import cell_of
from stepring.values.intervals import number_type
from stepring.values.scan import expressions_of, inside_place, places_of, walk_expression
from stepring.values.types import Cell, FieldCell, VariableCell


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


def keeps_during_call(pointer: Expr, taken: frozenset[str]) -> bool:
    """Whether a pointer that is passed to a callee has one value while the callee runs: it depends only on the caller's
    own variables whose address is not taken."""
    if isinstance(pointer, Cast):
        return keeps_during_call(pointer.operand, taken)
    if isinstance(pointer, AddressOf):
        return all(keeps_during_call(part, taken) for part in inside_place(pointer.place))
    if isinstance(pointer, PointerStep):
        return keeps_during_call(pointer.pointer, taken) and keeps_during_call(pointer.steps, taken)
    if isinstance(pointer, Load) and isinstance(pointer.place, VariablePlace):
        variable = pointer.place.variable
        own = variable.storage in ("automatic", "parameter", "temporary")
        return own and not variable.volatile and variable.identity not in taken
    return isinstance(pointer, Const)


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


def member_cell(place: PlaceExpr) -> FieldCell | None:
    """The member that a place is, or lies in as an array's element, of whichever object of its structure; an array's
    element as ``[]``."""
    kind, steps = place.type, 0
    while isinstance(kind, ArrayType):
        kind, steps = kind.element, steps + 1
    while isinstance(place, ElementPlace):
        place, steps = place.base, steps + 1
    return FieldCell(place.struct, (place.name, *["[]"] * steps)) if isinstance(place, MemberPlace) else None


def _take(place: PlaceExpr, taken: set[str], cells: set[Cell]) -> None:
    kind = place.type
    cell = cell_of(place)
    while isinstance(kind, ArrayType):
        kind = kind.element
        if isinstance(cell, VariableCell):
            cell = VariableCell(cell.variable, (*cell.path, "[]"))
        elif isinstance(cell, FieldCell):
            cell = FieldCell(cell.struct, (*cell.path, "[]"))
    if number_type(kind) is not None:
        cells |= {name for name in (cell, member_cell(place)) if name is not None}
    base = place
    while isinstance(base, (MemberPlace, ElementPlace)):
        base = base.base
    if isinstance(base, VariablePlace):
        taken.add(base.variable.identity)
    else:
        _taken_in_place(place, taken, cells)
