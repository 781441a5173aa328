"""A function with its helpers laid out in one graph, so that an index can be followed through all of them.

The one idea: wrap helpers (``next_slot(i)``), accessors and pointer parameters disappear if each call of a small known
function is replaced by the callee's own blocks. Every inlined call gets a frame name of its own, which keeps its
variables apart. What a pointer of the flat function can point to is then settled once (flow-insensitive inclusion, as
in the inclusion-based analyses of pointers), and each subscript of an array that lasts becomes a ``Touch``.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from typing import Literal, TypeAlias

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Begin,
    Binary,
    Branch,
    Call,
    Cast,
    Clobber,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    Jump,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    Return,
    Stop,
    StructType,
    Switch,
    Unary,
    Variable,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.ring_keys import NOTHING, Key, Points, in_local, is_local, place_keys, targets

MAX_DEPTH = 4
MAX_BLOCKS = 700
MAX_CALLEE = 80
TouchKind: TypeAlias = Literal["load", "store", "address"]


@dataclass(slots=True, eq=False)
class Set:
    """Store ``value`` (read in ``frame``) in ``place`` (named in ``place_frame``)."""

    place: PlaceExpr
    place_frame: str
    value: Expr
    frame: str
    position: Position
    function: str


@dataclass(slots=True, eq=False)
class Touch:
    """An access to an array (``storage``) at ``subscript``, which counts from where ``pointer`` stands, if given.

    ``indexed``: the subscript is made from a lasting integer. ``copied``: the address is where a copying function
    stores ``to``, or loads ``from``.
    """

    storage: Key
    element: CType
    pointer: Expr | None
    subscript: Expr
    frame: str
    kind: TouchKind
    position: Position
    function: str
    indexed: bool = False
    copied: Literal["", "to", "from"] = ""


@dataclass(slots=True, eq=False)
class Spoil:
    """Memory that gets the value ``value`` in all its parts, or an unknown one (None).

    ``structs`` are the structures whose members it covers, ``keys`` single objects.
    """

    structs: frozenset[str]
    keys: frozenset[Key]
    value: int | None
    position: Position


@dataclass(slots=True, eq=False)
class Outside:
    """A call that was not inlined; ``known`` says that its body is in the program all the same. ``pointers`` are the
    objects whose address it gets, ``wholes`` the arrays."""

    name: str
    result: PlaceExpr | None
    frame: str
    position: Position
    known: bool
    pointers: frozenset[Key]
    wholes: frozenset[Key] = frozenset()


FlatOp: TypeAlias = Set | Touch | Spoil | Outside


@dataclass(slots=True, eq=False)
class FlatBlock:
    """Operations, then where control goes; ``frame`` is that of the terminator's expression, ``inside`` are the
    identities of the functions that were entered to come here."""

    ops: list[FlatOp] = field(default_factory=list)
    end: Jump | Branch | Switch | Return | Stop = field(default_factory=lambda: Stop("open"))
    frame: str = ""
    function: str = ""
    inside: tuple[str, ...] = ()

    def targets(self) -> tuple[int, ...]:
        """The numbers of the blocks that can come next."""
        match self.end:
            case Jump(target=target):
                return (target,)
            case Branch(then=then, otherwise=otherwise):
                return (then, otherwise)
            case Switch(cases=cases, default=default):
                return (*(case.target for case in cases), default)
        return ()


@dataclass(slots=True, eq=False)
class Flat:
    """A flat function: its blocks, what its pointers point to, the lengths of its arrays (None: not constant), and
    the functions that it holds."""

    function: Function
    blocks: list[FlatBlock]
    points: dict[Key, frozenset[Key]]
    lengths: dict[Key, int | None]
    inlined: set[str]
    complete: bool


Resolve: TypeAlias = Callable[[Function, str], Function | None]
Contained: TypeAlias = Callable[[str], frozenset[str]]


@dataclass(slots=True)
class _Layout:
    """Flattening in progress."""

    resolve: Resolve
    contained: Contained
    blocks: list[FlatBlock] = field(default_factory=list)
    frames: int = 0
    inlined: set[str] = field(default_factory=set)
    complete: bool = True


def flatten(function: Function, resolve: Resolve, contained: Contained, pointers: Points) -> Flat:
    """Lay out a function with its callees.

    ``resolve`` gives the body of a callee by the caller and the name, ``contained`` the structures inside a
    structure, ``pointers`` what lasting pointers are known to point to.
    """
    layout = _Layout(resolve, contained)
    _place(layout, function, "", (function.identity,), None)
    points = _points(layout.blocks, pointers)
    see = _Sight(points)
    for block in layout.blocks:
        block.ops = list(_with_touches(block, see))
    return Flat(function, layout.blocks, points, see.lengths, layout.inlined, layout.complete)


def return_variable(type_: CType) -> Variable:
    """Where an inlined call leaves its result."""
    return Variable("result", "<result>", type_, "temporary")


def _place(layout: _Layout, function: Function, frame: str, stack: tuple[str, ...], back: int | None) -> int:
    """Add a function's blocks; returns lead to ``back``. Gives the number of its first block."""
    base = len(layout.blocks)
    inside = stack[1:]
    layout.blocks.extend(FlatBlock(frame=frame, function=function.name, inside=inside) for _ in function.blocks)
    for number, block in enumerate(function.blocks):
        current = layout.blocks[base + number]
        for statement in block.statements:
            match statement:
                case Assign(place=place, value=value, position=position):
                    current.ops.extend(_assigned(layout, place, value, frame, position, function.name))
                case Call():
                    current = _called(layout, statement, current, function, frame, stack)
                case Clobber(places=places, position=position):
                    for place in places:
                        keys = place_keys(place, frame, {})
                        current.ops.append(Spoil(frozenset(), keys, None, position))
                case Begin():
                    pass
        match block.terminator:
            case Jump(target=target):
                current.end = Jump(base + target)
            case Branch(condition=condition, then=then, otherwise=otherwise, position=position):
                current.end = Branch(condition, base + then, base + otherwise, position)
            case Switch(value=value, cases=cases, default=default, syntax=syntax):
                moved = tuple(
                    type(case)(
                        case.low, case.high, base + case.target, case.position, case.constant, case.name, case.written
                    )
                    for case in cases
                )
                current.end = Switch(value, moved, base + default, syntax)
            case Return(value=result, position=position):
                if back is None:
                    current.end = block.terminator
                else:
                    if result is not None:
                        place = VariablePlace(return_variable(result.type))
                        current.ops.append(Set(place, frame, result, frame, position, function.name))
                    current.end = Jump(back)
            case Stop():
                current.end = block.terminator
    return base


def _assigned(
    layout: _Layout, place: PlaceExpr, value: Expr, frame: str, position: Position, function: str
) -> Iterator[FlatOp]:
    yield Set(place, frame, value, frame, position, function)
    if isinstance(place.type, StructType) and not in_local(place):
        yield Spoil(layout.contained(place.type.identity), frozenset(), None, position)


def _called(
    layout: _Layout, call: Call, current: FlatBlock, function: Function, frame: str, stack: tuple[str, ...]
) -> FlatBlock:
    """A call: the callee's blocks and a block to come back to, or an ``Outside``."""
    name = call.callee.name if isinstance(call.callee, FunctionName) else ""
    body = layout.resolve(function, name) if name else None
    if body is not None and (
        body.identity in stack
        or len(stack) > MAX_DEPTH
        or len(body.blocks) > MAX_CALLEE
        or len(layout.blocks) + len(body.blocks) > MAX_BLOCKS
        or len(body.parameters) > len(call.arguments)
    ):
        layout.complete = False
    elif body is not None:
        layout.frames += 1
        inner = f"{body.name}/{layout.frames}"
        layout.inlined.add(body.identity)
        for parameter, argument in zip(body.parameters, call.arguments, strict=False):
            current.ops.append(Set(VariablePlace(parameter), inner, argument, frame, call.position, function.name))
        after = FlatBlock(frame=frame, function=function.name, inside=current.inside)
        layout.blocks.append(after)
        number = len(layout.blocks) - 1
        current.end = Jump(_place(layout, body, inner, (*stack, body.identity), number))
        if call.result is not None:
            result = VariablePlace(return_variable(call.result.type))
            after.ops.append(
                Set(call.result, frame, Load(result, result.type, call.position), inner, call.position, function.name)
            )
        return after
    current.ops.extend(_outside(layout, call, name, frame, body is not None))
    copies = name.removeprefix("__builtin_").removeprefix("__").removesuffix("_chk") in COPIES
    for number, argument in enumerate(call.arguments):
        kept = (_TARGET if number == 0 else _SOURCE) if copies and number < 2 else _ARGUMENT
        current.ops.append(
            Set(VariablePlace(kept), frame, argument, frame, call.position, function.name)
        )  # keeps the argument's own subscripts in sight
    return current


_ARGUMENT = Variable("argument", "<argument>", PointerType(StructType("<argument>"), 0), "temporary")
_TARGET = replace(_ARGUMENT, identity="<target>")
_SOURCE = replace(_ARGUMENT, identity="<source>")
_KEPT = frozenset((_ARGUMENT.identity, _TARGET.identity, _SOURCE.identity))
COPIES = frozenset(("memcpy", "memmove", "mempcpy", "strcpy", "strncpy", "strlcpy"))
"""Functions of <string.h> (7.24.2) and of that kind: they store at the first argument what stands at the second."""


def _outside(layout: _Layout, call: Call, name: str, frame: str, known: bool) -> Iterator[FlatOp]:
    first = call.arguments[0] if call.arguments else None
    while isinstance(first, Cast):
        first = first.operand
    if name.removeprefix("__builtin_") in ("memset", "bzero") and first is not None:
        value = _constant(call.arguments[1]) if len(call.arguments) > 1 else 0
        yield _spoiled(layout, first, frame, 0 if value == 0 else None, call.position)
        return
    if name.removeprefix("__builtin_") in ("memcpy", "memmove") and first is not None:
        yield _spoiled(layout, first, frame, None, call.position)
        return
    pointers: set[Key] = set()
    wholes: set[Key] = set()
    for argument in call.arguments:
        wholes |= whole_arrays(argument, frame, {})
        while isinstance(argument, Cast):
            argument = argument.operand
        if isinstance(argument, AddressOf):
            pointers |= place_keys(argument.place, frame, {})
    yield Outside(name, call.result, frame, call.position, known, frozenset(pointers), frozenset(wholes))


def whole_arrays(expr: Expr, frame: str, points: Points) -> frozenset[Key]:
    """The lasting array that an expression points to the start of."""
    while isinstance(expr, Cast):
        expr = expr.operand
    if not isinstance(expr, AddressOf):
        return NOTHING
    place = expr.place
    if isinstance(place, ElementPlace) and not isinstance(place.type, ArrayType):
        if _constant(place.index) != 0:
            return NOTHING
        place = place.base
    if not isinstance(place.type, ArrayType):
        return NOTHING
    return frozenset(key for key in place_keys(place, frame, points) if not is_local(key))


def _constant(expr: Expr) -> int | None:
    while isinstance(expr, Cast):
        expr = expr.operand
    return getattr(expr, "value", None)


def _spoiled(layout: _Layout, pointer: Expr, frame: str, value: int | None, position: Position) -> Spoil:
    """What filling the memory at a pointer covers; array elements are data and need no mention."""
    to = pointer.type.to if isinstance(pointer.type, PointerType) else None
    if isinstance(pointer, AddressOf) and isinstance(pointer.place.type, StructType):
        if all(is_local(key) for key in place_keys(pointer.place, frame, {})):
            return Spoil(frozenset(), frozenset(), value, position)
        return Spoil(layout.contained(pointer.place.type.identity), frozenset(), value, position)
    if isinstance(to, StructType):
        return Spoil(layout.contained(to.identity), frozenset(), value, position)
    if isinstance(pointer, AddressOf) and not isinstance(pointer.place.type, ArrayType):
        if not isinstance(pointer.place, ElementPlace):
            return Spoil(frozenset(), place_keys(pointer.place, frame, {}), value, position)
    return Spoil(frozenset(), frozenset(), value, position)


def _points(blocks: list[FlatBlock], pointers: Points) -> dict[Key, frozenset[Key]]:
    """What each pointer variable may point to."""
    found: dict[Key, frozenset[Key]] = dict(pointers)
    stores = [
        op
        for block in blocks
        for op in block.ops
        if isinstance(op, Set) and isinstance(op.place, VariablePlace) and isinstance(op.place.type, PointerType)
    ]
    for _ in range(MAX_DEPTH + 2):
        changed = False
        for op in stores:
            if not isinstance(op.place, VariablePlace) or op.place.variable.lasting:
                continue
            key = ("local", op.place_frame, op.place.variable.identity)
            new = targets(op.value, op.frame, found)
            if key[2] in _KEPT or new <= found.get(key, NOTHING):
                continue
            found[key] = found.get(key, NOTHING) | new
            changed = True
        if not changed:
            break
    return found


def _with_touches(block: FlatBlock, see: "_Sight") -> Iterator[FlatOp]:
    for op in block.ops:
        if isinstance(op, Set):
            kept = op.place.variable.identity if isinstance(op.place, VariablePlace) else ""
            for touch in _touch_values(op.value, _At(see, op.frame, op.position, op.function)):
                if kept in (_TARGET.identity, _SOURCE.identity) and touch.kind == "address":
                    touch.copied = "to" if kept == _TARGET.identity else "from"
                yield touch
            yield from _touch_places(op.place, "store", _At(see, op.place_frame, op.position, op.function))
            if kept in _KEPT:
                continue
        yield op
    match block.end:
        case Branch(condition=value, position=position):
            yield from _touch_values(value, _At(see, block.frame, position, block.function))
        case Switch(value=value, syntax=syntax):
            yield from _touch_values(value, _At(see, block.frame, syntax.position, block.function))
        case Return(position=position) if block.end.value is not None:
            yield from _touch_values(block.end.value, _At(see, block.frame, position, block.function))


@dataclass(slots=True)
class _Sight:
    """What pointers point to, and the arrays seen with their lengths."""

    points: Points
    lengths: dict[Key, int | None] = field(default_factory=dict)


@dataclass(slots=True)
class _At:
    """Where an expression stands."""

    see: _Sight
    frame: str
    position: Position
    function: str


def _touch_places(place: PlaceExpr, kind: TouchKind, at: _At) -> Iterator[Touch]:
    """The subscripts in a place, from the outermost in."""
    match place:
        case ElementPlace(base=base, index=index, type=type_, position=position):
            for key in place_keys(base, at.frame, at.see.points):
                if not is_local(key):
                    _note_length(at.see, key, base.type)
                    yield Touch(key, type_, None, index, at.frame, kind, position or at.position, at.function)
            yield from _touch_values(index, at)
            yield from _touch_places(base, kind, at)
        case MemberPlace(base=base):
            yield from _touch_places(base, kind, at)
        case DerefPlace(pointer=PointerStep(pointer=pointer, steps=steps, position=position), type=type_):
            yield from _through(pointer, steps, type_, kind, position, at)
            yield from _touch_values(steps, at)
            yield from _touch_values(pointer, at)
        case DerefPlace(pointer=pointer):
            yield from _touch_values(pointer, at)  # what it points to was looked at where its address was taken


def _through(
    pointer: Expr, steps: Expr, element: CType, kind: TouchKind, position: Position | None, at: _At
) -> Iterator[Touch]:
    """An access through a pointer, for each array that the pointer may lead into."""
    for key in targets(pointer, at.frame, at.see.points):
        if is_local(key) or key[-1] not in ("[]", "*"):
            continue
        storage = key[:-1] if key[-1] == "[]" else key
        yield Touch(storage, element, pointer, steps, at.frame, kind, position or at.position, at.function)


def _note_length(see: _Sight, key: Key, type_: CType) -> None:
    if isinstance(type_, ArrayType):
        see.lengths.setdefault(key, type_.length)


def _touch_values(expr: Expr, at: _At) -> Iterator[Touch]:
    match expr:
        case Load(place=place, position=position):
            yield from _touch_places(place, "load", at if position is None else replace(at, position=position))
        case AddressOf(place=place):
            for key in place_keys(place, at.frame, at.see.points):
                if not is_local(key):
                    _note_length(at.see, key, place.type)
            yield from _touch_places(place, "address", at)
        case Unary(operand=operand) | Cast(operand=operand):
            yield from _touch_values(operand, at)
        case Binary(left=left, right=right) | PointerDistance(left=left, right=right):
            yield from _touch_values(left, at)
            yield from _touch_values(right, at)
        case PointerStep(pointer=pointer, steps=steps, type=type_, position=position):
            to = type_.to if isinstance(type_, PointerType) else type_
            yield from _through(pointer, steps, to, "address", position, at)
            yield from _touch_values(pointer, at)
            yield from _touch_values(steps, at)
