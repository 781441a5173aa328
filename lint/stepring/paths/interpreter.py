"""The exact interpreter: runs a program's IR on concrete values, with the target's sizes, and stops where C ends.

``program`` joins typed units as a linker would; ``fresh`` gives its memory as it is at start; ``run`` calls a function
on a memory. Whatever C leaves undefined ends a run with its place, and so does whatever the text that was read does
not settle: nothing is ever assumed. A run with the same program, memory, arguments and externals always gives the
same outcome.

Choices that C leaves open are those of lowering (operands from left to right) and of the trade's compilers: bytes in
little-endian order, signed conversion modulo 2^N, arithmetic right shift. A library function of ``library.BUILTINS``
is carried out here even if the program has its own.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from stepring.meaning.fold import convert
from stepring.meaning.initial import unnamed_member
from stepring.meaning.models import integer
from stepring.meaning.scope import size_of
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Block,
    Call,
    Clobber,
    Const,
    CType,
    DataModel,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    FunctionType,
    InitialValue,
    IntType,
    MemberPlace,
    PlaceExpr,
    PointerType,
    Return,
    Statement,
    StructLayout,
    StructType,
    TextConst,
    TypedUnit,
    Unknown,
    Variable,
    VariablePlace,
    VoidType,
)
from stepring.paths.arithmetic import adopted
from stepring.paths.library import BUILTINS
from stepring.paths.memory import LARGEST, Cells, FunctionPointer, Memory, forget, new_cells, write_value
from stepring.paths.translate import Code, Enter, Leave, translate
from stepring.paths.types import Event, Externals, Outcome, Undefined, Unsettled
from stepring.places import Position

DEEPEST = 2000
"""The most calls that may be open at once; deeper recursion ends a run with ``limit``."""

_NOWHERE = Position("", 0)


# ----------------------------------------------------------------------------------------------------------- program


@dataclass(slots=True)
class Static:
    """An object with static storage: its size in bytes (None: not known) and what it holds at start.

    ``defined`` is False for one whose definition no unit holds; ``text`` is a string literal's bytes. ``why`` says why
    nothing of the object can be kept, where that is so.
    """

    variable: Variable
    unit: int
    size: int | None
    initial: tuple[InitialValue, ...] = ()
    defined: bool = False
    text: bytes | None = None
    why: str = ""


@dataclass(slots=True, eq=False)
class Program:
    """Units joined into one program. Make one with ``program``.

    ``codes`` are the functions made ready to run so far, by unit, name and whether they are watched.
    """

    units: tuple[TypedUnit, ...]
    model: DataModel
    structs: dict[str, StructLayout]
    functions: tuple[dict[str, Function], ...]
    external: dict[str, int]
    statics: list[Static] = field(default_factory=list)
    numbers: dict[tuple[int, str], int] = field(default_factory=dict)
    literals: dict[tuple[bytes, int], int] = field(default_factory=dict)
    pointers: dict[tuple[int, str], FunctionPointer] = field(default_factory=dict)
    codes: dict[tuple[int, str, bool], Code] = field(default_factory=dict)
    starts: dict[int, Code] = field(default_factory=dict)

    def static_number(self, unit: int, variable: Variable) -> int:
        """The number of an object with static storage; one that was never met is added as not defined."""
        key = (unit if variable.storage in ("static", "static-local") else -1, variable.identity)
        number = self.numbers.get(key)
        if number is None:
            number = self.numbers[key] = len(self.statics)
            self.statics.append(Static(variable, unit, size_of(self.units[unit].types.structs, variable.type)))
        return number

    def static_named(self, name: str) -> int | None:
        """The number of the object of that name, ``function:name`` or identity; ``KeyError`` if several have it."""
        exact = [number for (_, identity), number in self.numbers.items() if identity == name]
        found = exact or [number for (_, identity), number in self.numbers.items() if _called(identity, name)]
        if len(found) > 1:
            names = ", ".join(sorted(self.statics[number].variable.identity for number in found))
            raise KeyError(f"{name!r} could be any of {names}")
        return found[0] if found else None

    def literal_number(self, text: str, element: CType | None) -> int:
        """The number of a string literal's array, its final null included; equal literals share one."""
        size = max(1, element.width // 8) if isinstance(element, IntType) else 1
        encoded = b"".join((ord(letter) & ((1 << 8 * size) - 1)).to_bytes(size, "little") for letter in text + "\0")
        number = self.literals.get((encoded, size))
        if number is None:
            number = self.literals[encoded, size] = len(self.statics)
            kind = ArrayType(element or integer(self.model, "char"), len(encoded) // size)
            variable = Variable("a string literal", f"literal {number}", kind, "static", const=True)
            self.statics.append(Static(variable, -1, len(encoded), (), True, encoded))
        return number

    def function_pointer(self, unit: int, name: str) -> FunctionPointer:
        """The pointer to a function as a unit names it; equal functions give the same one."""
        owner = unit if name in self.functions[unit] else self.external.get(name, -1)
        found = self.pointers.get((owner, name))
        if found is None:
            # The address space's last quarter is for functions.
            address = (3 << (self.model.pointer - 2)) + 4 * len(self.pointers)
            found = self.pointers[owner, name] = FunctionPointer(owner, name, address)
        return found

    def function_at(self, address: int) -> FunctionPointer | None:
        """The function whose address that is."""
        return next((found for found in self.pointers.values() if found.address == address), None)

    def code(self, unit: int, name: str, watched: bool) -> Code:
        """A function made ready to run."""
        key = (unit, name, watched)
        found = self.codes.get(key)
        if found is None:
            found = self.codes[key] = translate(self, unit, self.functions[unit][name], watched=watched)
        return found

    def grow(self, memory: Memory) -> None:
        """Add the objects that a memory lacks so far, with their initial values."""
        while len(memory.cells) < len(self.statics):
            first = len(memory.cells)
            for static in self.statics[first:]:
                memory.cells.append(_cells_of(memory, static))
            for number in range(first, len(memory.cells)):
                _initialise(self, memory, number)


def _called(identity: str, name: str) -> bool:
    """Whether an identity (``name``, ``file:name`` or ``file:function:name@line``) is what a person means by a name."""
    plain = identity.split("@", 1)[0]
    return plain == name or plain.endswith(f":{name}")


def program(units: Sequence[TypedUnit]) -> Program:
    """Join units into a program. ``ValueError`` if there is none or they are for different targets."""
    if not units:
        raise ValueError("a program needs at least one unit")
    model = units[0].types.model
    if any(unit.types.model != model for unit in units):
        raise ValueError("the units of a program must have one data model")
    structs: dict[str, StructLayout] = {}
    functions: list[dict[str, Function]] = []
    external: dict[str, int] = {}
    for number, unit in enumerate(units):
        for identity, layout in unit.types.structs.items():
            if identity not in structs or structs[identity].size is None:
                structs[identity] = layout
        functions.append({function.name: function for function in unit.functions})
        for function in unit.functions:
            if not function.static:
                external.setdefault(function.name, number)
    made = Program(tuple(units), model, structs, tuple(functions), external)
    for number, unit in enumerate(units):
        for item in unit.objects:
            static = made.statics[made.static_number(number, item.variable)]
            if not static.defined or item.initial:
                static.variable, static.unit = item.variable, number
                static.size = size_of(unit.types.structs, item.variable.type)
                static.initial, static.defined = item.initial, True
    for number, unit in enumerate(units):
        for function in unit.functions:
            for variable in function.variables:
                if variable.lasting:
                    static = made.statics[made.static_number(number, variable)]
                    if static.size is None:
                        static.size = size_of(unit.types.structs, variable.type)
    for static in made.statics:
        if static.size is not None and static.size > LARGEST:
            # Accesses are then compared with the bounds, and say why they do not go on.
            static.why = f"{static.variable.name} has {static.size} bytes, which is too large to be kept"
            static.size = None
    return made


def _cells_of(memory: Memory, static: Static) -> Cells:
    variable = static.variable
    size = static.size
    if size is None and static.defined:
        element = variable.type.element if isinstance(variable.type, ArrayType) else variable.type
        size = size_of(memory.program.structs, element) or 0  # a tentative array of unknown length has one (6.9.2p5)
    if static.why:
        size = 0
    cells = new_cells(variable.name, size or 0, memory.next_static, zero=static.defined)
    memory.next_static += ((size or 0) + 31) // 16 * 16
    cells.why = static.why
    if not static.defined:
        cells.why = f"{variable.name} is defined in no unit that was read"
    if static.text is not None:
        cells.data[:] = static.text
        cells.frozen = True
    return cells


def _initialise(made: Program, memory: Memory, number: int) -> None:
    """Store the initial value of a static object: integers at once, the rest as assignments that are run."""
    static = made.statics[number]
    cells = memory.cells[number]
    if cells.size == 0:
        return
    later: list[tuple[Statement, PlaceExpr, int | None]] = []
    for item in static.initial:
        place = _place_of(made, static, item.path)
        if place is None:
            continue
        if isinstance(item.value, Const) and isinstance(place[0].type, IntType) and place[1] is not None:
            write_value(cells, place[1], place[0].type, item.value.value)
        else:
            later.append((_start_statement(made, static, place[0], item.value, item.position), *place))
    if later:
        code = made.starts.get(number)
        if code is None:
            type_ = FunctionType(VoidType(), ())
            blocks = tuple(Block((statement,), Return(None, _NOWHERE)) for statement, _, _ in later)
            function = Function("start", "start", type_, (), (), blocks, _NOWHERE, 0, True, False)
            code = made.starts[number] = translate(made, static.unit, function, watched=False)
        for missing in made.statics[len(memory.cells) :]:
            memory.cells.append(_cells_of(memory, missing))
        values = [memory.cells, _Run(made, memory, None, None, None), None]
        for (block, _, _), (_, place_, offset) in zip(code.blocks, later, strict=True):
            try:
                block(values)
            except (Undefined, Unsettled) as trouble:
                size = size_of(made.units[static.unit].types.structs, place_.type)
                forget(cells, offset or 0, size if offset is not None and size else cells.size, trouble.reason)
    cells.frozen = cells.frozen or (static.variable.const and static.defined)


def _place_of(made: Program, static: Static, path: tuple[str | int, ...]) -> tuple[PlaceExpr, int | None] | None:
    """The place that an initialiser's path leads to, with its offset in bytes (None for a bit-field)."""
    structs = made.units[static.unit].types.structs
    place: PlaceExpr = VariablePlace(static.variable)
    offset: int | None = 0
    for number, step in enumerate(path):
        if isinstance(place.type, ArrayType) and isinstance(step, int):
            element = place.type.element
            place = ElementPlace(place, Const(step, integer(made.model, "int")), element)
            offset = None if offset is None else offset + step * (size_of(structs, element) or 0)
        elif isinstance(place.type, StructType):
            layout = structs.get(place.type.identity)
            if layout is None:
                return None
            found = unnamed_member(structs, layout, path[number + 1 :]) if step == "" else layout.field(str(step))
            if found is None:
                return None
            place = MemberPlace(place, place.type.identity, found.name, found.type)
            offset = None if offset is None or found.bits is not None else offset + found.offset // 8
        else:
            return None
    return place, offset


def _start_statement(made: Program, static: Static, place: PlaceExpr, given: Expr, at: Position) -> Statement:
    if isinstance(given, Unknown):
        return Clobber((place,), given.why, at)
    if isinstance(place.type, ArrayType) and isinstance(given, TextConst):
        size_type = integer(made.model, made.model.size_type)
        bytes_ = PointerType(VoidType(), made.model.pointer)
        element = place.type.element
        width = max(1, element.width // 8) if isinstance(element, IntType) else 1
        count = min(len(given.text) + 1, place.type.length or len(given.text) + 1) * width
        goal = AddressOf(place, PointerType(element, made.model.pointer))
        source = TextConst(given.text, PointerType(element, made.model.pointer))
        name = FunctionName("memcpy", FunctionType(bytes_, (bytes_, bytes_, size_type)))
        return Call(name, (goal, source, Const(count, size_type)), None, at)
    return Assign(place, given, at, initial=True)


def fresh(made: Program) -> Memory:
    """The program's memory as it is at start."""
    memory = Memory(made)
    made.grow(memory)
    return memory


# --------------------------------------------------------------------------------------------------------------- run


@dataclass(slots=True)
class _Run:
    """What generated code needs of the run that it is part of."""

    program: Program
    memory: Memory
    externals: Externals | None
    volatile: Callable[[Memory, str, str], None] | None
    observe: Callable[[Event], None] | None
    unknown: dict[str, str] = field(default_factory=dict)


@dataclass(slots=True)
class _Frame:
    """An open call: its code, its values, where it goes on, and the caller's top of memory."""

    code: Code
    values: list[Any]
    block: int
    top: int
    result: CType | None = None

    def __iter__(self) -> Any:
        return iter(self.values)


def run(
    units: Program | Sequence[TypedUnit],
    function: str,
    arguments: Sequence[Any] = (),
    externals: Externals | None = None,
    *,
    steps: int = 1_000_000,
    memory: Memory | None = None,
    volatile: Callable[[Memory, str, str], None] | None = None,
    observe: Callable[[Event], None] | None = None,
) -> Outcome:
    """Call a function of a program with the given arguments (integers, reals, pointers of ``memory``).

    ``externals`` stand in for functions without body. ``memory`` is changed; by default it is a fresh one. ``steps``
    bounds the IR statements that may run. ``volatile`` is told of every access to a volatile object just before it
    happens (memory, place, ``load`` or ``store``) and may change the memory, or run a function on it, as an interrupt
    would. ``observe`` is told of every store, branch, call and return. A static function can be named
    ``file:function``. ``KeyError`` if there is no such function, ``ValueError`` for a wrong number of arguments.
    """
    made = units if isinstance(units, Program) else program(units)
    unit, name = _find(made, function)
    kept = memory if memory is not None else Memory(made)
    state = _Run(made, kept, externals, volatile, observe)
    try:
        code = made.code(unit, name, observe is not None)
    except RecursionError:
        at = made.functions[unit][name].position
        return Outcome("stopped", None, f"{name} has expressions that are nested too deeply", at, name, None, 0)
    made.grow(kept)  # making code ready can bring string literals
    if len(arguments) != len(code.parameters):
        raise ValueError(f"{function} takes {len(code.parameters)} arguments and was given {len(arguments)}")
    given = [adopted(item, type_, name, None) for item, (_, type_) in zip(arguments, code.parameters, strict=True)]
    stack: list[_Frame] = []
    kept.stacks.append(stack)
    top = kept.top
    try:
        return _loop(state, stack, code, given, steps)
    finally:
        kept.stacks.pop()
        for frame in stack:
            _close(kept, frame)
        kept.top = top


def _find(made: Program, function: str) -> tuple[int, str]:
    if function in made.external:
        return made.external[function], function
    found = [
        (number, item.name)
        for number, unit in enumerate(made.units)
        for item in unit.functions
        if item.identity == function or item.name == function
    ]
    if not found:
        raise KeyError(f"no unit has a function {function!r}")
    if len({made.functions[unit][name].identity for unit, name in found}) > 1:
        names = ", ".join(made.functions[unit][name].identity for unit, name in found)
        raise KeyError(f"{function!r} could be any of {names}")
    return found[0]


def _open(state: _Run, code: Code, arguments: Sequence[Any]) -> _Frame:
    memory = state.memory
    values: list[Any] = [memory.cells, state, None] + [None] * (code.width - 3)
    top = memory.top
    for resident in code.residents:
        values[resident.slot] = new_cells(resident.name, resident.size, memory.top)
        memory.top += (resident.size + 31) // 16 * 16
    for (slot, type_), given in zip(code.parameters, arguments, strict=True):
        if isinstance(values[slot], Cells):
            if given is not None:
                write_value(values[slot], 0, type_, given)
        else:
            values[slot] = given
    return _Frame(code, values, 0, top)


def _close(memory: Memory, frame: _Frame) -> None:
    for resident in frame.code.residents:
        frame.values[resident.slot].alive = False
    memory.top = frame.top


def _loop(state: _Run, stack: list[_Frame], code: Code, arguments: Sequence[Any], steps: int) -> Outcome:
    """Run blocks until the first call returns or something ends the run."""
    try:
        frame = _open(state, code, arguments)
    except Unsettled as end:
        return Outcome("stopped", None, end.reason, code.position, code.name, None, 0)
    stack.append(frame)
    blocks, values, number = code.blocks, frame.values, 0
    left = steps
    at: Position = code.position
    try:
        while True:
            block, cost, at = blocks[number]
            left -= cost
            if left < 0:
                return Outcome("limit", None, f"{steps} steps did not suffice", at, frame.code.name, None, steps)
            number = block(values)
            if number.__class__ is int:
                continue
            ending: Any = number
            if ending.__class__ is Enter:
                frame.block, frame.result = ending.after, ending.result
                at = ending.position
                entered = _enter(state, frame, ending)
                if entered is None:
                    number = frame.block
                    continue
                if len(stack) >= DEEPEST:
                    reason = f"{DEEPEST} calls are open at once"
                    return Outcome("limit", None, reason, at, frame.code.name, None, steps - left)
                stack.append(entered)
                frame = entered
                blocks, values, number = frame.code.blocks, frame.values, 0
                continue
            assert isinstance(ending, Leave)
            _close(state.memory, stack.pop())
            if not stack:
                return Outcome("returned", ending.value, "", None, code.name, None, steps - left)
            frame = stack[-1]
            blocks, values, number = frame.code.blocks, frame.values, frame.block
            values[2] = ending.value
    except Undefined as end:
        where = end.position or at
        return Outcome("undefined", None, end.reason, where, frame.code.name, end.fault, steps - left)
    except RecursionError:
        reason = "a function that is called here has expressions that are nested too deeply"
        return Outcome("stopped", None, reason, at, frame.code.name, None, steps - left)
    except Unsettled as end:
        return Outcome("stopped", None, end.reason, end.position or at, frame.code.name, None, steps - left)


def _enter(state: _Run, frame: _Frame, call: Enter) -> _Frame | None:
    """The frame of a called function, or None where it had no body and its result is there already."""
    callee = call.callee
    made = state.program
    if not isinstance(callee, FunctionPointer):
        if callee == 0:
            raise Undefined("null", "a null pointer is called", call.position)
        if callee.__class__ is tuple:
            raise Undefined("pointer", f"{callee[0].name} is called, which is no function", call.position)
        raise Unsettled(f"the address 0x{callee:x} is called, where no function is known", call.position)
    if callee.unit < 0:
        frame.values[2] = _outside_call(state, callee.name, call)
        return None
    code = made.code(callee.unit, callee.name, state.observe is not None)
    if len(made.statics) > len(state.memory.cells):
        made.grow(state.memory)
    arguments = call.arguments
    if len(arguments) != len(code.parameters):
        function = made.functions[callee.unit][callee.name]
        if len(arguments) < len(code.parameters) or not function.type.variadic:
            wanted = len(code.parameters)
            reason = f"{callee.name} takes {wanted} arguments and is called with {len(arguments)}"
            raise Undefined("arguments", reason, call.position)
        arguments = arguments[: len(code.parameters)]
    settled = [
        convert(item, type_) if isinstance(item, int) and isinstance(type_, IntType) else item
        for item, (_, type_) in zip(arguments, code.parameters, strict=True)
    ]
    return _open(state, code, settled)


def _outside_call(state: _Run, name: str, call: Enter) -> Any:
    if name in BUILTINS:
        result = BUILTINS[name](state, call.arguments, call.position)
    else:
        given = state.externals
        if isinstance(given, Mapping):
            function = given.get(name)
            if function is None:
                raise Unsettled(f"{name} has no body in the units that were read", call.position)
            result = function(call.arguments)
        elif given is not None:
            result = given(name, call.arguments)
        else:
            raise Unsettled(f"{name} has no body in the units that were read", call.position)
    if call.result is None:
        return None
    return adopted(result, call.result, name, call.position)
