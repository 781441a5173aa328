"""Statements, calls and bodies on symbolic states.

Two ways through a body share everything else. *Merging* keeps one state where ways meet and cuts each loop at its head:
what the loop changes is forgotten there, so every block is run once and what is found holds for all runs. *Apart* keeps
every path by itself and goes round loops a bounded number of times.

A callee with a body is laid out; a library function does what its contract says; any other call may enter the program
again, so that nothing is known after it of memory that lasts.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import z3

from stepring.meaning.fold import fold
from stepring.meaning.scope import size_of
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Begin,
    Branch,
    Call,
    Cast,
    Clobber,
    CType,
    Expr,
    Function,
    IntType,
    Jump,
    Load,
    PlaceExpr,
    PointerStep,
    PointerType,
    Return,
    Statement,
    StructType,
    Switch,
    Variable,
    VariablePlace,
    VoidType,
)
from stepring.paths.symbolic_graph import Graph, graph_of
from stepring.paths.symbolic_memory import (
    Pointer,
    State,
    Target,
    Value,
    added,
    address_of,
    guard_of,
    is_scalar_type,
    joined,
    meet,
    new_epoch,
    read,
    row_of,
    same_source,
    scaled,
)
from stepring.paths.symbolic_terms import Truth, as_truth, both, chosen, compared, either, equal, negated, stretch
from stepring.paths.symbolic_types import AccessKind, Branching, Point
from stepring.paths.symbolic_values import (
    Engine,
    Frame,
    Spot,
    anything,
    cut,
    evaluate,
    forget,
    locate,
    note,
    put,
    spoil,
    spoil_struct,
    store,
    trouble,
    truth,
)
from stepring.paths.symbolic_writes import Writes, block_writes, function_writes
from stepring.places import Position
from stepring.shapes.ring_keys import Key
from stepring.values.library import CONTRACTS

RESULT = "%returned"
MOST_ELEMENTS = 64


@dataclass(slots=True)
class Exit:
    """A state in which a body returned, and the value."""

    state: State
    value: Value
    position: Position


# --------------------------------------------------------------------------------------------------------- structures


def copy_struct(engine: Engine, state: State, struct: str, to: Spot, source: Spot) -> None:
    """Copy a structure, member by member."""
    layout = engine.around.structs.get(struct)
    if layout is None or layout.union or not to.known or not source.known or to.union or source.union:
        spoil_struct(engine, state, struct)
        return
    for member in layout.fields:
        away = member.offset // 8
        key: Key = ("member", struct, member.name)
        goal, origin = added(engine.memories, to.at, away), added(engine.memories, source.at, away)
        _copy(engine, state, key, member.type, goal, origin)


def _copy(engine: Engine, state: State, key: Key, type_: CType, goal: object, origin: object) -> None:
    memories = engine.memories
    if isinstance(type_, StructType):
        copy_struct(engine, state, type_.identity, Spot(None, None, goal, type_), Spot(None, None, origin, type_))
    elif isinstance(type_, ArrayType):
        size = size_of(engine.around.structs, type_.element)
        inner = (*key, "[]")
        if type_.length is None or type_.length > MOST_ELEMENTS or size is None:
            spoil(engine, state, inner)
            return
        for number in range(type_.length):
            there = added(memories, goal, number * size)
            _copy(engine, state, inner, type_.element, there, added(memories, origin, number * size))
    else:
        meet(memories, key, goal)
        meet(memories, key, origin)
        memories.types.setdefault(key, type_)
        row = row_of(memories, state, key)
        put(engine, state, key, goal, read(memories, row, origin, type_))


def fill_struct(engine: Engine, state: State, struct: str, at: object) -> None:
    """Set every member of a structure to zero."""
    layout = engine.around.structs.get(struct)
    if layout is None or layout.union:
        spoil_struct(engine, state, struct)
        return
    for member in layout.fields:
        key: Key = ("member", struct, member.name)
        _fill(engine, state, key, member.type, added(engine.memories, at, member.offset // 8))


def _fill(engine: Engine, state: State, key: Key, type_: CType, at: object) -> None:
    if isinstance(type_, StructType):
        fill_struct(engine, state, type_.identity, at)
    elif isinstance(type_, ArrayType):
        size = size_of(engine.around.structs, type_.element)
        inner = (*key, "[]")
        if type_.length is None or type_.length > MOST_ELEMENTS or size is None:
            spoil(engine, state, inner)
            return
        for number in range(type_.length):
            _fill(engine, state, inner, type_.element, added(engine.memories, at, number * size))
    else:
        meet(engine.memories, key, at)
        engine.memories.types.setdefault(key, type_)
        zero: Value = (
            0 if isinstance(type_, IntType) else Pointer(0, 0, None) if isinstance(type_, PointerType) else None
        )
        put(engine, state, key, at, zero)


# --------------------------------------------------------------------------------------------------------- statements


def assign(engine: Engine, state: State, frame: Frame, statement: Assign) -> None:
    """Carry out an assignment."""
    place, given = statement.place, statement.value
    if isinstance(place.type, StructType):
        to = locate(engine, state, frame, place, "store")
        if isinstance(given, Load):
            copy_struct(engine, state, place.type.identity, to, locate(engine, state, frame, given.place, "load"))
        else:
            spoil_struct(engine, state, place.type.identity)
        return
    value = evaluate(engine, state, frame, given)
    spot = locate(engine, state, frame, place, "store")
    if isinstance(place.type, ArrayType):
        forget(engine, state, frame, spot)
        return
    store(engine, state, frame, spot, value, statement.position)


def step(engine: Engine, state: State, frame: Frame, statement: Statement) -> list[State]:
    """Carry out a statement; a call can come back in several states, or not at all."""
    match statement:
        case Assign():
            assign(engine, state, frame, statement)
        case Begin(variable=variable):
            _begin(engine, state, frame, variable)
        case Clobber(places=places, why=why):
            for place in places:
                forget(engine, state, frame, locate(engine, state, frame, place, "store"))
            if why != "inline assembly":
                trouble(engine, "not modelled", why)
        case Call():
            return call(engine, state, frame, statement)
    return [state]


def _begin(engine: Engine, state: State, frame: Frame, variable: Variable) -> None:
    if variable.identity not in frame.resident:
        state.local.pop((frame.number, variable.identity), None)
        return
    place = VariablePlace(variable)
    spot = locate(engine, state, frame, place)
    if is_scalar_type(variable.type):
        forget(engine, state, frame, spot)
    elif isinstance(variable.type, ArrayType) and spot.key is not None:
        spoil(engine, state, (*spot.key, "[]"))


# -------------------------------------------------------------------------------------------------------------- calls


def call(engine: Engine, state: State, frame: Frame, statement: Call) -> list[State]:
    """Carry out a call."""
    callee = evaluate(engine, state, frame, statement.callee)
    name = callee.name if isinstance(callee, Target) else ""
    body = engine.around.resolve(frame.function, name) if name else None
    plain = name.removeprefix("__builtin_").removeprefix("__builtin___").removesuffix("_chk")
    contract = CONTRACTS.get(name) or CONTRACTS.get(plain)
    if body is None and contract is not None:
        if not contract.returns:
            return []
        _library(engine, state, frame, statement, plain)
        return [state]
    if body is not None and _fits(engine, frame, body, statement):
        return _lay_out(engine, state, frame, statement, body)
    _leave(engine, state, frame, statement, name or "a function pointer", body)
    return [state]


def _fits(engine: Engine, frame: Frame, body: Function, statement: Call) -> bool:
    if len(frame.chain) > engine.limits.depth or body.identity in frame.chain:
        return False
    if body.identity in engine.around.opaque:
        return False
    if len(body.blocks) > engine.limits.blocks or len(body.parameters) != len(statement.arguments):
        return False
    return not graph_of(body).irreducible


def _lay_out(engine: Engine, state: State, frame: Frame, statement: Call, body: Function) -> list[State]:
    inner = new_frame(engine, body, frame.chain)
    engine.trace.laid_out[body.identity] = None
    for parameter, argument in zip(body.parameters, statement.arguments, strict=True):
        spot = locate(engine, state, inner, VariablePlace(parameter))
        if isinstance(parameter.type, StructType):
            if isinstance(argument, Load):
                source = locate(engine, state, frame, argument.place, "load")
                copy_struct(engine, state, parameter.type.identity, spot, source)
            continue
        store(engine, state, inner, spot, evaluate(engine, state, frame, argument))
    found = []
    for exit_ in run_body(engine, inner, state):
        for mark in [mark for mark in exit_.state.local if mark[0] == inner.number and mark[1] != RESULT]:
            del exit_.state.local[mark]
        exit_.state.local.pop((inner.number, RESULT), None)
        if statement.result is not None:
            _result(engine, exit_.state, frame, statement.result, exit_.value, statement.position)
        found.append(exit_.state)
    return found


def _result(engine: Engine, state: State, frame: Frame, place: PlaceExpr, value: Value, position: Position) -> None:
    spot = locate(engine, state, frame, place, "store")
    if isinstance(place.type, StructType):
        spoil_struct(engine, state, place.type.identity)
    elif value is None:
        forget(engine, state, frame, spot)
    else:
        store(engine, state, frame, spot, value, position)


def _leave(engine: Engine, state: State, frame: Frame, statement: Call, name: str, body: Function | None) -> None:
    """A call of code that is not laid out: it may look at everything, and enter the program again."""
    engine.trace.calls[name] = None
    for argument in statement.arguments:
        value = evaluate(engine, state, frame, argument)
        if isinstance(value, Pointer):
            _give(engine, argument, value, name)
    effect: Writes | None = function_writes(engine.around, body) if body is not None else None
    keys = frozenset(effect.keys) if effect is not None and not effect.everything else None
    engine.trace.points.append(Point("call", state.copy(), statement.position, name, keys=keys))
    if engine.private:
        keys = frozenset()
    if keys is None:
        state.rows = {key: node for key, node in state.rows.items() if key[0] == "local" and not _given(engine, key)}
        state.epoch = new_epoch(engine.memories)
    else:
        for key in sorted(keys):
            spoil(engine, state, key)
        for key in sorted(state.rows):
            if key[0] == "local" and _given(engine, key):
                spoil(engine, state, key)
    cut(engine, state)
    engine.trace.points.append(Point("after call", state.copy(), statement.position, name, keys=keys))
    if statement.result is not None:
        if isinstance(statement.result.type, StructType):
            spoil_struct(engine, state, statement.result.type.identity)
        else:
            forget(engine, state, frame, locate(engine, state, frame, statement.result, "store"))


def _give(engine: Engine, argument: Expr, value: Pointer, name: str) -> None:
    """Note what a callee that is not laid out is given the address of."""
    engine.trace.handed.append((address_of(engine.memories, value), name))
    if value.key is not None and value.key[-1] != "[]":
        engine.trace.given.setdefault(value.key, name)
    inner = argument
    while isinstance(inner, Cast):
        inner = inner.operand
    to = inner.type.to if isinstance(inner.type, PointerType) else None
    while isinstance(to, ArrayType):
        to = to.element
    if isinstance(to, StructType):
        engine.trace.given.setdefault(("argument", to.identity), name)
    if value.key is not None and value.key[0] == "local":
        engine.trace.given.setdefault(value.key, name)


def _given(engine: Engine, key: Key) -> bool:
    """Whether a resident variable's address may be known to code that is not laid out."""
    return True


def _library(engine: Engine, state: State, frame: Frame, statement: Call, name: str) -> None:
    """What a library function does, by its contract."""
    arguments = [evaluate(engine, state, frame, argument) for argument in statement.arguments]
    if name in ("memcpy", "memmove", "memset", "bzero") and len(arguments) >= 2:
        _bytes(engine, state, frame, statement, name, arguments)
        if statement.result is not None:
            _result(engine, state, frame, statement.result, arguments[0], statement.position)
        return
    contract = CONTRACTS.get(name)
    onward = contract.onward if contract is not None else None
    for number, argument in enumerate(statement.arguments):
        value = arguments[number]
        writes = contract is None or number in contract.writes or (onward is not None and number >= onward)
        if writes and isinstance(value, Pointer):
            _written(engine, state, argument, value)
    if statement.result is None:
        return
    value = None
    if name == "expect" or (name == "abs" and arguments):
        value = arguments[0]
        if name == "abs" and isinstance(statement.arguments[0].type, IntType):
            width = statement.arguments[0].type.width
            if value is not None and not isinstance(value, Pointer | Target):
                less = compared("<", value, 0, width, True)
                value = chosen(less, engine.terms.unary("-", value, statement.arguments[0].type), value, width)
    if value is None:
        value = anything(engine, statement.result.type, name)
        type_ = statement.result.type
        if (
            contract is not None
            and contract.low is not None
            and isinstance(type_, IntType)
            and not isinstance(value, Pointer | Target)
        ):
            engine.terms.facts.append(as_truth(compared(">=", value, contract.low, type_.width, type_.signed)))
    _result(engine, state, frame, statement.result, value, statement.position)


def _written(engine: Engine, state: State, argument: Expr, value: Pointer) -> None:
    """What a pointer leads to may hold anything."""
    inner = argument
    while isinstance(inner, Cast):
        inner = inner.operand
    to = inner.type.to if isinstance(inner.type, PointerType) else None
    while isinstance(to, ArrayType):
        to = to.element
    if isinstance(to, StructType):
        spoil_struct(engine, state, to.identity)
    elif value.key is not None:
        spoil(engine, state, value.key)
    else:
        for key in sorted(engine.around.exposed):
            spoil(engine, state, key)
        for key in sorted(state.rows):
            if key[0] == "local" or key[-1] == "[]":
                spoil(engine, state, key)


def _bytes(engine: Engine, state: State, frame: Frame, statement: Call, name: str, arguments: list[Value]) -> None:
    """``memcpy``, ``memmove``, ``memset``: ranges are accessed; a whole structure is copied or cleared."""
    last = statement.arguments[-1]
    number = arguments[-1]
    length = None
    if isinstance(last.type, IntType) and number is not None and not isinstance(number, Pointer | Target):
        length = stretch(number, last.type, engine.memories.step)
    ends: tuple[tuple[AccessKind, int], ...] = (
        (("store", 0), ("load", 1)) if name in ("memcpy", "memmove") else (("store", 0),)
    )
    for kind, at in ends:
        value = arguments[at]
        if isinstance(value, Pointer) and (value.array is not None or value.source is not None):
            position = value.made or statement.position
            some = length if length is not None else engine.terms.unknown(engine.memories.step)
            note(
                engine, state, frame, position, kind, value.array, value, value.steps, value.unit, None,
                statement.position, some,
            )  # fmt: skip
    goal = arguments[0]
    if not isinstance(goal, Pointer):
        trouble(engine, "pointer not resolved", f"{name} writes through a pointer that is not followed")
        return
    struct = _struct_of(statement.arguments[0])
    layout = engine.around.structs.get(struct) if struct is not None else None
    whole = layout is not None and isinstance(length, int) and length == layout.size
    to = _at(engine, goal)
    if struct is not None and whole and name in ("memset", "bzero"):
        if name == "bzero" or fold(statement.arguments[1]) == 0:
            fill_struct(engine, state, struct, to)
            return
    origin = arguments[1]
    if struct is not None and whole and name in ("memcpy", "memmove") and isinstance(origin, Pointer):
        if _struct_of(statement.arguments[1]) == struct:
            kind_ = StructType(struct)
            copy_struct(
                engine, state, struct, Spot(None, None, to, kind_), Spot(None, None, _at(engine, origin), kind_)
            )
            return
    if goal.key is not None and goal.key[-1] != "[]" and struct is None:
        type_ = engine.memories.types.get(goal.key)
        if type_ is not None and name in ("memset", "bzero") and isinstance(length, int):
            if isinstance(type_, IntType) and length * 8 == type_.width and fold(statement.arguments[1]) == 0:
                spot = Spot(None, goal.key, to, type_)
                store(engine, state, frame, spot, 0, statement.position)
                return
    _written(engine, state, statement.arguments[0], goal)


def _at(engine: Engine, pointer: Pointer) -> object:
    return added(engine.memories, pointer.at, scaled(engine.memories, pointer.steps, pointer.unit))


def _struct_of(argument: Expr) -> str | None:
    """The structure that an argument points to, before it became a pointer to anything."""
    inner = argument
    while isinstance(inner, Cast):
        inner = inner.operand
    to = inner.type.to if isinstance(inner.type, PointerType) else None
    if isinstance(inner, AddressOf) and isinstance(inner.place.type, ArrayType):
        return None
    return to.identity if isinstance(to, StructType) else None


# ------------------------------------------------------------------------------------------------------------- bodies


def new_frame(engine: Engine, function: Function, chain: tuple[str, ...]) -> Frame:
    """A frame for a call."""
    engine.frames += 1
    return Frame(engine.frames, function, (*chain, function.identity), graph_of(function).resident)


def run_body(engine: Engine, frame: Frame, state: State) -> list[Exit]:
    """Run a body from a state to its returns."""
    graph = graph_of(frame.function)
    return _merged_body(engine, frame, state, graph) if engine.merging else _apart(engine, frame, state, graph)


def _merged_body(engine: Engine, frame: Frame, start: State, graph: Graph) -> list[Exit]:
    pending: dict[int, list[State]] = {0: [start]}
    exits: list[Exit] = []
    names: dict[int, int] = {}
    heads: dict[int, State] = {}
    for block in graph.order:
        incoming = pending.pop(block, [])
        if not incoming:
            continue
        engine.work += 1
        if engine.work > engine.limits.work:
            trouble(engine, "bound reached", "the function with its callees is too large to be followed")
            return []
        state = joined(engine.memories, incoming, engine.trace.types)
        if block in graph.loops:
            engine.loops += 1
            names[block] = engine.loops
            _head(engine, frame, state, graph.loops[block], block, names[block])
            heads[block] = state.copy()
        states = _statements(engine, frame, state, block)
        for after in states:
            for way, target, exit_ in _ends(engine, frame, after, block):
                if exit_ is not None:
                    exits.append(exit_)
                elif target in names and block in graph.loops.get(target, frozenset()):
                    position = _position_of(frame.function, block)
                    _round(engine, frame, heads[target], way, target)
                    engine.trace.points.append(Point("round", way, position, loop=names[target], frame=frame.number))
                else:
                    pending.setdefault(target, []).append(way)
    return _one_exit(engine, frame, exits)


def _one_exit(engine: Engine, frame: Frame, exits: list[Exit]) -> list[Exit]:
    if len(exits) < 2:
        return exits
    result = frame.function.type.returns
    mark = (frame.number, RESULT)
    engine.trace.types[mark] = result
    scalar = is_scalar_type(result)
    for exit_ in exits:
        if scalar:
            exit_.state.local[mark] = exit_.value
    state = joined(engine.memories, [exit_.state for exit_ in exits], engine.trace.types)
    value = state.local.pop(mark, None) if scalar else None
    return [Exit(state, value, exits[-1].position)]


def _head(engine: Engine, frame: Frame, state: State, body: frozenset[int], block: int, loop: int) -> None:
    """A loop begins: what it changes is forgotten, and what it keeps may be assumed."""
    position = _position_of(frame.function, block)
    writes = block_writes(engine.around, frame.function, body)
    moved = tuple(sorted((frame.number, name) for name in writes.local if name not in frame.resident))
    entered = state.copy()
    engine.trace.points.append(Point("before loop", entered, position, loop=loop, frame=frame.number, moved=moved))
    for mark in moved:
        state.local.pop(mark, None)
        type_ = engine.trace.types.get(mark)
        if type_ is None or not is_scalar_type(type_):
            continue
        before = entered.local.get(mark)
        doubt = (frame.function.identity, block, mark[1])
        if isinstance(before, Pointer) and (before.array or before.source) and doubt not in engine.doubted:
            # It goes on walking what it walks now; where it comes round with another array, this is run again.
            state.local[mark] = replace(before, steps=engine.terms.unknown(engine.memories.step, "walk"))
        else:
            state.local[mark] = anything(engine, type_, "turn")
    if writes.everything:
        state.rows = {}
        state.epoch = new_epoch(engine.memories)
    else:
        named = {("local", str(frame.number), name) for name in writes.local if name in frame.resident}
        for key in sorted({*writes.keys, *named}):
            spoil(engine, state, key)
        if writes.pointers:
            for key in sorted(engine.around.exposed):
                spoil(engine, state, key)
            for key in sorted(state.rows):
                if key[0] == "local" or key[-1] == "[]":
                    spoil(engine, state, key)
        for key in sorted(state.rows):
            # A variable of a frame inside may have been stored into by way of its address.
            if key[0] == "local" and writes.calls:
                spoil(engine, state, key)
    cut(engine, state)
    engine.trace.points.append(Point("loop", state.copy(), position, loop=loop, frame=frame.number, moved=moved))


def _round(engine: Engine, frame: Frame, head: State, way: State, block: int) -> None:
    """Doubt pointers that come round with another array than they began with."""
    for mark, began in head.local.items():
        if not isinstance(began, Pointer) or not (began.array or began.source):
            continue
        now = way.local.get(mark)
        if now is began:
            continue
        alike = (
            isinstance(now, Pointer)
            and equal(now.at, began.at, engine.memories.address) is True
            and now.array == began.array
            and now.unit == began.unit
            and _from_one(now, began)
        )
        if not alike:
            engine.doubted.add((frame.function.identity, block, mark[1]))


def _from_one(one: Pointer, other: Pointer) -> bool:
    return (one.source is None and other.source is None) or same_source(one, other)


def _statements(engine: Engine, frame: Frame, state: State, block: int) -> list[State]:
    states = [state]
    for statement in frame.function.blocks[block].statements:
        after = [found for one in states for found in step(engine, one, frame, statement)]
        if engine.merging and len(after) > 1:
            after = [joined(engine.memories, after, engine.trace.types)]
        states = after
        if not states:
            break
    return states


def _ends(engine: Engine, frame: Frame, state: State, block: int) -> Iterator[tuple[State, int, Exit | None]]:
    """Where a block goes on, each way with its state."""
    end = frame.function.blocks[block].terminator
    match end:
        case Jump(target=target):
            yield state, target, None
        case Branch(condition=condition, then=then, otherwise=otherwise):
            holds = truth(engine, state, frame, condition)
            engine.trace.branches.append(
                Branching(frame.function.identity, block, state.copy(), holds, engine.terms.unknowns)
            )
            for way, target in ((holds, then), (negated(holds), otherwise)):
                if way is not False:
                    yield _with(state, way), target, None
        case Switch():
            yield from _switch(engine, frame, state, end)
        case Return(value=value, position=position):
            given: Value = None
            if value is not None and not isinstance(value.type, StructType | VoidType):
                given = evaluate(engine, state, frame, value)
                if given is None:
                    given = anything(engine, value.type)
                _returned(engine, state, frame, value, given)
            elif value is not None and isinstance(value, Load):
                locate(engine, state, frame, value.place, "load")
            yield state, -1, Exit(state, given, position)


def _returned(engine: Engine, state: State, frame: Frame, value: Expr, given: Value) -> None:
    """Note an element whose address is made to be returned: whoever called may access it."""
    while isinstance(value, Cast):
        value = value.operand
    if isinstance(value, PointerStep) and isinstance(given, Pointer) and (given.array or given.source):
        if given.made is not None:
            note(engine, state, frame, given.made, "address", given.array, given, given.steps, given.unit)


def _with(state: State, way: Truth) -> State:
    after = state.copy()
    if way is not True:
        after.conditions = (*after.conditions, way)
    return after


def _switch(engine: Engine, frame: Frame, state: State, switch: Switch) -> Iterator[tuple[State, int, Exit | None]]:
    value = evaluate(engine, state, frame, switch.value)
    type_ = switch.value.type
    if not isinstance(type_, IntType) or value is None or isinstance(value, Pointer | Target):
        type_ = IntType("int", 32, True, 3)
        value = engine.terms.unknown(32)
    by_target: dict[int, list[Truth]] = {}
    for case in switch.cases:
        if case.low > case.high:
            continue
        if case.low == case.high:
            hit = compared("==", value, case.low, type_.width, type_.signed)
        else:
            hit = both(
                compared(">=", value, case.low, type_.width, type_.signed),
                compared("<=", value, case.high, type_.width, type_.signed),
            )
        by_target.setdefault(case.target, []).append(hit)
    hits = [hit for some in by_target.values() for hit in some]
    for target, some in by_target.items():
        way = either(*some)
        if way is not False and target != switch.default:
            yield _with(state, way), target, None
    rest = either(negated(either(*hits)), *by_target.get(switch.default, ()))
    if rest is not False:
        yield _with(state, rest), switch.default, None


def _position_of(function: Function, block: int) -> Position:
    here = function.blocks[block]
    if here.statements:
        return here.statements[0].position
    found = getattr(here.terminator, "position", None)
    return found if isinstance(found, Position) else function.position


# -------------------------------------------------------------------------------------------------------- paths apart


def _apart(engine: Engine, frame: Frame, start: State, graph: Graph) -> list[Exit]:
    """Every path by itself, each loop's head at most ``unroll`` times more than once."""
    exits: list[Exit] = []
    pending: list[tuple[int, State, tuple[tuple[int, int], ...]]] = [(0, start, ())]
    while pending:
        block, state, rounds = pending.pop()
        engine.work += 1
        if engine.work > engine.limits.work or len(exits) > engine.limits.paths:
            trouble(engine, "bound reached", "there are more paths than the limit")
            engine.trace.bounded = True
            break
        if block in graph.heads:
            turns = dict(rounds)
            turns[block] = turns.get(block, 0) + 1
            if turns[block] > engine.limits.unroll + 1:
                engine.trace.bounded = True
                continue
            rounds = tuple(sorted(turns.items()))
        found = []
        for after in _statements(engine, frame, state, block):
            for way, target, exit_ in _ends(engine, frame, after, block):
                if exit_ is not None:
                    exits.append(Exit(way, exit_.value, exit_.position))
                elif len(way.conditions) == len(after.conditions) or _possible(engine, way):
                    found.append((target, way, rounds))
        pending.extend(reversed(found))
    return exits


def _possible(engine: Engine, state: State) -> bool:
    """Whether a path's conditions can hold together; one that the solver does not settle is kept."""
    solver = z3.SolverFor("QF_AUFBV")
    solver.set("rlimit", engine.limits.effort)
    solver.add(*engine.terms.facts, as_truth(guard_of(state)))
    return bool(solver.check() != z3.unsat)
