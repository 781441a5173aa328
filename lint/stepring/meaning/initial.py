"""Initialisers: from braces, designators and strings to one value for each scalar (N1570 6.7.9).

``spread`` walks an initialiser along its type and gives (path, type, expression) for every scalar that it sets; what
it leaves out is zero. Automatic aggregates are zeroed first and then assigned; objects with static storage keep the
list.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

from pycparser import c_ast

from stepring.meaning.builder import Work, emit, int_type
from stepring.meaning.constants import text
from stepring.meaning.expressions import converted, value
from stepring.meaning.fold import fold
from stepring.meaning.models import integer
from stepring.meaning.scope import Scope, find_field, position, size_of
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Call,
    Const,
    CType,
    ElementPlace,
    FunctionName,
    FunctionType,
    InitialValue,
    IntType,
    MemberPlace,
    Object,
    PlaceExpr,
    PointerType,
    StructType,
    TextConst,
    Unknown,
    UnknownType,
    Variable,
    VoidType,
)
from stepring.places import Position

Path: TypeAlias = tuple[str | int, ...]
MOST_ELEMENTS = 1 << 16


@dataclass(slots=True)
class _Spread:
    """What a walk has found: the scalars, and how far an array of unknown length reaches."""

    scope: Scope
    out: list[tuple[Path, CType, Any]]


def spread(scope: Scope, type_: CType, init: Any) -> tuple[list[tuple[Path, CType, Any]], int]:
    """The scalars that an initialiser sets, and the number of elements if ``type_`` is an array."""
    walk = _Spread(scope, [])
    length = _object(walk, type_, (), init)
    return walk.out, length


def initial_length(scope: Scope, type_: CType, init: Any) -> int | None:
    """How many elements an array of unknown length gets from its initialiser."""
    return spread(scope, type_, init)[1] or None


def _object(walk: _Spread, type_: CType, path: Path, init: Any) -> int:
    """One object with its own initialiser (braced or an expression)."""
    if isinstance(type_, ArrayType) and _is_string(init):
        literal = _string(init)
        assert literal is not None
        walk.out.append((path, type_, literal))
        return len(text(literal.value)) + 1
    if isinstance(init, c_ast.InitList):
        items = list(init.exprs or ())
        if isinstance(type_, ArrayType):
            if len(items) == 1 and _is_string(items[0]) and _is_char(type_.element):
                return _object(walk, type_, path, items[0])
            return _array(walk, type_, path, items)
        if isinstance(type_, StructType):
            _struct(walk, type_, path, items)
        elif items:
            _object(walk, type_, path, items[0].expr if isinstance(items[0], c_ast.NamedInitializer) else items[0])
        return 0
    if isinstance(init, c_ast.CompoundLiteral) and isinstance(type_, ArrayType):
        return _object(walk, type_, path, init.init)
    walk.out.append((path, type_, init))
    return 0


def _array(walk: _Spread, type_: ArrayType, path: Path, items: Sequence[Any]) -> int:
    at = 0
    number = 0
    longest = 0
    while number < len(items):
        item = items[number]
        if isinstance(item, c_ast.NamedInitializer):
            first = item.name[0]
            last = at
            expr = getattr(first, "expr", first)  # older parsers give the index itself
            if isinstance(expr, c_ast.FuncCall) and getattr(expr.name, "name", "") == "__stepring_range":
                low, high = (_index(walk, bound) for bound in expr.args.exprs)
                at, last = low or 0, min(high or 0, (low or 0) + MOST_ELEMENTS)
            else:
                at = last = _index(walk, expr) or 0
            for index in range(at, last + 1):
                _designated(walk, type_.element, (*path, index), item.name[1:], item.expr)
            at = last
            number += 1
        elif _elided(walk, type_.element, item):
            number = _elide(walk, type_.element, (*path, at), items, number)
        else:
            _object(walk, type_.element, (*path, at), item)
            number += 1
        at += 1
        longest = max(longest, at)
    return longest


def _struct(walk: _Spread, type_: StructType, path: Path, items: Sequence[Any]) -> None:
    layout = walk.scope.file.structs.get(type_.identity)
    members = layout.fields if layout is not None else ()
    at = 0
    number = 0
    while number < len(items):
        item = items[number]
        if isinstance(item, c_ast.NamedInitializer):
            name = getattr(item.name[0], "name", "")
            chain = [found for _, found in find_field(walk.scope.file.structs, type_.identity, name)]
            if chain:
                at = next((i for i, member in enumerate(members) if member is chain[0] or member == chain[0]), at)
                inner = (*path, *(found.name for found in chain))
                _designated(walk, chain[-1].type, inner, item.name[1:], item.expr)
            number += 1
        elif at >= len(members):
            return
        elif _elided(walk, members[at].type, item):
            number = _elide(walk, members[at].type, (*path, members[at].name), items, number)
        else:
            _object(walk, members[at].type, (*path, members[at].name), item)
            number += 1
        at += 1
        if type_.union and number < len(items) and not isinstance(items[number], c_ast.NamedInitializer):
            return


def _designated(walk: _Spread, type_: CType, path: Path, rest: Sequence[Any], init: Any) -> None:
    """Follow ``.a[2].b`` down to the object it names."""
    for step in rest:
        if isinstance(type_, StructType):
            chain = [
                found for _, found in find_field(walk.scope.file.structs, type_.identity, getattr(step, "name", ""))
            ]
            if not chain:
                return
            path = (*path, *(found.name for found in chain))
            type_ = chain[-1].type
        elif isinstance(type_, ArrayType):
            path = (*path, _index(walk, getattr(step, "expr", step)) or 0)
            type_ = type_.element
    _object(walk, type_, path, init)


def _elided(walk: _Spread, type_: CType, item: Any) -> bool:
    """Whether an item without braces is the first of several for an aggregate (6.7.9p20)."""
    if not isinstance(type_, ArrayType | StructType) or isinstance(item, c_ast.InitList):
        return False
    if isinstance(type_, ArrayType):
        return not (_is_string(item) and _is_char(type_.element))
    if isinstance(item, c_ast.Constant):
        return True
    found: CType = walk.scope.evaluator.type_of(walk.scope, item)
    return not isinstance(found, StructType | UnknownType)


def _elide(walk: _Spread, type_: CType, path: Path, items: Sequence[Any], number: int) -> int:
    """Take as many items as the aggregate needs; returns the number of the first one left."""
    parts: list[tuple[str | int, CType]] = []
    if isinstance(type_, ArrayType):
        parts = [(index, type_.element) for index in range(min(type_.length or 0, MOST_ELEMENTS))]
    elif isinstance(type_, StructType):
        layout = walk.scope.file.structs.get(type_.identity)
        members = layout.fields if layout is not None else ()
        parts = [(member.name, member.type) for member in (members[:1] if type_.union else members)]
    if not parts:
        return number + 1
    for name, part in parts:
        if number >= len(items) or isinstance(items[number], c_ast.NamedInitializer):
            break
        if _elided(walk, part, items[number]):
            number = _elide(walk, part, (*path, name), items, number)
        else:
            _object(walk, part, (*path, name), items[number])
            number += 1
    return number


def _index(walk: _Spread, node: Any) -> int | None:
    found = walk.scope.evaluator.constant(walk.scope, node)
    return fold(found) if found is not None else None


def _string(node: Any) -> Any:
    return node if isinstance(node, c_ast.Constant) and node.type == "string" else None


def _is_string(node: Any) -> bool:
    return _string(node) is not None


def _is_char(type_: CType) -> bool:
    return isinstance(type_, IntType) and type_.width <= 32


def initialise(work: Work, target: PlaceExpr, init: Any) -> None:
    """Emit the stores that give an automatic object its initial value."""
    at = position(init, work.at)
    type_ = target.type
    whole = isinstance(type_, ArrayType | StructType) and (isinstance(init, c_ast.InitList) or _is_string(init))
    if not whole:
        if isinstance(init, c_ast.InitList):
            items = list(init.exprs or ())
            if not items:
                emit(work, Assign(target, converted(work, Const(0, int_type(work)), type_), at, initial=True))
                return
            init = items[0]
        emit(work, Assign(target, converted(work, value(work, init), type_), at, initial=True))
        return
    pointer = AddressOf(target, PointerType(type_, work.model.pointer))
    size = size_of(work.scope.file.structs, type_)
    size_type = integer(work.model, work.model.size_type)
    length = Const(size, size_type) if size is not None else Unknown(size_type, "a size")
    byte = PointerType(VoidType(), work.model.pointer)
    emit(
        work,
        Call(
            FunctionName("memset", FunctionType(byte, (byte, int_type(work), size_type))),
            (converted(work, pointer, byte), Const(0, int_type(work)), length),
            None,
            at,
        ),
    )
    for path, scalar, node in spread(work.scope, type_, init)[0]:
        where = follow(work.scope, target, path)
        here = position(node, at)
        if where is None:
            continue
        if isinstance(scalar, ArrayType):
            letters = text(node.value)
            count = min(len(letters) + 1, scalar.length or len(letters) + 1)
            source = TextConst(letters, PointerType(scalar.element, work.model.pointer))
            goal = converted(work, AddressOf(where, PointerType(scalar.element, work.model.pointer)), byte)
            copy = FunctionName("memcpy", FunctionType(byte, (byte, byte, size_type)))
            emit(work, Call(copy, (goal, source, Const(count, size_type)), None, here))
        else:
            emit(work, Assign(where, converted(work, value(work, node), scalar), here, initial=True))


def follow(scope: Scope, target: PlaceExpr, path: Path) -> PlaceExpr | None:
    """The place that a path leads to from an object."""
    model = scope.file.model
    for step in path:
        if isinstance(step, int) and isinstance(target.type, ArrayType):
            target = ElementPlace(target, Const(step, integer(model, "int")), target.type.element)
        elif isinstance(step, str) and isinstance(target.type, StructType):
            layout = scope.file.structs.get(target.type.identity)
            found = layout.field(step) if layout is not None else None
            if found is None:
                return None
            target = MemberPlace(target, target.type.identity, step, found.type, found.volatile)
        else:
            return None
    return target


def declare_static(work: Work, variable: Variable, init: Any, at: Position) -> Object:
    """An object with static storage and the scalars that its initialiser sets."""
    if init is None:
        return Object(variable, (), at)
    values = []
    for path, scalar, node in spread(work.scope, variable.type, init)[0]:
        here = position(node, at)
        if isinstance(scalar, ArrayType):
            literal = TextConst(text(node.value), PointerType(scalar.element, work.model.pointer))
            values.append(InitialValue(path, literal, here))
        else:
            found = work.scope.evaluator.constant(work.scope, node)
            settled = converted(work, found, scalar) if found is not None else Unknown(scalar, "not a constant")
            values.append(InitialValue(path, settled, here))
    return Object(variable, tuple(values), at)
