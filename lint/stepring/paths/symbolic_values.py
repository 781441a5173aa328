"""Expressions and places on a symbolic state: what each evaluates to, and which cells a place means.

Evaluating changes nothing (the IR's expressions are pure); it notes every access through a subscript or a stepped
pointer, for whoever wants to prove that it stays inside.
"""

from dataclasses import dataclass, field

import z3

from stepring.meaning.fold import convert
from stepring.meaning.scope import size_of
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Binary,
    Cast,
    Const,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    FloatConst,
    Function,
    FunctionName,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    StructType,
    TextConst,
    Unary,
    Variable,
    VariablePlace,
    VoidType,
)
from stepring.paths.symbolic_memory import (
    Memories,
    Pointer,
    Start,
    State,
    Stored,
    Target,
    Value,
    added,
    address_mark,
    address_of,
    home_of,
    meet,
    read,
    row_of,
    scaled,
)
from stepring.paths.symbolic_terms import (
    Number,
    Terms,
    Truth,
    as_truth,
    bits,
    chosen,
    compared,
    converted,
    equal,
    is_comparison,
    negated,
    stretch,
)
from stepring.paths.symbolic_types import CUT, FLAG, SET_FRAME, Accessed, AccessKind, Around, Limits, Store, Trace
from stepring.places import Position
from stepring.shapes.ring_keys import Key, inner_structs


@dataclass(slots=True, eq=False)
class Frame:
    """A call that is laid out: ``resident`` are its variables that live in memory."""

    number: int
    function: Function
    chain: tuple[str, ...]
    resident: frozenset[str]


@dataclass(frozen=True, slots=True)
class Spot:
    """Which cells a place means: a variable of a frame (``name``), cells of a key at an address, or not known.

    ``union``: it is part of a union, whose other members change with it.
    """

    name: tuple[int, str] | None
    key: Key | None
    at: Number
    type: CType
    known: bool = True
    union: str = ""


@dataclass(slots=True, eq=False)
class Engine:
    """A run in progress."""

    around: Around
    limits: Limits
    trace: Trace
    merging: bool
    frames: int = 0
    loops: int = 0
    work: int = 0
    cuts: int = 0
    private: bool = False
    doubted: set[tuple[str, int, str]] = field(default_factory=set)

    @property
    def terms(self) -> Terms:
        return self.trace.terms

    @property
    def memories(self) -> Memories:
        return self.trace.memories


def trouble(engine: Engine, reason: str, detail: str) -> None:
    """Note what is not modelled."""
    engine.trace.troubles[reason, detail] = None


def anything(engine: Engine, type_: CType, name: str = "u") -> Value:
    """A value that can be anything."""
    if isinstance(type_, IntType):
        found = engine.terms.unknown(type_.width, name)
        return _ranged(engine, found, type_)
    if isinstance(type_, PointerType):
        return Pointer(engine.terms.unknown(engine.memories.address, name), 0, unit_of(engine, type_))
    return None


def _ranged(engine: Engine, number: Number, type_: IntType) -> Number:
    if type_.name == "_Bool":
        engine.terms.facts.append(compared("<=", number, 1, type_.width, False))
    return number


def unit_of(engine: Engine, type_: CType) -> int | None:
    """The bytes that one step of a pointer type goes."""
    if not isinstance(type_, PointerType):
        return None
    return 1 if isinstance(type_.to, VoidType) else size_of(engine.around.structs, type_.to)


def home(engine: Engine, key: Key, type_: CType) -> int:
    """The fixed address of a named object."""
    return home_of(engine.memories, key, size_of(engine.around.structs, type_))


# ------------------------------------------------------------------------------------------------------------- places


def variable_key(frame: Frame, variable: Variable) -> Key:
    """The key of a variable that lives in memory."""
    if variable.lasting:
        return ("var", variable.identity)
    return ("local", str(frame.number), variable.identity)


def locate(engine: Engine, state: State, frame: Frame, place: PlaceExpr, kind: AccessKind = "address") -> Spot:
    """The cells that a place means; its subscripts are noted as accesses of that kind."""
    match place:
        case VariablePlace(variable=variable):
            if not variable.lasting and variable.identity not in frame.resident:
                engine.trace.types[frame.number, variable.identity] = variable.type
                return Spot((frame.number, variable.identity), None, 0, variable.type)
            key = variable_key(frame, variable)
            if variable.volatile:
                engine.trace.volatile[key] = None
            return Spot(None, key, home(engine, key, variable.type), variable.type)
        case MemberPlace(base=base, struct=struct, name=name, type=type_, volatile=volatile):
            outer = locate(engine, state, frame, base, kind)
            layout = engine.around.structs.get(struct)
            members = [member for member in layout.fields if member.name == name] if layout is not None else []
            if not outer.known or layout is None or len(members) != 1:
                return Spot(None, None, 0, type_, False)
            key = ("member", struct, name)
            if volatile:
                engine.trace.volatile[key] = None
            at = added(engine.memories, outer.at, members[0].offset // 8)
            return Spot(None, key, at, type_, True, outer.union or (struct if layout.union else ""))
        case ElementPlace(base=base, index=index, type=type_, position=position):
            outer = locate(engine, state, frame, base, kind)
            unit = size_of(engine.around.structs, type_)
            steps = steps_of(engine, state, frame, index)
            length = base.type.length if isinstance(base.type, ArrayType) else None
            if outer.key is not None and position is not None:
                note(engine, state, frame, position, kind, (outer.key, length), None, steps, unit, index)
            if not outer.known or unit is None:
                return Spot(None, None, 0, type_, False)
            key = (*(outer.key or ("unnamed",)), "[]")
            at = added(engine.memories, outer.at, scaled(engine.memories, steps, unit))
            return Spot(None, key, at, type_, True, outer.union)
        case DerefPlace(pointer=pointer, type=type_, position=position):
            value = evaluate(engine, state, frame, pointer)
            if not isinstance(value, Pointer):
                return Spot(None, None, 0, type_, False)
            at_ = value.made or position
            if at_ is not None and (value.array is not None or value.source is not None):
                written = pointer.steps if isinstance(pointer, PointerStep) else None
                own = position if position is not None else at_
                note(engine, state, frame, own, kind, value.array, value, value.steps, value.unit, written, at_)
            key_: Key | None = value.key
            known = key_ is not None or isinstance(type_, StructType)
            return Spot(None, key_, address_of(engine.memories, value), type_, known)


def note(
    engine: Engine,
    state: State,
    frame: Frame,
    position: Position,
    kind: AccessKind,
    array: tuple[Key, int | None] | None,
    pointer: Pointer | None,
    first: Number,
    unit: int | None,
    written: Expr | None = None,
    also: Position | None = None,
    bytes_: Number | None = None,
) -> None:
    """Note an access."""
    engine.trace.accesses.append(
        Accessed(
            position,
            also,
            frame.function.name,
            kind,
            array,
            pointer,
            first,
            bytes_,
            unit,
            state.copy(),
            written,
        )
    )


def load(engine: Engine, state: State, spot: Spot, type_: CType) -> Value:
    """What a place holds."""
    if spot.name is not None:
        if spot.name not in state.local:
            state.local[spot.name] = anything(engine, type_, "unset")
        return state.local[spot.name]
    if spot.key is None or not spot.known or spot.union:
        return anything(engine, type_, "loaded")
    if spot.key[0] == "var" and len(spot.key) == 2 and spot.key[1] in engine.around.constants:
        return engine.around.constants[spot.key[1]]
    if isinstance(type_, StructType | ArrayType):
        return None
    meet(engine.memories, spot.key, spot.at)
    value = read(engine.memories, row_of(engine.memories, state, spot.key), spot.at, type_)
    if isinstance(value, Pointer) and value.unit is None:
        value = Pointer(value.at, value.steps, unit_of(engine, type_), value.key, value.array, value.source, value.made)
    if isinstance(type_, IntType):
        if isinstance(value, Pointer | Target) or value is None:
            return anything(engine, type_, "loaded")
        if isinstance(value, int):
            return convert(value, type_)
        return _ranged(engine, value, type_) if not isinstance(value, int) and type_.name == "_Bool" else value
    return value


def store(
    engine: Engine, state: State, frame: Frame, spot: Spot, value: Value, position: Position | None = None
) -> None:
    """Put a value into a place."""
    if spot.name is not None:
        state.local[spot.name] = value
        return
    if spot.union:
        for name in sorted(inner_structs(spot.union, engine.around.structs)):
            spoil_struct(engine, state, name)
        return
    if not spot.known or spot.key is None:
        # A pointer that leads to some scalar: any whose address is taken, but no other (no wild pointers).
        for key in sorted(engine.around.exposed):
            spoil(engine, state, key)
        for key in sorted(state.rows):
            if key[0] == "local" or key[-1] == "[]":
                spoil(engine, state, key)
        return
    meet(engine.memories, spot.key, spot.at)
    engine.memories.types.setdefault(spot.key, spot.type)
    put(engine, state, spot.key, spot.at, value)
    if spot.key[0] != "local" and position is not None:
        engine.trace.stores.append(Store(spot.key, spot.at, position, frame.function.name, state.copy()))


def put(engine: Engine, state: State, key: Key, at: Number, value: Value) -> None:
    """Add a store to a key's memory, and note that it was made."""
    state.rows[key] = Stored(row_of(engine.memories, state, key), at, value)
    if key[0] == "local":
        return
    places = engine.trace.sets.setdefault(key, [])
    if all(address_mark(other) != address_mark(at) for other in places):
        places.append(at)
    _flag(engine, state, key)


def _flag(engine: Engine, state: State, key: Key) -> None:
    mark = (SET_FRAME, "/".join(key))
    engine.trace.types[mark] = FLAG
    state.local[mark] = 1


def cut(engine: Engine, state: State) -> None:
    """Note that a new stretch of the run begins here: that nothing is stored in it yet."""
    engine.cuts += 1
    state.local[CUT] = engine.cuts


def spoil(engine: Engine, state: State, key: Key) -> None:
    """Nothing is known any more of what a key holds."""
    engine.memories.epochs += 1
    state.rows[key] = Start(key, engine.memories.epochs)
    if key[0] != "local":
        engine.trace.spoiled.add(key)
        _flag(engine, state, key)


def spoil_struct(engine: Engine, state: State, struct: str) -> None:
    """Nothing is known any more of what objects of a structure hold."""
    for name in sorted(inner_structs(struct, engine.around.structs)):
        layout = engine.around.structs.get(name)
        for member in layout.fields if layout is not None else ():
            spoil(engine, state, ("member", name, member.name))
            inner: CType = member.type
            key: Key = ("member", name, member.name)
            while isinstance(inner, ArrayType):
                key, inner = (*key, "[]"), inner.element
                spoil(engine, state, key)


def forget(engine: Engine, state: State, frame: Frame, spot: Spot) -> None:
    """A place may hold anything."""
    if isinstance(spot.type, StructType):
        spoil_struct(engine, state, spot.type.identity)
    elif isinstance(spot.type, ArrayType) and spot.key is not None:
        spoil(engine, state, (*spot.key, "[]"))
    else:
        store(engine, state, frame, spot, anything(engine, spot.type, "forgotten"))


# -------------------------------------------------------------------------------------------------------- expressions


def steps_of(engine: Engine, state: State, frame: Frame, expr: Expr) -> Number:
    """An integer as a number of elements."""
    value = evaluate(engine, state, frame, expr)
    if isinstance(expr.type, IntType) and value is not None and not isinstance(value, Pointer | Target):
        return stretch(value, expr.type, engine.memories.step)
    return engine.terms.unknown(engine.memories.step)


def truth(engine: Engine, state: State, frame: Frame, expr: Expr) -> Truth:
    """Whether an expression is not zero."""
    match expr:
        case Binary(left=left, right=right) if is_comparison(expr):
            return _comparison(engine, state, frame, expr, left, right)
        case Unary(op="!", operand=operand):
            return negated(truth(engine, state, frame, operand))
        case Cast(operand=Binary() | Unary(op="!") as operand, type=IntType()) if not isinstance(
            operand, Binary
        ) or is_comparison(operand):
            return truth(engine, state, frame, operand)
    value = evaluate(engine, state, frame, expr)
    if isinstance(value, Pointer):
        return negated(equal(address_of(engine.memories, value), 0, engine.memories.address))
    if isinstance(value, Target):
        return True
    if value is None or not isinstance(expr.type, IntType):
        return negated(equal(engine.terms.unknown(1), 0, 1))
    return negated(equal(value, 0, expr.type.width))


def _comparison(engine: Engine, state: State, frame: Frame, expr: Binary, left: Expr, right: Expr) -> Truth:
    a, b = evaluate(engine, state, frame, left), evaluate(engine, state, frame, right)
    if isinstance(left.type, IntType) and isinstance(right.type, IntType):
        if (
            a is not None
            and b is not None
            and not isinstance(a, Pointer | Target)
            and not isinstance(b, Pointer | Target)
        ):
            return compared(expr.op, a, b, left.type.width, left.type.signed)
    if isinstance(a, Pointer) and isinstance(b, Pointer):
        return _pointers(engine, expr.op, a, b)
    return negated(equal(engine.terms.unknown(1), 0, 1))


def _pointers(engine: Engine, op: str, a: Pointer, b: Pointer) -> Truth:
    memories = engine.memories
    same = equal(a.at, b.at, memories.address)
    by_steps = a.unit == b.unit and a.unit is not None
    if op in ("==", "!="):
        if same is True and by_steps:
            found = equal(a.steps, b.steps, memories.step)
        else:
            found = equal(address_of(memories, a), address_of(memories, b), memories.address)
            if by_steps and same is not False and not isinstance(same, bool):
                # Pointers into one array are told apart by their steps, whatever bytes these are.
                found = as_truth(found)
                alike = as_truth(equal(a.steps, b.steps, memories.step))
                found = _choice(as_truth(same), alike, found)
        return found if op == "==" else negated(found)
    other = negated(equal(engine.terms.unknown(1), 0, 1))
    if not by_steps or same is False:
        return other
    found = compared(op, a.steps, b.steps, memories.step, True)
    return found if same is True else _choice(as_truth(same), as_truth(found), as_truth(other))


def _choice(when: Truth, yes: Truth, no: Truth) -> Truth:
    return z3.If(when, yes, no)


def evaluate(engine: Engine, state: State, frame: Frame, expr: Expr) -> Value:
    """The value of an expression."""
    match expr:
        case Const(value=value, type=PointerType() as type_):
            return Pointer(value, 0, unit_of(engine, type_))
        case Const(value=value):
            return value
        case Load(place=place, type=type_):
            return load(engine, state, locate(engine, state, frame, place, "load"), type_)
        case AddressOf(place=place, type=type_):
            return _address(engine, state, frame, place, type_)
        case FunctionName(name=name):
            return Target(name)
        case Cast(operand=operand, type=type_):
            return _cast(engine, state, frame, operand, type_)
        case PointerStep(pointer=pointer, steps=steps, type=type_, position=position):
            return _step(engine, state, frame, pointer, steps, type_, position)
        case Binary() if is_comparison(expr):
            width = expr.type.width if isinstance(expr.type, IntType) else 32
            return chosen(truth(engine, state, frame, expr), 1, 0, width)
        case Binary(op=op, left=left, right=right, type=IntType() as type_):
            a, b = evaluate(engine, state, frame, left), evaluate(engine, state, frame, right)
            if a is None or b is None or isinstance(a, Pointer | Target) or isinstance(b, Pointer | Target):
                return anything(engine, type_)
            return engine.terms.binary(op, a, b, type_, right.type if isinstance(right.type, IntType) else None)
        case Unary(op="!", type=type_):
            width = type_.width if isinstance(type_, IntType) else 32
            return chosen(truth(engine, state, frame, expr), 1, 0, width)
        case Unary(op=op, operand=operand, type=IntType() as type_):
            a = evaluate(engine, state, frame, operand)
            if a is None or isinstance(a, Pointer | Target):
                return anything(engine, type_)
            return engine.terms.unary(op, a, type_)
        case PointerDistance(left=left, right=right, type=IntType() as type_):
            return _distance(engine, state, frame, left, right, type_)
        case TextConst(text=text, type=type_):
            key: Key = ("text", text)
            at = home(engine, key, ArrayType(IntType("char", 8, True, 1), len(text) + 1))
            return Pointer(at, 0, unit_of(engine, type_) or 1, ("text", text, "[]"), (key, len(text) + 1))
        case FloatConst():
            return None
    _walk(engine, state, frame, expr)
    return anything(engine, expr.type)


def _walk(engine: Engine, state: State, frame: Frame, expr: Expr) -> None:
    """Evaluate the parts of an expression that is not followed itself, for the accesses in it."""
    for name in ("operand", "left", "right", "pointer", "steps"):
        part = getattr(expr, name, None)
        if part is not None:
            evaluate(engine, state, frame, part)


def _address(engine: Engine, state: State, frame: Frame, place: PlaceExpr, type_: CType) -> Value:
    memories = engine.memories
    unit = unit_of(engine, type_)
    decays = isinstance(place.type, ArrayType) and not (
        isinstance(type_, PointerType) and isinstance(type_.to, ArrayType)
    )
    match place:
        case DerefPlace(pointer=pointer) if not decays:
            return evaluate(engine, state, frame, pointer)
        case ElementPlace(base=base, index=index, position=position) if not decays:
            outer = locate(engine, state, frame, base)
            steps = steps_of(engine, state, frame, index)
            length = base.type.length if isinstance(base.type, ArrayType) else None
            if outer.key is not None and position is not None:
                note(engine, state, frame, position, "address", (outer.key, length), None, steps, unit, index)
            if not outer.known or outer.union:
                return anything(engine, type_)
            array = (outer.key, length) if outer.key is not None else None
            key = (*outer.key, "[]") if outer.key is not None else None
            return Pointer(outer.at, steps, unit, key, array, None, position)
    spot = locate(engine, state, frame, place)
    if spot.name is not None or not spot.known or spot.union:
        return anything(engine, type_, "address")
    if decays and isinstance(place.type, ArrayType) and spot.key is not None:
        return Pointer(spot.at, 0, unit, (*spot.key, "[]"), (spot.key, place.type.length))
    return Pointer(spot.at, 0, unit, spot.key if memories is not None else None)


def _cast(engine: Engine, state: State, frame: Frame, operand: Expr, type_: CType) -> Value:
    if isinstance(type_, IntType) and isinstance(operand.type, IntType):
        if isinstance(operand, Binary) and is_comparison(operand):
            return chosen(truth(engine, state, frame, operand), 1, 0, type_.width)
        value = evaluate(engine, state, frame, operand)
        if value is None or isinstance(value, Pointer | Target):
            return anything(engine, type_)
        return converted(value, operand.type, type_)
    value = evaluate(engine, state, frame, operand)
    if isinstance(type_, PointerType):
        if isinstance(value, Target):
            return value
        if isinstance(value, Pointer):
            unit = unit_of(engine, type_)
            if isinstance(type_.to, IntType) and isinstance(operand.type, PointerType):
                if isinstance(operand.type.to, StructType):
                    engine.trace.given["struct", operand.type.to.identity] = frame.function.name
            if unit == value.unit and not _opaque(operand.type, type_):
                return value
            if isinstance(value.steps, int) and value.steps == 0:
                keep = value.key if isinstance(type_.to, VoidType) or _alike(operand.type, type_) else None
                return Pointer(value.at, 0, unit, keep, None, value.source, value.made)
            if isinstance(type_.to, VoidType):
                return value  # it is stepped by nobody before it is converted back
            return Pointer(address_of(engine.memories, value), 0, unit)
        if isinstance(value, int):
            return Pointer(value, 0, unit_of(engine, type_))
        return anything(engine, type_)
    if isinstance(type_, IntType) and isinstance(value, Pointer) and type_.name == "_Bool":
        return chosen(truth(engine, state, frame, operand), 1, 0, type_.width)
    return anything(engine, type_)


def _alike(one: CType, other: CType) -> bool:
    return isinstance(one, PointerType) and isinstance(other, PointerType) and one.to == other.to


def _opaque(one: CType, other: CType) -> bool:
    """Whether a conversion leads from one kind of thing to another of the same size."""
    if not isinstance(one, PointerType) or not isinstance(other, PointerType):
        return True
    if isinstance(one.to, VoidType) or isinstance(other.to, VoidType) or one.to == other.to:
        return False
    return not (isinstance(one.to, IntType) and isinstance(other.to, IntType) and one.to.width == other.to.width)


def _step(
    engine: Engine, state: State, frame: Frame, pointer: Expr, steps: Expr, type_: CType, position: Position | None
) -> Value:
    value = evaluate(engine, state, frame, pointer)
    by = steps_of(engine, state, frame, steps)
    if not isinstance(value, Pointer):
        return anything(engine, type_)
    unit = unit_of(engine, type_)
    if value.unit != unit:
        if not (isinstance(value.steps, int) and value.steps == 0):
            value = Pointer(address_of(engine.memories, value), 0, unit)
        else:
            value = Pointer(value.at, 0, unit, value.key, None, value.source, value.made)
    if isinstance(value.steps, int) and isinstance(by, int):
        total: Number = value.steps + by
    elif isinstance(value.steps, int) and value.steps == 0:
        total = by
    else:
        total = bits(value.steps, engine.memories.step) + bits(by, engine.memories.step)
    key = value.key if value.key is None or value.key[-1] == "[]" else None
    return Pointer(value.at, total, unit, key, value.array, value.source, position or value.made)


def _distance(engine: Engine, state: State, frame: Frame, left: Expr, right: Expr, type_: IntType) -> Value:
    a, b = evaluate(engine, state, frame, left), evaluate(engine, state, frame, right)
    if not isinstance(a, Pointer) or not isinstance(b, Pointer) or a.unit != b.unit or a.unit is None:
        return anything(engine, type_)
    if isinstance(a.steps, int) and isinstance(b.steps, int):
        away: Number = a.steps - b.steps
    else:
        away = bits(a.steps, engine.memories.step) - bits(b.steps, engine.memories.step)
    cut = converted(away, IntType("distance", engine.memories.step, True, 9), type_)
    same = equal(a.at, b.at, engine.memories.address)
    if same is True:
        return cut
    other = engine.terms.unknown(type_.width)
    return other if same is False else chosen(same, cut, other, type_.width)
