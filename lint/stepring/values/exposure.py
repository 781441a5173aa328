"""What a whole program does with addresses: which objects stores through pointers can reach.

Read from the code that was given; what other code does with an address that it is handed is in ``leaks``.
"""

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Call,
    Cast,
    Const,
    CType,
    Expr,
    Function,
    FunctionName,
    IntType,
    Object,
    PointerType,
    StructLayout,
    StructType,
    TextConst,
    VoidType,
)
from stepring.values.addresses import collect_taken, facts_of
from stepring.values.intervals import number_type
from stepring.values.library import CONTRACTS
from stepring.values.scan import expressions_of, inside_place, places_of, walk_deep
from stepring.values.spots import Exposure, Steps
from stepring.values.types import Cell


@dataclass(frozen=True, slots=True)
class Leaks:
    """What is handed to code that was not given: structures (by identity), cells whose address goes there, and whether
    pointers to scalars do that may lead to any cell whose address was taken."""

    structs: frozenset[str]
    cells: frozenset[Cell]
    scalars: bool


def all_expressions(function: Function) -> Iterable[Expr]:
    """Every expression of a function and all their parts, those inside places too."""
    for block in function.blocks:
        for statement in block.statements:
            for expression in expressions_of(statement):
                yield from walk_deep(expression)
            for place in places_of(statement):
                for inner in inside_place(place):
                    yield from walk_deep(inner)
        for expression in expressions_of(block.terminator):
            yield from walk_deep(expression)


def exposure_of(
    functions: Sequence[Function], objects: Sequence[Object], structs: Mapping[str, StructLayout]
) -> Exposure:
    """What the functions and initialisers of a program do with addresses."""
    variables: set[str] = set()
    cells: set[Cell] = set()
    as_bytes: set[str] = set()
    as_void: set[str] = set()
    bytes_from_void = False
    for function in functions:
        facts = facts_of(function)
        lasting = {variable.identity for variable in function.variables if variable.lasting}
        variables |= facts.taken & lasting
        cells |= facts.taken_cells
        handed = library_arguments(function)
        for expression in all_expressions(function):
            if isinstance(expression, Cast) and isinstance(expression.operand.type, PointerType):
                source, target = expression.operand.type.to, expression.type
                if isinstance(source, StructType) and id(expression) not in handed:
                    _note_cast(source, target, as_bytes, as_void)
                if isinstance(source, VoidType) and isinstance(target, PointerType) and _is_byte(target.to):
                    bytes_from_void = True
    for item in objects:
        for initial in item.initial:
            collect_taken(initial.value, variables, cells)
    if bytes_from_void:
        as_bytes |= as_void
    members = {
        identity: tuple(ways_into(StructType(identity, layout.union), structs)) for identity, layout in structs.items()
    }
    for identity in list(as_bytes):
        as_bytes.update(struct for way in members.get(identity, ()) for struct, _, _ in way if struct)
    unions = {
        part.identity
        for layout in structs.values()
        if layout.union
        for member in layout.fields
        if isinstance(part := _element_type(member.type), StructType)
    }
    for identity in list(unions):
        unions.update(struct for way in members.get(identity, ()) for struct, _, _ in way if struct)
    return Exposure(frozenset(variables), frozenset(cells), frozenset(as_bytes), frozenset(unions), members)


def _note_cast(source: StructType, target: CType, as_bytes: set[str], as_void: set[str]) -> None:
    if isinstance(target, PointerType):
        if isinstance(target.to, VoidType):
            as_void.add(source.identity)
        elif number_type(target.to) is not None:
            as_bytes.add(source.identity)
    elif isinstance(target, IntType) and target.name != "_Bool":
        as_bytes.add(source.identity)


def library_arguments(function: Function) -> set[int]:
    """The identities (``id``) of casts that are arguments of C library functions: their effect is known."""
    return {
        id(argument)
        for block in function.blocks
        for statement in block.statements
        if isinstance(statement, Call)
        and isinstance(statement.callee, FunctionName)
        and statement.callee.name in CONTRACTS
        for argument in statement.arguments
    }


def _is_byte(kind: CType) -> bool:
    return isinstance(kind, IntType) and kind.width == 8


def _element_type(kind: CType) -> CType:
    while isinstance(kind, ArrayType):
        kind = kind.element
    return kind


def ways_into(kind: StructType, structs: Mapping[str, StructLayout], depth: int = 6) -> Iterable[Steps]:
    """The ways from a structure to each integer and pointer in it; unions are not entered."""
    layout = structs.get(kind.identity)
    if layout is None or layout.union or depth == 0:
        return
    for member in layout.fields:
        if member.name:
            yield from _onward(((kind.identity, member.name, member.type),), member.type, structs, depth)


def _onward(way: Steps, kind: CType, structs: Mapping[str, StructLayout], depth: int) -> Iterable[Steps]:
    if isinstance(kind, ArrayType):
        yield from _onward((*way, ("", "[]", kind.element)), kind.element, structs, depth)
    elif isinstance(kind, StructType):
        for further in ways_into(kind, structs, depth - 1):
            yield (*way, *further)
    elif number_type(kind) is not None:
        yield way


def leaks_of(
    functions: Sequence[Function],
    structs: Mapping[str, StructLayout],
    known: Callable[[str, Function], bool],
    closed: bool,
) -> Leaks:
    """What is handed to functions that are not ``known``; calls through pointers lead to them too unless ``closed``."""
    leaked: set[str] = set()
    cells: set[Cell] = set()
    scalars = False
    for function in functions:
        for block in function.blocks:
            for statement in block.statements:
                if not isinstance(statement, Call):
                    continue
                if isinstance(statement.callee, FunctionName):
                    name = statement.callee.name
                    if name in CONTRACTS or known(name, function):
                        continue
                elif closed:
                    continue
                for argument in statement.arguments:
                    scalars |= _leak(argument, leaked, cells)
    waiting = list(leaked)
    while waiting:
        for struct in _structs_at(waiting.pop(), structs):
            if struct not in leaked:
                leaked.add(struct)
                waiting.append(struct)
    return Leaks(frozenset(leaked), frozenset(cells), scalars)


def _leak(argument: Expr, leaked: set[str], cells: set[Cell]) -> bool:
    """Note what an argument hands over; True for a pointer to scalars that may lead anywhere."""
    while isinstance(argument, Cast):
        argument = argument.operand
    if isinstance(argument, AddressOf):
        collect_taken(argument, set(), cells)
    if not isinstance(argument.type, PointerType):
        return False
    target = _element_type(argument.type.to)
    if isinstance(target, StructType):
        leaked.add(target.identity)
        return False
    scalar = number_type(target) is not None or isinstance(target, VoidType)
    return scalar and not isinstance(argument, (AddressOf, TextConst, Const))


def _structs_at(identity: str, structs: Mapping[str, StructLayout]) -> Iterable[str]:
    """The structures that lie in a structure or that it points to."""
    layout = structs.get(identity)
    for member in layout.fields if layout is not None else ():
        kind = _element_type(member.type)
        if isinstance(kind, PointerType):
            kind = _element_type(kind.to)
        if isinstance(kind, StructType):
            yield kind.identity
