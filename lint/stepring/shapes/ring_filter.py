"""Which functions could be part of a ring: one cheap look at each, so that only those go on to the program stage.

The one idea: a ring shows as a lasting integer that both subscripts something and is moved. So the integers that
occur in subscripts are collected over the unit (through local copies), then the functions that subscript with one,
move one, or store into one are kept, with the small helpers they call and, for static ones, with their callers.
"""

from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from stepring.meaning.fold import fold
from stepring.meaning.types import (
    AddressOf,
    Assign,
    Binary,
    Branch,
    Call,
    Cast,
    Clobber,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    Return,
    StructType,
    Switch,
    Unary,
    UnknownType,
    Variable,
    VariablePlace,
)

SMALL = 40
"""A callee of up to this many blocks counts as a helper."""
LARGE = 400
"""A caller of more blocks than this is not kept for the sake of its static callee."""
LEVELS = 3

_Name = tuple[str, ...]


@dataclass(slots=True)
class _Scan:
    """What one look at a function shows."""

    subscripts: set[_Name] = field(default_factory=set)
    arrays: set[_Name] = field(default_factory=set)
    indexed: set[tuple[_Name, _Name]] = field(default_factory=set)
    moved: set[_Name] = field(default_factory=set)
    wrapped: set[_Name] = field(default_factory=set)
    stored: set[_Name] = field(default_factory=set)
    reset: set[_Name] = field(default_factory=set)
    compared: set[_Name] = field(default_factory=set)
    structs: set[str] = field(default_factory=set)
    calls: set[str] = field(default_factory=set)


def ring_functions(functions: Sequence[Function]) -> tuple[Function, ...]:
    """The functions of a unit that could be part of a ring, in their order."""
    scans = [_scan(function) for function in functions]
    subscripts: set[_Name] = set()
    moved: set[_Name] = set()
    for scan in scans:
        subscripts |= scan.subscripts
        moved |= scan.moved
    # A member, or a variable with external linkage, may be moved in another unit.
    indices = {
        name for name in subscripts if name in moved or name[0] == "member" or (name[0] == "var" and ":" not in name[1])
    }
    indices |= {name for scan in scans for name in scan.wrapped}
    # A helper that moves an index and gives the slot: what subscripts with its result is part of the ring.
    indices |= {("call", function.name) for function, scan in zip(functions, scans, strict=True) if scan.moved}
    moved |= {name for name in indices if name[0] == "call"}
    kept = {
        number
        for number, scan in enumerate(scans)
        if scan.subscripts & indices or scan.stored & indices or scan.wrapped
    }
    walked = {array for scan in scans for array, name in scan.indexed if name in indices and name in moved}
    kept |= {number for number, scan in enumerate(scans) if scan.arrays & walked}
    owners = {name[1] for name in indices if name[0] == "member" and name in moved}
    kept |= {number for number, scan in enumerate(scans) if scan.structs & owners}
    return tuple(functions[number] for number in sorted(_with_neighbours(functions, scans, kept)))


def _with_neighbours(functions: Sequence[Function], scans: list[_Scan], kept: set[int]) -> set[int]:
    """Add the callers of static functions, then small callees, to some levels."""
    by_name: dict[str, list[int]] = defaultdict(list)
    for number, function in enumerate(functions):
        by_name[function.name].append(number)
    callers: dict[int, list[int]] = defaultdict(list)
    for number, scan in enumerate(scans):
        for name in scan.calls:
            for callee in by_name.get(name, ()):
                callers[callee].append(number)
    edge = set(kept)
    for _ in range(LEVELS):
        edge = {
            caller
            for number in edge
            if functions[number].static
            for caller in callers[number]
            if caller not in kept and len(functions[caller].blocks) <= LARGE
        }
        kept |= edge
    edge = set(kept)
    for _ in range(LEVELS):
        edge = {
            callee
            for number in edge
            for name in scans[number].calls
            for callee in by_name.get(name, ())
            if callee not in kept and len(functions[callee].blocks) <= SMALL
        }
        kept |= edge
    return kept


# ---------------------------------------------------------------------------------------------------------- one look


@dataclass(slots=True)
class _Look:
    """A look in progress: which lasting integers each local variable is made of."""

    scan: _Scan
    made_of: dict[str, frozenset[_Name]] = field(default_factory=dict)
    sums: set[str] = field(default_factory=set)
    leads: dict[str, frozenset[_Name]] = field(default_factory=dict)


def _scan(function: Function) -> _Scan:
    look = _Look(_Scan())
    # Twice, so that a copy made late in a loop is known where it is used early.
    for _ in range(2 if len(function.blocks) > 1 else 1):
        for block in function.blocks:
            for statement in block.statements:
                match statement:
                    case Assign(place=place, value=value):
                        _assign(look, place, value)
                    case Call():
                        _call(look, statement)
                    case Clobber(places=places):
                        for place in places:
                            _place(look, place)
            end = block.terminator
            match end:
                case Branch(condition=value):
                    _expr(look, value)
                    _compare(look, value)
                case Switch(value=value):
                    _expr(look, value)
                case Return(value=result) if result is not None:
                    _expr(look, result)
    scan = look.scan
    # What is moved, compared and given a constant in one function can be wrapped by a comparison.
    scan.wrapped |= scan.moved & scan.compared & scan.reset
    return scan


def _assign(look: _Look, place: PlaceExpr, value: Expr) -> None:
    _expr(look, value)
    _place(look, place)
    if isinstance(place, VariablePlace) and not place.variable.lasting:
        _copy(look, place.variable, value)
        return
    if isinstance(place.type, StructType):
        look.scan.structs.add(place.type.identity)
    if not isinstance(place.type, IntType | UnknownType):
        return
    name = _name(place)
    if name is None:
        return
    made_of = frozenset(_sources(look, value))
    look.scan.stored.add(name)
    if fold(value) is not None:
        look.scan.reset.add(name)
    if made_of and _moves(look, value):
        look.scan.moved.add(name)
        if name in made_of and _reduced(value):
            look.scan.wrapped.add(name)
    elif made_of:
        look.scan.moved |= made_of & look.scan.stored


def _copy(look: _Look, variable: Variable, value: Expr) -> None:
    made_of = frozenset(_sources(look, value))
    if made_of:
        look.made_of[variable.identity] = look.made_of.get(variable.identity, frozenset()) | made_of
    if _moves(look, value):
        look.sums.add(variable.identity)
    if isinstance(variable.type, PointerType):
        arrays = _arrays(look, value)
        if arrays:
            look.leads[variable.identity] = look.leads.get(variable.identity, frozenset()) | arrays


def _call(look: _Look, call: Call) -> None:
    if isinstance(call.callee, FunctionName):
        look.scan.calls.add(call.callee.name)
    else:
        _expr(look, call.callee)
    made_of: set[_Name] = set()
    for argument in call.arguments:
        _expr(look, argument)
        made_of |= set(_sources(look, argument))
        inner = argument
        while isinstance(inner, Cast):
            inner = inner.operand
        if isinstance(inner, AddressOf) and isinstance(inner.place.type, IntType):
            name = _name(inner.place)
            if name is not None:
                made_of.add(name)
                look.scan.stored.add(name)
                look.scan.moved.add(name)
        to = inner.type.to if isinstance(inner.type, PointerType) else None
        if isinstance(to, StructType) and isinstance(call.callee, FunctionName) and "mem" in call.callee.name:
            look.scan.structs.add(to.identity)
    if isinstance(call.callee, FunctionName):
        made_of.add(("call", call.callee.name))
    if call.result is not None:
        _place(look, call.result)
        if isinstance(call.result, VariablePlace) and not call.result.variable.lasting and made_of:
            identity = call.result.variable.identity
            look.made_of[identity] = look.made_of.get(identity, frozenset()) | made_of
            look.sums.add(identity)


def _compare(look: _Look, expr: Expr) -> None:
    match expr:
        case Binary(left=left, right=right):
            look.scan.compared |= set(_sources(look, left)) | set(_sources(look, right))
        case Unary(operand=operand) | Cast(operand=operand):
            _compare(look, operand)
        case Load():
            look.scan.compared |= set(_sources(look, expr))


def _arrays(look: _Look, pointer: Expr) -> frozenset[_Name]:
    """The arrays that a pointer, as far as this look knows, leads into."""
    match pointer:
        case AddressOf(place=ElementPlace(base=place)) | AddressOf(place=place):
            name = _name(place)
            return frozenset((name,)) if name is not None else frozenset()
        case Cast(operand=operand):
            return _arrays(look, operand)
        case PointerStep(pointer=inner):
            return _arrays(look, inner)
        case Load(place=VariablePlace(variable=variable)) if not variable.lasting:
            return look.leads.get(variable.identity, frozenset())
        case Load(place=place):
            name = _name(place)
            return frozenset((name,)) if name is not None else frozenset()
    return frozenset()


def _name(place: PlaceExpr) -> _Name | None:
    """What lasting integer a place is."""
    match place:
        case VariablePlace(variable=variable):
            return ("var", variable.identity) if variable.lasting else None
        case MemberPlace(struct=struct, name=name):
            return ("member", struct, name)
        case ElementPlace(base=base):
            inner = _name(base)
            return None if inner is None else (*inner, "[]")
    return None


def _sources(look: _Look, expr: Expr) -> Iterator[_Name]:
    match expr:
        case Load(place=VariablePlace(variable=variable)) if not variable.lasting:
            yield from look.made_of.get(variable.identity, ())
        case Load(place=place, type=IntType() | UnknownType()):
            name = _name(place)
            if name is not None:
                yield name
        case Cast(operand=operand):
            yield from _sources(look, operand)
        case Binary(op="+" | "-" | "&" | "*", left=left, right=right):
            yield from _sources(look, left)
            yield from _sources(look, right)
        case Binary(op="%" | "<<", left=left):
            yield from _sources(look, left)


def _moves(look: _Look, expr: Expr) -> bool:
    """Whether something is added, or reduced, on the way to the value."""
    match expr:
        case Cast(operand=operand):
            return _moves(look, operand)
        case Binary(op="+" | "-" | "%" | "&"):
            return True
        case Load(place=VariablePlace(variable=variable)) if not variable.lasting:
            return variable.identity in look.sums
    return False


def _reduced(expr: Expr) -> bool:
    match expr:
        case Cast(operand=operand):
            return _reduced(operand)
        case Binary(op="%" | "&"):
            return True
    return False


def _place(look: _Look, place: PlaceExpr) -> None:
    match place:
        case ElementPlace(base=base, index=index):
            found = tuple(_sources(look, index))
            look.scan.subscripts.update(found)
            array = _name(base)
            if array is not None:
                look.scan.arrays.add(array)
                look.scan.indexed.update((array, name) for name in found)
            _expr(look, index)
            _place(look, base)
        case MemberPlace(base=base):
            _place(look, base)
        case DerefPlace(pointer=pointer):
            _expr(look, pointer)


def _expr(look: _Look, expr: Expr) -> None:
    match expr:
        case Load(place=place) | AddressOf(place=place):
            _place(look, place)
        case Unary(operand=operand) | Cast(operand=operand):
            _expr(look, operand)
        case Binary(left=left, right=right) | PointerDistance(left=left, right=right):
            _expr(look, left)
            _expr(look, right)
        case PointerStep(pointer=pointer, steps=steps):
            found = tuple(_sources(look, steps))
            look.scan.subscripts.update(found)
            for array in _arrays(look, pointer):
                look.scan.arrays.add(array)
                look.scan.indexed.update((array, name) for name in found)
            _expr(look, pointer)
            _expr(look, steps)
