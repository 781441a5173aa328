"""Units joined into one program, as a linker does it, and the memory that such a program starts with.

Objects with static storage get numbers, by which generated code finds them in a memory. Integers of initialisers are
stored at once; addresses and the like are assignments that generated code runs.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

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
from stepring.paths.memory import LARGEST, Cells, FunctionPointer, Memory, forget, new_cells, write_value
from stepring.paths.translate import Code, translate
from stepring.paths.types import Event, Externals, Undefined, Unsettled
from stepring.places import Position

_NOWHERE = Position("", 0)


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

    ``codes`` are the functions made ready to run so far, by unit, name and whether they are watched; ``found``
    those that were asked for by name.
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
    found: dict[str, tuple[int, str]] = field(default_factory=dict)

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
        values = [memory.cells, Run(made, memory, None, None, None), None]
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


@dataclass(slots=True)
class Run:
    """What generated code needs of the run that it is part of."""

    program: Program
    memory: Memory
    externals: Externals | None
    volatile: Callable[[Memory, str, str], None] | None
    observe: Callable[[Event], None] | None
    device: Callable[[int, int, str], Any] | None = None
    unknown: dict[str, str] = field(default_factory=dict)
