"""Which functions could be part of a ring: one cheap look at each, so that only those go on to the program stage.

The one idea: a ring shows as a lasting integer that both subscripts something and is moved. So the integers that
occur in subscripts are collected over the unit (through local copies), then the functions that subscript with one,
move one, or store into one are kept, with the small helpers they call and, for static ones, with their callers.
"""

from collections import defaultdict
from collections.abc import Iterable, Iterator, Sequence
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

SMALL = 15
"""A callee of up to this many blocks counts as a helper."""
LARGE = 200
"""A caller of more blocks than this is not kept for the sake of its static callee."""
LEVELS = 2

_Name = tuple[str, ...]


@dataclass(slots=True)
class _Scan:
    """What one look at a function shows.

    ``compared`` are integers compared with an upper end, ``emptied`` those compared with 0; ``reset`` are set to 0 or
    1, ``filled`` to more; ``ups`` and ``downs`` are moved so, ``turned`` reduced at their update. ``reduced`` are
    brought into range where they subscript, ``via`` moved by way of a call; ``reads`` tell the caller something,
    ``slots`` a value that was brought into a range set at run time.
    ``turns`` says that the function compares or reduces something, as helpers that wrap do.
    """

    subscripts: set[_Name] = field(default_factory=set)
    arrays: set[_Name] = field(default_factory=set)
    indexed: set[tuple[_Name, _Name]] = field(default_factory=set)
    moved: set[_Name] = field(default_factory=set)
    wrapped: set[_Name] = field(default_factory=set)
    stored: set[_Name] = field(default_factory=set)
    reset: set[_Name] = field(default_factory=set)
    filled: set[_Name] = field(default_factory=set)
    compared: set[_Name] = field(default_factory=set)
    emptied: set[_Name] = field(default_factory=set)
    ups: set[_Name] = field(default_factory=set)
    downs: set[_Name] = field(default_factory=set)
    reads: set[_Name] = field(default_factory=set)
    reduced: set[_Name] = field(default_factory=set)
    slots: set[_Name] = field(default_factory=set)
    via: set[tuple[_Name, str]] = field(default_factory=set)
    turned: set[_Name] = field(default_factory=set)
    turns: bool = False
    structs: set[str] = field(default_factory=set)
    calls: set[str] = field(default_factory=set)


def ring_functions(functions: Sequence[Function]) -> tuple[Function, ...]:
    """The functions of a unit that could be part of a ring, in their order."""
    scans = [_scan(function) for function in functions]
    helpers = {function.name for function, scan in zip(functions, scans, strict=True) if scan.turns}
    # A helper that moves an index and gives the slot: what subscripts with its result is part of the ring.
    givers = {("call", function.name) for function, scan in zip(functions, scans, strict=True) if scan.moved}
    subscripts = {name for scan in scans for name in scan.subscripts}
    moved = {name for scan in scans for name in scan.moved}
    wrapped = {name for scan in scans for name in scan.wrapped | scan.reduced}
    wrapped |= {name for scan in scans for name, callee in scan.via if callee in helpers}
    strong = (subscripts & moved & wrapped) | (subscripts & givers)
    # Wrapped here, used in another unit: only where there is a wrap that can be nothing else.
    strong |= {
        name
        for scan in scans
        for name in scan.moved & scan.turned
        if name[0] == "member" or ":" not in name[1]
    }
    # The storage is the caller's, who gets the slot.
    strong |= {name for scan in scans for name in scan.slots if name[0] == "member"} & moved
    owners = {name[1] for name in strong if name[0] == "member"}
    indices = strong | {name for scan in scans for name in scan.stored if name[0] == "member" and name[1] in owners}
    walked = {array for scan in scans for array, name in scan.indexed if name in strong}
    kept = {
        number
        for number, scan in enumerate(scans)
        if scan.subscripts & indices or scan.stored & indices or scan.arrays & walked or scan.structs & owners
    }
    asked = {callee for scan in scans for name, callee in scan.via if name in indices}
    asked |= {name[1] for name in strong if name[0] == "call"}
    kept |= _callers(functions, scans, kept)
    for number, (function, scan) in enumerate(zip(functions, scans, strict=True)):
        tells = (scan.reads | scan.compared | scan.emptied) & indices
        if len(function.blocks) <= SMALL and (function.name in asked or tells):
            kept.add(number)
    return tuple(functions[number] for number in sorted(kept))


def _callers(functions: Sequence[Function], scans: list[_Scan], kept: set[int]) -> set[int]:
    """The callers, to some levels, of static functions and of those that subscript with a parameter: what they check,
    their callees need not check again."""
    by_name: dict[str, list[int]] = defaultdict(list)
    for number, (function, scan) in enumerate(zip(functions, scans, strict=True)):
        if function.static or any(name[0] == "parameter" for name in scan.subscripts):
            by_name[function.name].append(number)
    callers: dict[int, list[int]] = defaultdict(list)
    for number, scan in enumerate(scans):
        for name in scan.calls:
            for callee in by_name.get(name, ()):
                callers[callee].append(number)
    found: set[int] = set()
    edge = kept
    for _ in range(LEVELS):
        edge = {
            caller
            for number in edge
            for caller in callers[number]
            if caller not in kept and caller not in found and len(functions[caller].blocks) <= LARGE
        }
        found |= edge
    return found


# ---------------------------------------------------------------------------------------------------------- one look


@dataclass(slots=True)
class _Look:
    """A look in progress: which lasting integers each local variable is made of, which one each local pointer refers
    to, and which arrays it leads into."""

    scan: _Scan
    refers: dict[str, _Name] = field(default_factory=dict)
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
                    look.scan.turns = True
                    _expr(look, value)
                    _compare(look, value)
                case Switch(value=value):
                    _expr(look, value)
                case Return(value=result) if result is not None:
                    look.scan.turns = look.scan.turns or _reduced(result)
                    if _reduced(result, at_run_time=True):
                        look.scan.slots.update(_sources(look, result))
                    _read(look, result)
                    _expr(look, result)
    scan = look.scan
    # What is moved, compared with an end and set to the other end in one function can be wrapped by the comparison;
    # so can what is moved up and down, as ``i += 1; if (i >= N) i -= N;`` does.
    scan.wrapped |= scan.moved & ((scan.compared & scan.reset) | (scan.emptied & scan.filled))
    scan.wrapped |= scan.compared & scan.ups & scan.downs
    scan.wrapped |= scan.turned & scan.moved
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
    name = _known(look, place)
    if name is None:
        return
    made_of = frozenset(_sources(look, value))
    look.scan.stored.add(name)
    _constant(look, (name,), value)
    look.scan.via |= {(name, other[1]) for other in made_of if other[0] == "call"}
    if made_of and _reduced(value):
        look.scan.turns = True
        look.scan.turned.add(name)
    if made_of and _moves(look, value):
        look.scan.moved.add(name)
        (look.scan.downs if _falls(value) else look.scan.ups).add(name)
    elif made_of:
        look.scan.moved |= made_of & look.scan.stored


def _constant(look: _Look, names: Iterable[_Name], value: Expr) -> None:
    known = fold(value)
    if known is not None:
        (look.scan.reset if known in (0, 1) else look.scan.filled).update(names)


def _copy(look: _Look, variable: Variable, value: Expr) -> None:
    made_of = frozenset(_sources(look, value))
    _constant(look, look.made_of.get(variable.identity, ()), value)
    if _reduced(value):
        look.scan.reduced.update(made_of)
        look.scan.turns = True
    if made_of:
        look.made_of[variable.identity] = look.made_of.get(variable.identity, frozenset()) | made_of
    if _moves(look, value):
        look.sums.add(variable.identity)
    if isinstance(variable.type, PointerType):
        if isinstance(value, AddressOf) and isinstance(value.place.type, IntType):
            name = _name(value.place)
            if name is not None and name[-1] != "[]":
                look.refers[variable.identity] = name
        elif isinstance(value, Load) and isinstance(value.place, VariablePlace):
            other = look.refers.get(value.place.variable.identity)
            if other is not None:
                look.refers[variable.identity] = other
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
                if isinstance(call.callee, FunctionName):
                    look.scan.via.add((name, call.callee.name))
                # An atomic store: the new value stands beside the address.
                if any(_reduced(other) and name in _sources(look, other) for other in call.arguments):
                    look.scan.turned.add(name)
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
            names = set(_sources(look, left)) | set(_sources(look, right))
            empty = 0 in (fold(left), fold(right))
            (look.scan.emptied if empty else look.scan.compared).update(names)
        case Unary(operand=operand) | Cast(operand=operand):
            _compare(look, operand)
        case Load():
            look.scan.emptied.update(_sources(look, expr))


def _read(look: _Look, expr: Expr) -> None:
    """Note what a function tells its caller of lasting integers."""
    look.scan.reads.update(_sources(look, expr))
    match expr:
        case Binary(left=left, right=right):
            _read(look, left)
            _read(look, right)
        case Unary(operand=operand) | Cast(operand=operand):
            _read(look, operand)


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


def _known(look: _Look, place: PlaceExpr) -> _Name | None:
    """What lasting integer a place is, also where a local pointer leads to it."""
    match place:
        case DerefPlace(pointer=Load(place=VariablePlace(variable=variable))) if not variable.lasting:
            return look.refers.get(variable.identity)
    return _name(place)


def _sources(look: _Look, expr: Expr) -> Iterator[_Name]:
    match expr:
        case Load(place=VariablePlace(variable=variable)) if not variable.lasting:
            yield from look.made_of.get(variable.identity, ())
            if variable.storage == "parameter" and isinstance(variable.type, IntType):
                yield "parameter", variable.identity
        case Load(place=place, type=IntType() | UnknownType()):
            name = _known(look, place)
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
    """Whether something is added on the way to the value."""
    match expr:
        case Cast(operand=operand):
            return _moves(look, operand)
        case Binary(op="+" | "-"):
            return True
        case Binary(op="%" | "&", left=left, right=right):
            return _moves(look, left) or _moves(look, right)
        case Load(place=VariablePlace(variable=variable)) if not variable.lasting:
            return variable.identity in look.sums
    return False


def _falls(expr: Expr) -> bool:
    while isinstance(expr, Cast):
        expr = expr.operand
    return isinstance(expr, Binary) and expr.op == "-"


def _reduced(expr: Expr, at_run_time: bool = False) -> bool:
    match expr:
        case Cast(operand=operand):
            return _reduced(operand, at_run_time)
        case Binary(op="%", right=right):
            return not at_run_time or fold(right) is None
        case Binary(op="&", left=left, right=right):
            mask = fold(right) if fold(right) is not None else fold(left)
            return mask is None or (0 < mask < 1 << 24 and not at_run_time)
    return False


def _place(look: _Look, place: PlaceExpr) -> None:
    match place:
        case ElementPlace(base=base, index=index):
            found = tuple(_sources(look, index))
            if _reduced(index):
                look.scan.reduced.update(found)
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
            if _reduced(steps):
                look.scan.reduced.update(found)
            look.scan.subscripts.update(found)
            for array in _arrays(look, pointer):
                look.scan.arrays.add(array)
                look.scan.indexed.update((array, name) for name in found)
            _expr(look, pointer)
            _expr(look, steps)
