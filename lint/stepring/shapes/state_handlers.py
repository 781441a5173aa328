"""Machines whose states are functions: a table of handlers picked by the state, or a variable that holds the handler.

``state = handlers[state]()`` and ``handlers[state]()`` are dispatches whose cases are functions: each handler is run
from the state that picks it, so what it stores or returns is a step. Where a lasting variable holds the handler itself
and the handlers store the next one, the functions are the states. Callbacks that are registered and called look the
same but for one thing: no handler puts another in its place.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, fields, is_dataclass
from zlib import crc32

from stepring.meaning.types import (
    Assign,
    Call,
    Expr,
    Function,
    FunctionName,
    FunctionType,
    InitialValue,
    Load,
    MemberPlace,
    Object,
    PlaceExpr,
    PointerType,
    Return,
    Variable,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.facts import Constant, DispatchFact, HandlerFact, KeyFact, LabelFact
from stepring.shapes.keys import PlaceKey, place_key, uncast
from stepring.shapes.names import starts
from stepring.shapes.state_guards import Guards, actions, conditions, paths_of, way_of
from stepring.shapes.state_scan import Scan, Work, blocks_after, function_identity
from stepring.shapes.state_tables import Way, called_place, places_of, subscripts


@dataclass(frozen=True, slots=True)
class Handlers:
    """A call through a table of functions that the state picks: the state's values with their functions' names."""

    key: str
    function: str
    block: int
    position: Position
    table: Object
    by_value: tuple[tuple[int, str, Position], ...]
    # Where the result is stored in the state, if it is.
    result_at: Position | None
    carried: bool


# ---------------------------------------------------------------------------------------------- tables of handlers


def handler_tables(work: Work, known: Mapping[str, Object]) -> list[Handlers]:
    """The calls of a unit through a table of functions whose subscript is a lasting integer."""
    found: list[Handlers] = []
    for scan in work.scans if known else ():
        for number, block in enumerate(scan.function.blocks):
            for call in block.statements:
                if isinstance(call, Call) and not isinstance(uncast(call.callee), FunctionName):
                    found.extend(_through_table(work, scan, number, call, known))
    return found


def _through_table(work: Work, scan: Scan, block: int, call: Call, known: Mapping[str, Object]) -> Iterator[Handlers]:
    place = called_place(call)
    for way in places_of(work, scan.function, place, known) if place is not None else ():
        for number, step in enumerate(subscripts(way)):
            key = _key_of(scan, step) if step is not None else None
            if key is None:
                continue
            by_value = tuple(_functions(way, number))
            result_at = _stored_at(scan, call, key)
            # Functions cannot reach a local variable: only what they return can be its next value.
            if len(by_value) > 1 and (key.scope == "lasting" or result_at is not None):
                carried = key.scope == "local" and block in blocks_after(scan.function, block)
                yield Handlers(
                    key.key, scan.function.identity, block, call.position, way.table, by_value, result_at, carried
                )
                return


def _key_of(scan: Scan, step: Expr) -> PlaceKey | None:
    inner = uncast(step)
    if not isinstance(inner, Load):
        return None
    if isinstance(inner.place, VariablePlace) and inner.place.variable.identity in scan.copies:
        return scan.copies[inner.place.variable.identity]
    key = place_key(inner.place, scan.function.identity)
    return key if key is not None and key.scope != "parameter" else None


def _functions(way: Way, number: int) -> Iterator[tuple[int, str, Position]]:
    """The listed cells of a table of functions: the subscript that the state is, and the function."""
    members = tuple(step for step in way.steps if isinstance(step, str))
    for initial in way.table.initial:
        name = function_in(initial.value)
        prefix = tuple(step for step in initial.path if isinstance(step, int))
        if name is not None and tuple(step for step in initial.path if isinstance(step, str)) == members:
            if len(prefix) > number:
                yield prefix[number], name, initial.position


def function_in(value: Expr) -> str | None:
    """The name of a function that an expression is the address of."""
    inner = uncast(value)
    return inner.name if isinstance(inner, FunctionName) else None


def _stored_at(scan: Scan, call: Call, key: PlaceKey) -> Position | None:
    """Where the result of a call is stored in a key."""
    if call.result is None:
        return None
    found = place_key(call.result, scan.function.identity)
    if found is not None and found.key == key.key:
        return call.position
    if not isinstance(call.result, VariablePlace):
        return None
    names = {call.result.variable.identity}
    for block in scan.function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign):
                inner = uncast(statement.value)
                if not isinstance(inner, Load) or not isinstance(inner.place, VariablePlace):
                    continue
                if inner.place.variable.identity not in names:
                    continue
                found = place_key(statement.place, scan.function.identity)
                if found is not None and found.key == key.key:
                    return statement.position
                if isinstance(statement.place, VariablePlace) and not statement.place.variable.lasting:
                    names.add(statement.place.variable.identity)
    return None


def handler_dispatch(work: Work, handlers: Handlers, names: Mapping[int, str | None]) -> DispatchFact:
    """A call through a table as a dispatch."""
    where = work.names.origin(handlers.position)
    labels = []
    for value, _, position in sorted(handlers.by_value, key=lambda one: one[0]):
        place = work.names.origin(position)
        labels.append(LabelFact(Constant(value, names.get(value), place), value, value, place, None, False, False))
    return DispatchFact(
        handlers.key,
        "",
        handlers.function,
        handlers.table.variable.name,
        where,
        tuple(labels),
        None,
        "none",
        (),
        False,
        False,
        handlers.carried,
        False,
        False,
        where.line,
        "next state returned" if handlers.result_at is not None else "table",
    )


# ------------------------------------------------------------------------------------- variables that hold handlers


def handler_value(identity: str) -> int:
    """A number that stands for a function in facts: the same in every unit."""
    return crc32(identity.encode("utf-8", "replace"))


def handler_facts(work: Work) -> tuple[HandlerFact, ...]:
    """The stores of functions into lasting variables, the calls through such variables, and the functions returned."""
    found: list[HandlerFact] = []
    setters = _setters(work)
    for scan in work.scans:
        found.extend(_facts_of(work, scan, setters))
    if not any(fact.kind == "called" for fact in found) and not any(fact.kind == "stored" for fact in found):
        return ()
    for item in work.unit.objects:
        for initial in item.initial:
            found.extend(_initial(work, item, initial))
    return tuple(dict.fromkeys(found))


def _initial(work: Work, item: Object, initial: InitialValue) -> Iterator[HandlerFact]:
    name = function_in(initial.value)
    if name is None or item.variable.const:
        return
    place: PlaceExpr = VariablePlace(item.variable)
    type_ = item.variable.type
    if initial.path:
        last = initial.path[-1]
        struct = _struct_of(work, type_, initial.path)
        if not isinstance(last, str) or struct is None:
            return
        place = MemberPlace(place, struct, last, PointerType(FunctionType(initial.value.type, None), 0))
    key = place_key(place, "")
    if key is not None:
        where = work.names.origin(initial.position)
        yield HandlerFact("initial", key.key, "", _constant(work, name, where), where, (), "", "", ())


def _struct_of(work: Work, type_: object, path: tuple[str | int, ...]) -> str | None:
    struct: str | None = None
    for step in path:
        if isinstance(step, int):
            type_ = getattr(type_, "element", None)
            continue
        struct = getattr(type_, "identity", None)
        layout = work.unit.types.structs.get(struct or "")
        member = layout.field(step) if layout is not None else None
        if member is None:
            return None
        type_ = member.type
    return struct


def _setters(work: Work) -> dict[tuple[str, int], PlaceKey]:
    """Functions that store a parameter in a variable that holds a handler: the name and the parameter's number."""
    found: dict[tuple[str, int], PlaceKey] = {}
    for scan in work.scans:
        own = {parameter.identity: number for number, parameter in enumerate(scan.function.parameters)}
        for block in scan.function.blocks:
            for statement in block.statements:
                if isinstance(statement, Assign) and _is_handler(statement.place):
                    inner = uncast(statement.value)
                    key = place_key(statement.place, scan.function.identity)
                    if key is None or key.scope != "lasting":
                        continue
                    if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
                        number = own.get(inner.place.variable.identity)
                        if number is not None:
                            found[scan.function.name, number] = key
    return found


def _is_handler(place: PlaceExpr) -> bool:
    return isinstance(place.type, PointerType) and isinstance(place.type.to, FunctionType)


def _constant(work: Work, name: str, where: object) -> Constant:
    identity = function_identity(work, name)
    return Constant(handler_value(identity), name, where)  # type: ignore[arg-type]


def _facts_of(work: Work, scan: Scan, setters: Mapping[tuple[str, int], PlaceKey]) -> Iterator[HandlerFact]:
    function = scan.function
    guards: Guards | None = None

    def fact(kind: str, key: PlaceKey, name: str, position: Position, block: int, type_: object = None) -> HandlerFact:
        nonlocal guards
        if guards is None:
            known = work.paths.get(function.identity)
            if known is None:
                known = work.paths[function.identity] = paths_of(function, work.read)
            guards = Guards(known, key.key, frozenset())
        way = way_of(conditions(guards, block), actions(guards, block, frozenset()), function.identity)
        where = work.names.origin(position)
        return HandlerFact(
            kind,  # type: ignore[arg-type]
            key.key,
            function.identity,
            _constant(work, name, where),
            where,
            _callers(work, function),
            way.guard,
            way.event,
            way.actions,
            way.timed,
            False,
            type_ is not None and _is_idle(work, function),
            type_ is not None and _fits(function, type_),
        )

    for number, block in enumerate(function.blocks):
        for statement in block.statements:
            if isinstance(statement, Assign) and _is_handler(statement.place):
                key = place_key(statement.place, function.identity)
                if key is None or key.scope != "lasting":
                    continue
                _note_key(work, scan, key)
                fresh = starts(function.identity)
                for name, where, chosen in _names(function, statement.value, statement.position, number):
                    yield fact("initial" if fresh else "stored", key, name, where, chosen, statement.place.type)
            elif isinstance(statement, Call):
                yield from _called(work, scan, statement)
                if isinstance(statement.callee, FunctionName):
                    for place, argument in enumerate(statement.arguments):
                        name_ = function_in(argument)
                        key = setters.get((statement.callee.name, place))
                        if name_ is not None and key is not None:
                            _note_key(work, scan, key)
                            fresh = starts(function.identity)
                            kind = "initial" if fresh else "stored"
                            yield fact(kind, key, name_, statement.position, number, uncast(argument).type)
        end = block.terminator
        if isinstance(end, Return) and end.value is not None:
            for name, where, chosen in _names(function, end.value, end.position, number):
                empty = PlaceKey("", "", "", "variable", "lasting", None)
                yield fact("returned", empty, name, where, chosen)


def _called(work: Work, scan: Scan, call: Call) -> Iterator[HandlerFact]:
    place = called_place(call)
    key = place_key(place, scan.function.identity) if place is not None else None
    if key is None or place is None or not _is_handler(place):
        return
    if key.scope != "lasting":
        copied = scan.copies.get(key.instance)
        if copied is None:
            return
        key = copied
    _note_key(work, scan, key)
    where = work.names.origin(call.position)
    result = _stored_at(scan, call, key) is not None
    nothing = Constant(0, None, where)
    yield HandlerFact("called", key.key, scan.function.identity, nothing, where, (), "", "", (), False, result)


def _note_key(work: Work, scan: Scan, key: PlaceKey) -> None:
    if key.key in work.handler_keys:
        return
    where = work.names.origin(scan.function.position)
    if key.kind == "variable" and key.root is not None and key.root.position is not None:
        where = work.names.origin(key.root.position)
    elif key.kind == "member":
        layout = work.unit.types.structs.get(key.key.rsplit(".", 1)[0])
        if layout is not None and layout.position is not None:
            where = work.names.origin(layout.position)
    file = work.names.origin(scan.function.position).file
    work.handler_keys[key.key] = KeyFact(
        key.key, key.shown, key.kind, where, 0, (1 << 32) - 1, None, "lasting", (), False, file
    )


def _names(function: Function, value: Expr, at: Position, block: int) -> Iterator[tuple[str, Position, int]]:
    """The functions that a value can be, through a local variable, with where each was chosen."""
    name = function_in(value)
    if name is not None:
        yield name, at, block
        return
    inner = uncast(value)
    if isinstance(inner, Load) and isinstance(inner.place, VariablePlace) and not inner.place.variable.lasting:
        for number, other in enumerate(function.blocks):
            for statement in other.statements:
                if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                    if statement.place.variable.identity == inner.place.variable.identity:
                        chosen = function_in(statement.value)
                        if chosen is not None:
                            yield chosen, statement.position, number


def _callers(work: Work, function: Function) -> tuple[str, ...]:
    """The functions of the unit that call a static one."""
    if not function.static:
        return ()
    return tuple(
        sorted(
            {
                scan.function.identity
                for scan in work.scans
                for _, name in scan.calls
                if name == function.name and scan.function is not function
            }
        )
    )


def _is_idle(work: Work, function: Function) -> bool:
    """Whether a function is the file's own and nothing there calls it or takes its address."""
    if not function.static or function.attributes or called_directly(work, function.name):
        return False
    held = [initial.value for item in work.unit.objects for initial in item.initial]
    for scan in work.scans:
        for block in scan.function.blocks:
            for statement in block.statements:
                if isinstance(statement, Assign):
                    held.append(statement.value)
                elif isinstance(statement, Call):
                    held.extend(statement.arguments)
            end = block.terminator
            held.extend(value for value in (getattr(end, "value", None), getattr(end, "condition", None)) if value)
    return not any(_names_function(value, function.name) for value in held)


def _names_function(value: object, name: str) -> bool:
    """Whether an expression names a function anywhere."""
    stack = [value]
    while stack:
        node = stack.pop()
        if isinstance(node, FunctionName) and node.name == name:
            return True
        if isinstance(node, tuple):
            stack.extend(node)
        elif is_dataclass(node) and not isinstance(node, Variable | Position):
            stack.extend(getattr(node, field.name) for field in fields(node) if field.name != "type")
    return False


def _fits(function: Function, type_: object) -> bool:
    """Whether a pointer could hold a function: as many parameters, and a result or none alike."""
    pointed = type_.to if isinstance(type_, PointerType) else type_
    if not isinstance(pointed, FunctionType) or type(pointed.returns) is not type(function.type.returns):
        return False
    return pointed.parameters is None or len(pointed.parameters) == len(function.parameters)


def called_directly(work: Work, name: str) -> bool:
    """Whether some function of the unit calls a function by its name."""
    return any(name == other for scan in work.scans for _, other in scan.calls)
