"""IR as Python: each block of a function becomes one Python function that runs it on a frame and says where to go on.

Every IR expression becomes a few lines of plain Python on local variables, with the checks that C's rules ask for
written out where they can fail; a call for each node would cost five times as much. The text is made of nothing but
numbers and of names that this module gives.

A frame is a list: the objects with static storage, the run, the result of the latest call, then the function's
variables. A scalar whose address is never taken is its value there (None while indeterminate); any other variable is
its ``Cells``. A block's function returns the next block's number, or a ``Leave`` or ``Enter``.
"""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from stepring.meaning.fold import convert
from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    AddressOf,
    Assign,
    Begin,
    Binary,
    Block,
    Branch,
    Call,
    Clobber,
    CType,
    ElementPlace,
    FloatType,
    Function,
    FunctionName,
    IntType,
    Jump,
    MemberPlace,
    PlaceExpr,
    PointerType,
    Return,
    Statement,
    Stop,
    StructLayout,
    Switch,
    VariablePlace,
)
from stepring.paths import arithmetic, memory
from stepring.paths.emit import (
    COMPARISONS,
    PACKERS,
    Writer,
    comparison,
    fail,
    keep,
    line,
    local,
    size_of_type,
    store,
    value,
    where_of,
)
from stepring.paths.library import BUILTINS
from stepring.paths.types import ASSEMBLY, Event, Unsettled
from stepring.places import Position

FIRST_SLOT = 3
_SWITCH_SPREAD = 64


@dataclass(frozen=True, slots=True)
class Leave:
    """The function returns a value."""

    value: Any


@dataclass(frozen=True, slots=True)
class Enter:
    """A function is called; its result goes to the frame's place 2 and ``after`` is the block to go on at."""

    callee: Any
    arguments: list[Any]
    after: int
    position: Position
    result: CType | None


@dataclass(frozen=True, slots=True)
class Resident:
    """A variable that needs memory: its place in the frame, its name and its size; None where that is not known."""

    slot: int
    name: str
    size: int | None


@dataclass(frozen=True, slots=True, eq=False)
class Code:
    """A function made ready to run: its blocks with what each costs and where it starts."""

    name: str
    blocks: tuple[tuple[Callable[[list[Any]], Any], int, Position], ...]
    width: int
    parameters: tuple[tuple[int, CType], ...]
    residents: tuple[Resident, ...]
    position: Position
    source: str


# -------------------------------------------------------------------------------------------------------- statements


def _statement(writer: Writer, statement: Statement, after: int) -> bool:
    """Write a statement; True where it ends the block's function, which goes on at the block ``after``."""
    writer.at = statement.position
    match statement:
        case Assign(place=place, value=given, position=at, initial=initial):
            store(writer, place, value(writer, given), at, initial=initial)
        case Begin(variable=variable):
            slot = writer.slots[variable.identity]
            if variable.identity in writer.cells:
                line(writer, f"f[{slot}] = renewed(f[{slot}])")
            else:
                line(writer, f"f[{slot}] = None")
                writer.held.pop(slot, None)
        case Clobber(places=places, why=why):
            for place in places:
                _clobber(writer, place, why)
            if not places and why != ASSEMBLY:
                fail(writer, Unsettled(why, statement.position))
        case Call():
            return _call(writer, statement, after)
    return False


def _clobber(writer: Writer, place: PlaceExpr, why: str) -> None:
    where = where_of(writer, place, access=True)
    if where.slot is not None:
        assert isinstance(place, VariablePlace)
        type_ = place.variable.type
        if writer.sealed and why == ASSEMBLY and isinstance(type_, IntType):
            line(writer, f"f[{where.slot}] = assembled(f[1], {keep(writer, type_)})")
        else:
            line(writer, f"f[{where.slot}] = None")
        line(writer, f"f[1].unknown[{keep(writer, place.variable.identity)}] = {keep(writer, why)}")
        writer.held.pop(where.slot, None)
    else:
        line(
            writer,
            f"forget({where.cells}, {where.offset}, {size_of_type(writer, place.type) or 0}, {keep(writer, why)})",
        )


def _call(writer: Writer, call: Call, after: int) -> bool:
    callee = call.callee
    arguments = [value(writer, item) for item in call.arguments]
    listed = f"[{', '.join(arguments)}]"
    at = keep(writer, call.position)
    wanted = call.result.type if call.result is not None else None
    if isinstance(callee, FunctionName) and callee.name in BUILTINS:
        got = local(writer, f"{keep(writer, BUILTINS[callee.name])}(f[1], {listed}, {at})")
        if call.result is not None and wanted is not None:
            parts = f"{keep(writer, wanted)}, {callee.name!r}, {at}"
            store(writer, call.result, local(writer, f"adopted({got}, {parts})"), call.position)
        return False
    reached = value(writer, callee)
    if writer.watched:
        event = keep(writer, ("call", writer.function, call.position, expr_text(callee)))
        line(writer, f"f[1].observe(Event(*{event}, {listed}))")
    line(writer, f"return Enter({reached}, {listed}, {after}, {at}, {keep(writer, wanted)})")
    return True


def _resume(writer: Writer, call: Call) -> None:
    """The start of the block after a call: its result is stored."""
    if call.result is not None:
        writer.at = call.position
        if isinstance(call.result, VariablePlace) and call.result.variable.identity not in writer.cells:
            slot = writer.slots.get(call.result.variable.identity)
            if slot is not None:
                # A function that gave no result leaves the variable without a value (6.9.1p12).
                line(writer, f"f[{slot}] = f[2]")
                return
        got = local(writer, "f[2]")
        line(writer, f"if {got} is None: raise unset_variable(f[1], 'the result', '', {keep(writer, call.position)})")
        store(writer, call.result, got, call.position)


def _end(writer: Writer, block: Block) -> None:
    match block.terminator:
        case Jump(target=target):
            line(writer, f"return {target}")
        case Branch(condition=condition, then=then, otherwise=otherwise, position=at):
            writer.at = at
            if isinstance(condition, Binary) and condition.op in COMPARISONS:
                test = comparison(writer, condition)
            else:
                test = value(writer, condition)
            if writer.watched:
                test = local(writer, test)
                event = keep(writer, ("branch", writer.function, at, expr_text(condition)))
                line(writer, f"f[1].observe(Event(*{event}, bool({test})))")
            line(writer, f"return {then} if {test} else {otherwise}")
        case Switch():
            _switch(writer, block.terminator)
        case Return(value=given, position=at):
            writer.at = at
            result = value(writer, given) if given is not None else "None"
            if writer.watched:
                event = keep(writer, ("return", writer.function, at, expr_text(given) if given is not None else ""))
                line(writer, f"f[1].observe(Event(*{event}, {result}))")
            line(writer, f"return Leave({result})")
        case Stop(why=why):
            fail(writer, Unsettled(f"control comes to a place it does not leave: {why}", writer.at))


def _switch(writer: Writer, switch: Switch) -> None:
    writer.at = switch.syntax.position
    given = value(writer, switch.value)
    table: dict[int, int] = {}
    wide: list[tuple[int, int, int]] = []
    control = switch.value.type
    for case in switch.cases:
        if isinstance(control, IntType) and not control.low <= case.low <= case.high <= control.high:
            continue
        if case.high - case.low < _SWITCH_SPREAD:
            for number in range(case.low, case.high + 1):
                table.setdefault(number, case.target)
        elif case.low <= case.high:
            wide.append((case.low, case.high, case.target))
    if writer.watched:
        event = keep(writer, ("switch", writer.function, writer.at, expr_text(switch.value)))
        line(writer, f"f[1].observe(Event(*{event}, {given}))")
    for low, high, target in wide:
        line(writer, f"if {low} <= {given} <= {high}: return {target}")
    line(writer, f"return {keep(writer, table)}.get({given}, {switch.default})")


# --------------------------------------------------------------------------------------------------------- functions


def _parts(function: Function) -> Iterator[Any]:
    """Every expression and place of a function, outermost first."""
    stack: list[Any] = []
    for block in function.blocks:
        for statement in block.statements:
            for name in ("place", "value", "callee", "result"):
                stack.append(getattr(statement, name, None))
            stack.extend(getattr(statement, "arguments", ()))
            stack.extend(getattr(statement, "places", ()))
        stack.append(getattr(block.terminator, "condition", None))
        stack.append(getattr(block.terminator, "value", None))
    while stack:
        part = stack.pop()
        if part is None or isinstance(part, int | float):
            continue
        yield part
        for name in ("place", "operand", "left", "right", "pointer", "steps", "index", "base"):
            stack.append(getattr(part, name, None))


def _needs_cells(function: Function, structs: Mapping[str, StructLayout]) -> set[str]:
    """The function's variables that need memory: aggregates, and scalars whose address is taken."""
    found = {
        variable.identity
        for variable in function.variables
        if not isinstance(variable.type, IntType | PointerType | FloatType)
    }
    for part in _parts(function):
        base = part.place if isinstance(part, AddressOf) else part
        while isinstance(base, MemberPlace | ElementPlace):
            base = base.base
        if isinstance(base, VariablePlace) and (isinstance(part, AddressOf) or base is not part):
            found.add(base.variable.identity)
    return found


def _namespace() -> dict[str, Any]:
    names: dict[str, Any] = {"Event": Event, "Enter": Enter, "Leave": Leave, "whole_object": _whole_object}
    names["assembled"] = _assembled
    for module in (arithmetic, memory):
        names.update({name: thing for name, thing in vars(module).items() if callable(thing)})
    for code, packer in PACKERS.items():
        names[f"pack_{code}"], names[f"unpack_{code}"] = packer.pack_into, packer.unpack_from
    return names


def _whole_object(pointer: Any) -> Any:
    if pointer.__class__ is tuple:
        return (pointer[0], pointer[1], 0, pointer[0].size)
    return pointer


def _is_sealed(function: Function) -> bool:
    """Whether nothing of the program goes into a function: no argument, lasting variable or other function's result."""
    lasting = any(variable.lasting for variable in function.variables)
    calls = any(isinstance(statement, Call) for block in function.blocks for statement in block.statements)
    return not (function.parameters or lasting or calls)


def _assembled(state: Any, type_: IntType) -> int | None:
    """What inline assembly gives, if whoever stands in for the outside says so; None where that is not known."""
    given = state.externals
    if isinstance(given, Mapping):
        function = given.get(ASSEMBLY)
        found = None if function is None else function([])
    else:
        found = None if given is None else given(ASSEMBLY, [])
    return convert(found, type_) if isinstance(found, int) else None


def translate(program: Any, unit: int, function: Function, *, watched: bool) -> Code:
    """A function of a program's unit made ready to run."""
    structs = program.units[unit].types.structs
    writer = Writer(program, unit, function.name, structs, watched, _namespace())
    writer.cells = _needs_cells(function, structs)
    writer.sealed = _is_sealed(function)
    residents: list[Resident] = []
    every = {variable.identity: variable for variable in (*function.parameters, *function.variables)}
    for identity, variable in every.items():
        if variable.lasting:
            continue
        slot = writer.slots[identity] = FIRST_SLOT + len(writer.slots)
        if identity in writer.cells:
            residents.append(Resident(slot, variable.name, size_of_type(writer, variable.type)))
    text: list[str] = []
    costs: list[tuple[int, Position]] = []
    pending: list[tuple[Call | None, tuple[Statement, ...], Block]] = [
        (None, block.statements, block) for block in function.blocks
    ]
    number = 0
    while number < len(pending):
        call, statements, block = pending[number]
        writer.lines, writer.held, writer.at = [], {}, _start(statements, block, function.position)
        start = writer.at
        if call is not None:
            _resume(writer, call)
        done = 0
        for done, statement in enumerate(statements, 1):
            if _statement(writer, statement, len(pending)):
                assert isinstance(statement, Call)
                pending.append((statement, statements[done:], block))
                break
        else:
            _end(writer, block)
            done += 1
        costs.append((max(done, 1), start))
        text.append(f"def b{number}(f):\n" + "\n".join(writer.lines))
        number += 1
    source = "\n".join(text)
    exec(compile(source, f"<{function.name}>", "exec"), writer.names)
    blocks = tuple((writer.names[f"b{at}"], *cost) for at, cost in enumerate(costs))
    parameters = tuple((writer.slots[item.identity], item.type) for item in function.parameters)
    return Code(
        function.name,
        blocks,
        FIRST_SLOT + len(writer.slots),
        parameters,
        tuple(residents),
        function.position,
        source,
    )


def _start(statements: tuple[Statement, ...], block: Block, fallback: Position) -> Position:
    if statements:
        return statements[0].position
    end = block.terminator
    if isinstance(end, Switch):
        return end.syntax.position
    found = getattr(end, "position", None)
    return found if isinstance(found, Position) else fallback
