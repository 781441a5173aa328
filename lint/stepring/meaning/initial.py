"""Initialisers: from braces, designators and strings to one value for each scalar (N1570 6.7.9).

``spread`` walks an initialiser along its type and gives (path, type, expression) for every scalar that it sets; what
it leaves out is zero. Automatic aggregates are zeroed first and then assigned; objects with static storage keep the
list.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

from pycparser import c_ast

from stepring.meaning.builder import Work, emit, int_type
from stepring.meaning.constants import text
from stepring.meaning.fold import fold
from stepring.meaning.lowering import converted, value
from stepring.meaning.models import integer
from stepring.meaning.scope import Scope, find_field, position, size_of
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Call,
    Clobber,
    Const,
    CType,
    ElementPlace,
    Field,
    FunctionName,
    FunctionType,
    InitialValue,
    IntType,
    MemberPlace,
    Object,
    PlaceExpr,
    PointerType,
    StructLayout,
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
        if isinstance(type_, ArrayType) and len(items) == 1 and _is_string(items[0]) and _is_char(type_.element):
            return _object(walk, type_, path, items[0])
        if isinstance(type_, ArrayType | StructType):
            return _fill(walk, type_, path, items, 0, 0, braced=True)[1]
        if items:
            _object(walk, type_, path, items[0].expr if isinstance(items[0], c_ast.NamedInitializer) else items[0])
        return 0
    if isinstance(init, c_ast.CompoundLiteral) and isinstance(type_, ArrayType):
        return _object(walk, type_, path, init.init)
    walk.out.append((path, type_, init))
    return 0


def _parts(walk: _Spread, type_: CType) -> tuple[Sequence[tuple[str | int, CType]], int]:
    """An aggregate's members with their types, or one stand-in for an array's elements; and how many there are.

    A union has one: the first, unless a designator names another.
    """
    if isinstance(type_, ArrayType):
        count = MOST_ELEMENTS if type_.length is None else min(type_.length, MOST_ELEMENTS)
        return ((0, type_.element),), count
    layout = walk.scope.file.structs.get(type_.identity) if isinstance(type_, StructType) else None
    members = tuple((member.name, member.type) for member in layout.fields) if layout is not None else ()
    return members, min(1, len(members)) if layout is not None and layout.union else len(members)


def _fill(
    walk: _Spread, type_: CType, path: Path, items: Sequence[Any], number: int, at: int, *, braced: bool
) -> tuple[int, int]:
    """Give an aggregate's parts from part ``at`` on the items from ``number`` on (6.7.9p17 to p20).

    Without braces of its own it takes as many as it needs and leaves designators to the list around it. Gives the
    number of the first item left, and the highest part reached plus one.
    """
    parts, count = _parts(walk, type_)
    longest = at
    while number < len(items):
        item = items[number]
        if isinstance(item, c_ast.NamedInitializer):
            if not braced:
                break
            number, at = _designated(walk, type_, path, _steps(walk, type_, item.name), item.expr, items, number)
        elif at >= count:
            if not braced:
                break
            return len(items), longest  # more items than parts: C forbids it, compilers drop them
        else:
            name, part = parts[0] if isinstance(type_, ArrayType) else parts[at]
            inner = (*path, at if isinstance(type_, ArrayType) else name)
            if _elided(walk, part, item):
                before = number
                number, _ = _fill(walk, part, inner, items, number, 0, braced=False)
                number = max(number, before + 1)
            else:
                _object(walk, part, inner, item)
                number += 1
            at += 1
        longest = max(longest, at)
    return number, longest


def _steps(walk: _Spread, type_: CType, designators: Sequence[Any]) -> list[tuple[int, int]]:
    """Designators as (first, last) numbers of parts, level by level; unnamed members on the way are levels too."""
    steps: list[tuple[int, int]] = []
    structs = walk.scope.file.structs
    for designator in designators:
        expr = getattr(designator, "expr", designator)  # older parsers give the index itself
        if isinstance(type_, StructType):
            for owner, found in find_field(structs, type_.identity, getattr(designator, "name", "")):
                at = structs[owner].fields.index(found)
                steps.append((at, at))
                type_ = found.type
        elif isinstance(type_, ArrayType):
            if isinstance(expr, c_ast.FuncCall) and getattr(expr.name, "name", "") == "__stepring_range":
                low, high = (_index(walk, bound) or 0 for bound in expr.args.exprs)
                steps.append((low, min(high, low + MOST_ELEMENTS)))
            else:
                low = _index(walk, expr) or 0
                steps.append((low, low))
            type_ = type_.element
    return steps


def _designated(
    walk: _Spread,
    type_: CType,
    path: Path,
    steps: Sequence[tuple[int, int]],
    init: Any,
    items: Sequence[Any],
    number: int,
) -> tuple[int, int]:
    """Initialise what designators lead to, then go on behind it inside the aggregates passed through (6.7.9p17).

    Gives the number of the first item left and the part of ``type_`` to go on with.
    """
    if not steps:
        return number + 1, 0
    parts, count = _parts(walk, type_)
    first, last = steps[0]
    following = number + 1
    for at in range(first, last + 1):
        name, part = parts[0] if isinstance(type_, ArrayType) else parts[at]
        inner = (*path, at if isinstance(type_, ArrayType) else name)
        if len(steps) == 1:
            _object(walk, part, inner, init)
            continue
        following, onward = _designated(walk, part, inner, steps[1:], init, items, number)
        if at == last:
            following, _ = _fill(walk, part, inner, items, following, onward, braced=False)
    union = isinstance(type_, StructType) and type_.union
    return following, count if union else last + 1


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
        if isinstance(scalar, ArrayType) and not _is_string(node):
            emit(work, Clobber((where,), "an initialiser that could not be read", here))
        elif isinstance(scalar, ArrayType):
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
    for number, step in enumerate(path):
        if isinstance(step, int) and isinstance(target.type, ArrayType):
            target = ElementPlace(target, Const(step, integer(model, "int")), target.type.element)
        elif isinstance(step, str) and isinstance(target.type, StructType):
            layout = scope.file.structs.get(target.type.identity)
            found = layout.field(step) if layout is not None else None
            if step == "" and layout is not None:
                found = unnamed_member(scope.file.structs, layout, path[number + 1 :])
            if found is None:
                return None
            target = MemberPlace(target, target.type.identity, step, found.type, found.volatile)
        else:
            return None
    return target


def unnamed_member(structs: Mapping[str, StructLayout], layout: StructLayout, rest: Path) -> Field | None:
    """The unnamed member through which the rest of a path leads: names below several are distinct (6.7.2.1p13)."""
    name = next((step for step in rest if isinstance(step, str) and step), "")
    chain = list(find_field(structs, layout.identity, name))
    return chain[0][1] if chain else layout.field("")


def declare_static(work: Work, variable: Variable, init: Any, at: Position) -> Object:
    """An object with static storage and the scalars that its initialiser sets."""
    if init is None:
        return Object(variable, (), at)
    values = []
    for path, scalar, node in spread(work.scope, variable.type, init)[0]:
        here = position(node, at)
        if isinstance(scalar, ArrayType) and not _is_string(node):
            # A macro whose header is missing stands where a string or a list should.
            values.append(InitialValue(path, Unknown(scalar, "an initialiser that could not be read"), here))
        elif isinstance(scalar, ArrayType):
            literal = TextConst(text(node.value), PointerType(scalar.element, work.model.pointer))
            values.append(InitialValue(path, literal, here))
        else:
            found = work.scope.evaluator.constant(work.scope, node)
            settled = converted(work, found, scalar) if found is not None else Unknown(scalar, "not a constant")
            values.append(InitialValue(path, settled, here))
    return Object(variable, tuple(values), at)
