"""What blocks and functions may store into, by the keys of memory: what a loop or a call leaves unknown.

Read off the text, callees with a body included; a call of code that is not known may store into everything.

A pointer that is only a name for one place, as the macros for atomic loads and stores declare one, is read as that
place: its address goes nowhere else.
"""

from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

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
    FunctionName,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerType,
    Statement,
    StructType,
    VariablePlace,
)
from stepring.paths.symbolic_types import Around
from stepring.shapes.ring_keys import Key, inner_structs
from stepring.values.library import CONTRACTS
from stepring.values.scan import expressions_of, inside_place, places_of, walk_deep


@dataclass(slots=True)
class Writes:
    """``local``: identities of the function's own variables; ``keys``: memory; ``pointers``: through a pointer to some
    scalar; ``calls``: bodies that are laid out; ``everything``: code that is not known is called."""

    local: set[str] = field(default_factory=set)
    keys: set[Key] = field(default_factory=set)
    pointers: bool = False
    calls: bool = False
    everything: bool = False


_names: dict[int, tuple[Function, dict[str, PlaceExpr]]] = {}


def names_of(function: Function) -> Mapping[str, PlaceExpr]:
    """The function's pointers that are only names for a lasting integer, by their identities, with that place.

    Such a pointer is set once, where it is declared, to an address without a cast, and used for nothing but to load and
    store through it. So whatever it leads to is known wherever it is used, and nobody else learns the address.
    """
    known = _names.get(id(function))
    if known is None or known[0] is not function:
        if len(_names) > 2048:
            _names.clear()
        known = _names[id(function)] = (function, _find_names(function))
    return known[1]


def _find_names(function: Function) -> dict[str, PlaceExpr]:
    targets: dict[str, PlaceExpr] = {}
    assigned: Counter[str] = Counter()
    loaded: Counter[str] = Counter()
    through: Counter[str] = Counter()
    taken: set[str] = set()
    for block in function.blocks:
        for step in (*block.statements, block.terminator):
            places = list(places_of(step)) if step is not block.terminator else []  # type: ignore[arg-type]
            if isinstance(step, Assign) and isinstance(step.place, VariablePlace) and step.initial:
                value = step.value
                if isinstance(value, AddressOf) and _key(value.place) and isinstance(value.place.type, IntType):
                    targets[step.place.variable.identity] = value.place
            for place in places:
                if isinstance(place, VariablePlace):
                    assigned[place.variable.identity] += 1
            expressions = [*expressions_of(step), *(inner for place in places for inner in inside_place(place))]
            parts = [part for expression in expressions for part in walk_deep(expression)]
            for part in parts:
                if isinstance(part, Load) and isinstance(part.place, VariablePlace):
                    loaded[part.place.variable.identity] += 1
                elif isinstance(part, AddressOf) and isinstance(_base(part.place), VariablePlace):
                    taken.add(_base(part.place).variable.identity)  # type: ignore[union-attr]
            for place in (*places, *(part.place for part in parts if isinstance(part, Load))):
                name = _named(place)
                if name is not None:
                    through[name] += 1
    return {
        name: target
        for name, target in targets.items()
        if assigned[name] == 1 and loaded[name] == through[name] and name not in taken
    }


def _named(place: PlaceExpr) -> str | None:
    """The variable that a place is reached through: ``*p`` and nothing more."""
    if isinstance(place, DerefPlace) and isinstance(place.pointer, Load):
        inner = place.pointer.place
        if isinstance(inner, VariablePlace) and not inner.variable.lasting:
            return inner.variable.identity
    return None


def _base(place: PlaceExpr) -> PlaceExpr:
    while isinstance(place, MemberPlace | ElementPlace):
        place = place.base
    return place


def block_writes(around: Around, function: Function, blocks: Iterable[int]) -> Writes:
    """What some blocks of a function may store into."""
    found = Writes()
    for block in sorted(blocks):
        for statement in function.blocks[block].statements:
            _statement(around, function, statement, found, frozenset((function.identity,)))
    return found


def own_writes(around: Around, function: Function, *, clears: bool = True) -> Writes:
    """What a function's own text stores into, callees left out; without ``clears`` null pointers that it stores too."""
    found = Writes()
    for block in function.blocks:
        for statement in block.statements:
            if not clears and isinstance(statement, Assign) and _is_null(statement.value):
                continue
            if not isinstance(statement, Call) or around.resolve(function, _name_of(statement)) is None:
                _statement(around, function, statement, found, frozenset((function.identity,)))
    return found


def _is_null(value: Expr) -> bool:
    if not isinstance(value.type, PointerType):
        return False
    while isinstance(value, Cast):
        value = value.operand
    return isinstance(value, Const) and value.value == 0


def _name_of(call: Call) -> str:
    return call.callee.name if isinstance(call.callee, FunctionName) else ""


def function_writes(around: Around, function: Function, inside: frozenset[str] = frozenset()) -> Writes:
    """What a function may store into."""
    found = Writes()
    if function.identity in inside or len(inside) > 8:
        found.everything = True
        return found
    for block in function.blocks:
        for statement in block.statements:
            _statement(around, function, statement, found, inside | {function.identity})
    if found.pointers:
        found.keys |= around.exposed
    return found


def _statement(around: Around, function: Function, statement: Statement, found: Writes, inside: frozenset[str]) -> None:
    match statement:
        case Assign(place=place):
            _place(around, function, place, found)
        case Begin(variable=variable):
            found.local.add(variable.identity)
        case Clobber(places=places):
            for place in places:
                _place(around, function, place, found)
        case Call(callee=callee, arguments=arguments, result=result):
            if result is not None:
                _place(around, function, result, found)
            _call(around, function, callee, arguments, found, inside)


def _call(
    around: Around, function: Function, callee: Expr, arguments: tuple[Expr, ...], found: Writes, inside: frozenset[str]
) -> None:
    name = callee.name if isinstance(callee, FunctionName) else ""
    body = around.resolve(function, name) if name else None
    plain = name.removeprefix("__builtin_").removeprefix("__builtin___").removesuffix("_chk")
    contract = CONTRACTS.get(name) or CONTRACTS.get(plain)
    if body is not None:
        inner = function_writes(around, body, inside)
        found.keys |= inner.keys
        found.pointers = found.pointers or inner.pointers
        found.everything = found.everything or inner.everything
        found.calls = True
        return
    if contract is None:
        found.everything = True
        return
    for number, argument in enumerate(arguments):
        if number in contract.writes or (contract.onward is not None and number >= contract.onward):
            inner_ = argument
            while isinstance(inner_, Cast):
                inner_ = inner_.operand
            to = inner_.type.to if isinstance(inner_.type, PointerType) else None
            while isinstance(to, ArrayType):
                to = to.element
            found.pointers = True
            place = getattr(inner_, "place", None)
            if isinstance(to, StructType):
                _struct(around, to.identity, found)
            elif place is not None and type(inner_).__name__ == "AddressOf":
                _place(around, function, place, found)


def _place(around: Around, function: Function, place: PlaceExpr, found: Writes) -> None:
    name = _named(place)
    if name is not None:
        place = names_of(function).get(name, place)
    base: PlaceExpr = place
    while isinstance(base, MemberPlace | ElementPlace):
        if isinstance(base, MemberPlace):
            layout = around.structs.get(base.struct)
            if layout is None or layout.union:
                _struct(around, base.struct, found)
        base = base.base
    if isinstance(place.type, StructType):
        _struct(around, place.type.identity, found)
    match place:
        case VariablePlace(variable=variable):
            if variable.lasting:
                found.keys.add(("var", variable.identity))
            else:
                found.local.add(variable.identity)
        case DerefPlace():
            if not isinstance(place.type, StructType):
                found.pointers = True
        case MemberPlace() | ElementPlace():
            key = _key(place)
            if key is None:
                found.pointers = True
            else:
                found.keys.add(key)
                _array(place.type, key, found)
    if isinstance(base, VariablePlace) and not base.variable.lasting:
        found.local.add(base.variable.identity)


def _array(type_: CType, key: Key, found: Writes) -> None:
    while isinstance(type_, ArrayType):
        key, type_ = (*key, "[]"), type_.element
        found.keys.add(key)


def _key(place: PlaceExpr) -> Key | None:
    match place:
        case MemberPlace(struct=struct, name=name):
            return ("member", struct, name)
        case ElementPlace(base=base):
            inner = _key(base)
            return (*inner, "[]") if inner is not None else None
        case VariablePlace(variable=variable) if variable.lasting:
            return ("var", variable.identity)
    return None


def _struct(around: Around, identity: str, found: Writes) -> None:
    for name in inner_structs(identity, around.structs):
        layout = around.structs.get(name)
        for member in layout.fields if layout is not None else ():
            key: Key = ("member", name, member.name)
            found.keys.add(key)
            _array(member.type, key, found)
