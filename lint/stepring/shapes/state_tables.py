"""Machines that are data: tables ``[state][event]`` and lists of rows with the state they hold in.

A table is a machine's if the state is given a value out of it that was picked by the state: by a subscript
(``state = table[state][event].next``), or by comparing a member of each row (``rows[i].from == state``). Every listed
cell is then a step; a cell that no initialiser mentions is a hole, although it reads as zero like state 0 would. What
else stands in the row is the step's event, guard and action.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Binary,
    Branch,
    Call,
    Const,
    Expr,
    Function,
    FunctionName,
    InitialValue,
    IntType,
    Load,
    MemberPlace,
    Object,
    PlaceExpr,
    PointerStep,
    Return,
    Variable,
    VariablePlace,
)
from stepring.meaning.types import DerefPlace as Deref
from stepring.meaning.types import ElementPlace as Element
from stepring.places import Position
from stepring.shapes.facts import Constant, DispatchFact, LabelFact, TransitionFact
from stepring.shapes.keys import place_key, uncast
from stepring.shapes.names import constant_of
from stepring.shapes.state_scan import Scan, Work, blocks_after
from stepring.shapes.state_spelled import spelled
from stepring.shapes.state_texts import condition_at

MOST_CELLS = 4096
MOST_DEPTH = 3
Step = Expr | str | None  # a subscript, a member's name, or any element


@dataclass(frozen=True, slots=True)
class Way:
    """A place inside a table: the table, and the subscripts and members that lead to it."""

    table: Object
    steps: tuple[Step, ...]


@dataclass(frozen=True, slots=True)
class Found:
    """A store of a table's value in a state: what it is to the program."""

    transitions: tuple[TransitionFact, ...]
    dispatch: DispatchFact
    targets: tuple[Constant, ...]
    at: Position


@dataclass(slots=True)
class _Reader:
    """One function, with what its parameters were handed where a caller is looked at through it."""

    work: Work
    function: Function
    key: str
    standing: frozenset[str]
    handed: Mapping[str, tuple["_Reader", Expr]]


def tables(work: Work) -> dict[str, Object]:
    """The unit's initialised arrays, by identity."""
    return {
        item.variable.identity: item
        for item in work.unit.objects
        if isinstance(item.variable.type, ArrayType) and 0 < len(item.initial) <= MOST_CELLS
    }


def lookups(work: Work, scan: Scan, key: str, known: Mapping[str, Object]) -> Iterator[Found]:
    """The stores of a key in a function that take their value out of a table."""
    standing = {name for name, copied in scan.copies.items() if copied.key == key}
    standing |= {alias.variable for alias in scan.aliases if alias.key.key == key}
    reader = _Reader(work, scan.function, key, frozenset(standing), {})
    for block, statement, _ in scan.keys[key].stores:
        value = statement.value if isinstance(statement, Assign) else None
        if value is None:
            continue
        for way in _values(reader, value, known, 0):
            found = _found(reader, way, block, statement.position, known)
            if found is not None:
                yield found
                break


# ------------------------------------------------------------------------------------------------------------ places


def _values(reader: _Reader, value: Expr, known: Mapping[str, Object], depth: int) -> list[Way]:
    """The places in tables whose value an expression is, through locals and functions of the unit."""
    inner = uncast(value)
    if not isinstance(inner, Load) or depth > MOST_DEPTH:
        return []
    way = _way(reader, inner.place, known, depth)
    if way is not None:
        return [way]
    if not isinstance(inner.place, VariablePlace) or inner.place.variable.lasting:
        return []
    found: list[Way] = []
    for given in _given(reader, inner.place.variable):
        if isinstance(given, Call):
            for other, returned in _returned(reader, given):
                found.extend(_values(other, returned, known, depth + 1))
        else:
            found.extend(_values(reader, given, known, depth + 1))
    return found


def _given(reader: _Reader, variable: Variable) -> list[Expr | Call]:
    """All that is stored in a variable of the function."""
    found: list[Expr | Call] = []
    for block in reader.function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                if statement.place.variable.identity == variable.identity:
                    found.append(statement.value)
            elif isinstance(statement, Call) and isinstance(statement.result, VariablePlace):
                if statement.result.variable.identity == variable.identity:
                    found.append(statement)
    return found


def _returned(reader: _Reader, call: Call) -> Iterator[tuple[_Reader, Expr]]:
    """What a called function of the unit returns, seen with the call's arguments."""
    callee = reader.work.by_name.get(call.callee.name) if isinstance(call.callee, FunctionName) else None
    if callee is None or callee is reader.function or len(reader.handed) > 32:
        return
    handed = {
        parameter.identity: (reader, argument)
        for parameter, argument in zip(callee.parameters, call.arguments, strict=False)
    }
    other = _Reader(reader.work, callee, reader.key, frozenset(), handed)
    for block in callee.blocks:
        if isinstance(block.terminator, Return) and block.terminator.value is not None:
            yield other, block.terminator.value


def _way(reader: _Reader, place: PlaceExpr, known: Mapping[str, Object], depth: int) -> Way | None:
    match place:
        case VariablePlace(variable=variable):
            table = known.get(variable.identity)
            return Way(table, ()) if table is not None else None
        case Element(base=base, index=index):
            inner = _way(reader, base, known, depth)
            return Way(inner.table, (*inner.steps, _handed(reader, index))) if inner is not None else None
        case MemberPlace(base=base, name=name):
            inner = _way(reader, base, known, depth)
            return Way(inner.table, (*inner.steps, name)) if inner is not None else None
        case Deref(pointer=pointer):
            return _pointed(reader, pointer, known, depth)
    return None


def _pointed(reader: _Reader, pointer: Expr, known: Mapping[str, Object], depth: int) -> Way | None:
    """The place that a pointer leads to, if that is one place of a table or any of its rows."""
    inner = uncast(pointer)
    if depth > MOST_DEPTH:
        return None
    if isinstance(inner, AddressOf):
        way = _way(reader, inner.place, known, depth)
        if way is not None and isinstance(inner.place.type, ArrayType):
            return Way(way.table, (*way.steps, Const(0, inner.type)))
        return way
    if isinstance(inner, PointerStep):
        way = _pointed(reader, inner.pointer, known, depth)
        if way is None or not way.steps or isinstance(way.steps[-1], str):
            return None
        last = way.steps[-1]
        first = isinstance(last, Const) and last.value == 0
        return Way(way.table, (*way.steps[:-1], _handed(reader, inner.steps) if first else None))
    if not isinstance(inner, Load) or not isinstance(inner.place, VariablePlace):
        return None
    variable = inner.place.variable
    if variable.identity in reader.handed:
        other, argument = reader.handed[variable.identity]
        return _pointed(other, argument, known, depth + 1)
    ways: list[Way] = []
    walks = False
    for given in _given(reader, variable):
        if isinstance(given, Call):
            for other, returned in _returned(reader, given):
                if not isinstance(uncast(returned), Const):
                    way = _pointed(other, returned, known, depth + 1)
                    if way is None:
                        return None
                    ways.append(way)
            continue
        plain = uncast(given)
        if isinstance(plain, PointerStep) and _is(plain.pointer, variable):
            walks = True
        elif not isinstance(plain, Const):
            way = _pointed(reader, given, known, depth + 1)
            if way is None:
                return None
            ways.append(way)
    if not ways or len({(way.table.variable.identity, way.steps) for way in ways}) != 1:
        return None
    (way, *_) = ways
    if walks and way.steps and not isinstance(way.steps[-1], str):
        return Way(way.table, (*way.steps[:-1], None))
    return way


def _is(expr: Expr, variable: Variable) -> bool:
    inner = uncast(expr)
    return (
        isinstance(inner, Load)
        and isinstance(inner.place, VariablePlace)
        and inner.place.variable.identity == variable.identity
    )


def _handed(reader: _Reader, expr: Expr) -> Expr:
    """An argument for the parameter that stands for it."""
    inner = uncast(expr)
    if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
        known = reader.handed.get(inner.place.variable.identity)
        if known is not None:
            return _handed(known[0], known[1])
    return expr


def _is_state(reader: _Reader, expr: Expr) -> bool:
    inner = uncast(_handed(reader, expr))
    if not isinstance(inner, Load):
        return False
    if isinstance(inner.place, VariablePlace) and inner.place.variable.identity in _root(reader).standing:
        return True
    found = place_key(inner.place, _root(reader).function.identity)
    return found is not None and found.key == reader.key


def _root(reader: _Reader) -> _Reader:
    for other, _ in reader.handed.values():
        return _root(other)
    return reader


def places_of(work: Work, function: Function, place: PlaceExpr, known: Mapping[str, Object]) -> list[Way]:
    """The places in tables that a place is, through locals and functions of the unit."""
    return _values(_Reader(work, function, "", frozenset(), {}), Load(place, place.type), known, 0)


def subscripts(way: Way) -> list[Expr | None]:
    """The subscripts on the way into a table; None for any element."""
    return [step for step in way.steps if not isinstance(step, str)]


def called_place(call: Call) -> PlaceExpr | None:
    """The place that holds the function called, None where it is called by its name."""
    callee = uncast(call.callee)
    if isinstance(callee, AddressOf) and isinstance(callee.place, Deref):
        callee = uncast(callee.place.pointer)
    return callee.place if isinstance(callee, Load) else None


# -------------------------------------------------------------------------------------------------------------- rows


@dataclass(frozen=True, slots=True)
class _Test:
    """A comparison of a row's member with something: which member, with what, as text, and whether it ends a loop."""

    member: tuple[str, ...]
    other: Expr
    reader: _Reader
    ends_loop: bool


def _found(reader: _Reader, way: Way, block: int, at: Position, known: Mapping[str, Object]) -> Found | None:
    state_at = [
        n
        for n, step in enumerate(way.steps)
        if step is not None and not isinstance(step, str) and _is_state(reader, step)
    ]
    tests = list(_tests(reader, way, known, 0))
    form: Literal["table", "row list"] = "table" if state_at else "row list"
    if len(state_at) > 1 or not way.steps:
        return None
    by_state = next((test for test in tests if _is_state(test.reader, test.other)), None)
    if form == "row list" and by_state is None:
        return None
    rows = _rows(way)
    barred = {
        number.value
        for test in tests
        if test.member == _members(way) and isinstance(number := uncast(test.other), Const)
    }
    called = _called(reader, way, known, 0)
    transitions: list[TransitionFact] = []
    labels: dict[int, Constant] = {}
    targets: list[Constant] = []
    work = reader.work
    for prefix, cells in rows.items():
        target = cells.get(_members(way))
        stored: Expr | None = uncast(target.value) if target is not None else None
        here = target.position if target is not None else next(iter(cells.values())).position
        where = work.names.origin(here)
        if stored is None and form == "row list":
            stored = Const(0, IntType("int", 32, True, 3))
        if not isinstance(stored, Const) or stored.value in barred:
            continue
        constant = constant_of(work.names, stored, where)
        source = _source(reader, by_state, state_at, prefix, cells, tests, where) if by_state or state_at else None
        if source is None:
            continue
        value, name = source
        events = list(_events(reader, way, state_at, tests, prefix, cells))
        guards, actions = _row_calls(called, cells)
        event = " && ".join(events)
        targets.append(constant)
        if value is not None:
            labels.setdefault(value, Constant(value, name, where))
        transitions.append(
            TransitionFact(
                reader.key,
                reader.function.identity,
                value,
                (),
                constant,
                " && ".join([*events, *guards]),
                where,
                reader.function.identity,
                None,
                True,
                event,
                actions,
                False,
            )
        )
    if not transitions:
        return None
    spelled_names = {constant.value: constant for constant in targets if constant.name is not None}
    where = work.names.origin(at)
    facts = tuple(
        LabelFact(_named(work, reader, constant, spelled_names), value, value, constant.where, None, False, False)
        for value, constant in sorted(labels.items())
    )
    place = work.names.origin(way.table.position)
    dispatch = DispatchFact(
        reader.key,
        "",
        reader.function.identity,
        way.table.variable.name,
        place,
        facts,
        None,
        "none",
        (),
        False,
        False,
        block in blocks_after(reader.function, block),
        False,
        False,
        place.line,
        form,
    )
    return Found(tuple(transitions), dispatch, tuple(dict.fromkeys(targets)), at)


def _named(work: Work, reader: _Reader, constant: Constant, others: Mapping[int, Constant]) -> Constant:
    """A subscript's value with the name that the state's type or the table's own cells give it."""
    if constant.name is not None:
        return constant
    scan = next(scan for scan in work.scans if scan.function is reader.function)
    type_ = scan.keys[reader.key].type
    enumeration = work.unit.types.enums.get(type_.enum or "") if isinstance(type_, IntType) else None
    for item in enumeration.enumerators if enumeration is not None else ():
        if item.value == constant.value:
            return Constant(constant.value, item.name, constant.where)
    known = others.get(constant.value)
    return Constant(constant.value, known.name if known is not None else None, constant.where)


def _members(way: Way) -> tuple[str, ...]:
    return tuple(step for step in way.steps if isinstance(step, str))


def _rows(way: Way) -> dict[tuple[int, ...], dict[tuple[str, ...], InitialValue]]:
    """The table's listed cells: by the subscripts, then by the members inside."""
    count = sum(not isinstance(step, str) for step in way.steps)
    found: dict[tuple[int, ...], dict[tuple[str, ...], InitialValue]] = {}
    for initial in way.table.initial:
        prefix = tuple(step for step in initial.path if isinstance(step, int))
        if len(prefix) == count:
            names = tuple(step for step in initial.path if isinstance(step, str))
            found.setdefault(prefix, {})[names] = initial
    return found


def _tests(reader: _Reader, way: Way, known: Mapping[str, Object], depth: int) -> Iterator[_Test]:
    """The comparisons of members of the table's rows, in the function and in those that it asks for a row."""
    for block in reader.function.blocks:
        end = block.terminator
        if isinstance(end, Branch):
            condition = uncast(end.condition)
            if isinstance(condition, Binary) and condition.op in ("==", "!="):
                for side, other in ((condition.left, condition.right), (condition.right, condition.left)):
                    inner = uncast(side)
                    for found in _values(reader, inner, known, 1) if isinstance(inner, Load) else ():
                        if found.table is way.table:
                            where = reader.work.names.origin(end.position)
                            text = condition_at(reader.work.read.source(where.file), where, lambda _: False)
                            loop = text is not None and text.statement in ("while", "for")
                            yield _Test(_members(found), other, reader, loop)
        for statement in block.statements:
            if isinstance(statement, Call) and depth < MOST_DEPTH and statement.result is not None:
                for other_reader, _ in list(_returned(reader, statement))[:1]:
                    yield from _tests(other_reader, way, known, depth + 1)


def _source(
    reader: _Reader,
    by_state: _Test | None,
    state_at: Sequence[int],
    prefix: tuple[int, ...],
    cells: Mapping[tuple[str, ...], InitialValue],
    tests: Sequence[_Test],
    where: object,
) -> tuple[int | None, str | None] | None:
    """The state that a cell belongs to with its name; (None, None) for any state; None for a row that ends a list."""
    if state_at:
        return prefix[state_at[0]], None
    assert by_state is not None
    cell = cells.get(by_state.member)
    number = uncast(cell.value) if cell is not None else None
    if cell is not None and not isinstance(number, Const):
        return None
    value = number.value if isinstance(number, Const) else 0
    for test in tests:
        other = uncast(test.other)
        if test.member == by_state.member and isinstance(other, Const) and other.value == value:
            return None if test.ends_loop else (None, None)
    if cell is None or not isinstance(number, Const):
        return value, None
    here = reader.work.names.origin(cell.position)
    return value, constant_of(reader.work.names, number, here).name


def _events(
    reader: _Reader,
    way: Way,
    state_at: Sequence[int],
    tests: Sequence[_Test],
    prefix: tuple[int, ...],
    cells: Mapping[tuple[str, ...], InitialValue],
) -> Iterator[str]:
    """What else picks a cell: other subscripts, other members that are compared."""
    work = reader.work
    subscripts = [step for step in way.steps if not isinstance(step, str)]
    for number, (step, value) in enumerate(zip(subscripts, prefix, strict=True)):
        if step is None or number in state_at or isinstance(step, Const):
            continue
        if not state_at:
            continue  # a row's number says nothing
        inner = uncast(step)
        enum = inner.type.enum if isinstance(inner.type, IntType) else None
        enumeration = work.unit.types.enums.get(enum or "")
        name = (
            next((item.name for item in enumeration.enumerators if item.value == value), None) if enumeration else None
        )
        yield f"{spelled(_root(reader).function, expr_text(inner))} == {name or value}"
    if state_at:
        return
    seen: set[tuple[str, ...]] = set()
    for test in tests:
        other = uncast(test.other)
        if _is_state(test.reader, test.other) or isinstance(other, Const) or test.member in seen:
            continue
        seen.add(test.member)
        cell = cells.get(test.member)
        number_ = uncast(cell.value) if cell is not None else Const(0, other.type)
        if isinstance(number_, Const):
            here = work.names.origin(cell.position if cell is not None else next(iter(cells.values())).position)
            constant = constant_of(work.names, number_, here)
            text = spelled(_root(reader).function, expr_text(uncast(_handed(test.reader, test.other))))
            yield f"{text} == {constant.name or constant.value}"


def _called(reader: _Reader, way: Way, known: Mapping[str, Object], depth: int) -> dict[tuple[str, ...], bool]:
    """The members of the table's rows that are called, and whether their result is looked at."""
    found: dict[tuple[str, ...], bool] = {}
    tested = {
        place.variable.identity
        for block in reader.function.blocks
        if isinstance(block.terminator, Branch)
        for place in _loads(block.terminator.condition)
    }
    for block in reader.function.blocks:
        for statement in block.statements:
            if not isinstance(statement, Call):
                continue
            place = called_place(statement)
            if place is not None:
                for one in _values(reader, Load(place, place.type), known, 1):
                    if one.table is way.table:
                        result = statement.result
                        asked = isinstance(result, VariablePlace) and result.variable.identity in tested
                        found[_members(one)] = found.get(_members(one), False) or asked
            elif depth < MOST_DEPTH and statement.result is not None:
                for other, _ in list(_returned(reader, statement))[:1]:
                    found.update(_called(other, way, known, depth + 1))
    return found


def _loads(expr: Expr) -> Iterator[VariablePlace]:
    inner = uncast(expr)
    if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
        yield inner.place
    elif isinstance(inner, Binary):
        yield from _loads(inner.left)
        yield from _loads(inner.right)


def _row_calls(
    called: Mapping[tuple[str, ...], bool], cells: Mapping[tuple[str, ...], InitialValue]
) -> tuple[list[str], tuple[str, ...]]:
    """A row's guard, as a call, and its actions."""
    guards: list[str] = []
    actions: list[str] = []
    for member, asked in called.items():
        cell = cells.get(member)
        value = uncast(cell.value) if cell is not None else None
        if isinstance(value, AddressOf) or not isinstance(value, FunctionName):
            continue
        if asked:
            guards.append(f"{value.name}()")
        else:
            actions.append(value.name)
    return guards, tuple(dict.fromkeys(actions))
