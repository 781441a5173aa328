"""A ring made ready to be run: its object with some slots, and how each of its functions is to be called.

The one idea: everything a run needs is in a ``Witness`` without calls. The program's own objects are used where the
code names them; where its functions get the ring by a pointer, a structure is made, its storage beside it, and its
capacity and buffer are start values (or what the ring's own function for setting up stores). Whoever runs the witness
again stands in the same world.
"""

import re
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal, TypeAlias

from stepring.meaning.scope import size_of
from stepring.meaning.types import (
    ArrayType,
    Call,
    CType,
    FloatType,
    Function,
    FunctionName,
    FunctionType,
    IntType,
    PointerType,
    StructLayout,
    StructType,
    TypedUnit,
    Variable,
    VoidType,
)
from stepring.paths.interpreter import Program, program
from stepring.paths.memory import Cells, Memory, read_value
from stepring.paths.replay import Unfit, pointed, prepared
from stepring.paths.types import Undefined, Unsettled
from stepring.paths.witness import Ending, Made, Reference, StartValue, Value, Witness
from stepring.places import Origin
from stepring.shapes.ring_keys import inner_structs
from stepring.shapes.types import Bound, Ring

NOWHERE = Ending("endless", Origin("", 1, 1, 1))
RING, STORAGE, GIVEN, TAKEN = "ring", "storage", "given", "taken"
MOST_BLOCKS = 150
"""Functions with more blocks than this do more than work on a ring, and are not run."""
THING_BYTES = 1 << 16
"""The size of the largest structure that is made only to give a function something to point to."""
_LENGTH = re.compile(r"len|^n$|^n[a-z]?_|num|size|count|cnt|bytes|bt[rwp]$|amount|items|max|^nb|^l$|^sz$")

Role: TypeAlias = Literal["ring", "bound", "length", "value", "buffer", "thing", "null", "other"]


@dataclass(frozen=True, slots=True)
class Parameter:
    """What a parameter of a ring's function is for.

    ``ring``: a pointer to (a part of) the ring's object at ``path``. ``buffer``: a pointer to ``type``s. ``length``: a
    number beside a buffer. ``value``: the only number. ``other``: a further number. ``thing``: a pointer to another
    structure. ``bound``: the capacity.
    """

    role: Role
    type: CType
    path: str = ""
    name: str = ""
    to: str = ""


@dataclass(frozen=True, slots=True)
class Operation:
    """A function of the ring with its parameters; ``helper``: only other functions of the program call it."""

    function: Function
    parameters: tuple[Parameter, ...]
    helper: bool

    def has(self, role: Role) -> bool:
        """Whether some parameter has that role."""
        return any(item.role == role for item in self.parameters)


@dataclass(slots=True, eq=False)
class Group:
    """The program that several rings belong to.

    ``wanted`` are the functions without body whose result some call uses, ``named`` the lasting variables that each
    function and its callees name.
    """

    program: Program
    functions: dict[str, Function]
    by_name: dict[str, list[Function]]
    wanted: frozenset[str]
    structs: Mapping[str, StructLayout]
    callees: dict[str, frozenset[str]] = field(default_factory=dict)


@dataclass(slots=True, eq=False)
class World:
    """A ring's object in memory: ``slots`` elements of ``element`` bytes from ``offset`` on in ``storage``.

    ``base`` is the witness without calls that this memory was made from; ``parts`` objects of callers' buffers make an
    element. ``places`` are the indices and counts that can be read, as (shown, object, path, role).
    ``kept`` are the objects that the ring's functions can change.
    """

    ring: Ring
    group: Group
    slots: int
    element: int
    base: Witness
    memory: Memory
    storage: Cells | None
    offset: int
    places: tuple[tuple[str, str, str, str], ...]
    operations: tuple[Operation, ...]
    kept: list[Cells] = field(default_factory=list)
    readers: list[tuple[Cells, int, CType]] = field(default_factory=list)
    tokens: tuple[int, ...] = ()
    parts: int = 1
    pointers: dict[Reference, Any] = field(default_factory=dict)

    def values(self) -> tuple[Any, ...]:
        """What the indices and counts hold; a pointer as its offset."""
        found: list[Any] = []
        for cells, offset, type_ in self.readers:
            if cells.known is None and isinstance(type_, IntType):
                size = max(1, type_.width // 8)
                found.append(int.from_bytes(cells.data[offset : offset + size], "little", signed=type_.signed))
                continue
            try:
                value = read_value(self.memory, cells, offset, type_, "index")
            except (Undefined, Unsettled):
                value = None
            found.append(value[1] if isinstance(value, tuple) else value)
        return tuple(found)

    def slot(self, number: int) -> int:
        """The bytes of a slot as one number."""
        assert self.storage is not None
        at = self.offset + number * self.element
        return int.from_bytes(self.storage.data[at : at + self.element], "little")

    def raw(self) -> bytes:
        """All slots' bytes."""
        if self.storage is None:
            return b""
        return bytes(self.storage.data[self.offset : self.offset + self.slots * self.element])

    def blot(self) -> None:
        """Fill all slots with what no element is, so that a store of zero shows too."""
        if self.storage is not None:
            size = self.slots * self.element
            self.storage.data[self.offset : self.offset + size] = b"\xa5" * size

    def pointer(self, value: Value) -> Any:
        """A witness's value as the interpreter has it."""
        if not isinstance(value, Reference):
            return 0 if value is None else value
        known = self.pointers.get(value)
        if known is None:
            known = self.pointers[value] = pointed(self.group.program, self.memory, value)
        return known

    def contents(self) -> tuple[int, ...]:
        """All slots."""
        return tuple(self.slot(number) for number in range(self.slots)) if self.storage is not None else ()

    def save(self) -> Any:
        """The memory now, for ``load``."""
        others = list(self.memory.others)
        cells = [*self.kept, *(item for item in others if item not in self.kept)]
        saved = [
            (
                item,
                bytes(item.data),
                None if item.known is None else bytes(item.known),
                dict(item.pointers),
                item.alive,
                item.why,
            )
            for item in cells
        ]
        return saved, len(others), self.memory.heap

    def load(self, saved: Any) -> None:
        """Bring back what ``save`` gave."""
        cells, others, self.memory.heap = saved
        for item, data, known, pointers, alive, why in cells:
            item.data[:] = data
            item.known = None if known is None else bytearray(known)
            item.pointers = dict(pointers)
            item.alive, item.why = alive, why
        del self.memory.others[others:]


# ------------------------------------------------------------------------------------------------------------ a group


def group_of(units: Sequence[TypedUnit]) -> Group:
    """Join the units of a program for all its rings."""
    made = program(units)
    functions: dict[str, Function] = {}
    by_name: dict[str, list[Function]] = {}
    wanted: set[str] = set()
    for unit in units:
        for function in unit.functions:
            if function.identity not in functions:
                functions[function.identity] = function
                by_name.setdefault(function.name, []).append(function)
            for block in function.blocks:
                for statement in block.statements:
                    if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                        if statement.result is not None:
                            wanted.add(statement.callee.name)
    return Group(made, functions, by_name, frozenset(wanted), made.structs)


def called(group: Group, identity: str) -> frozenset[str]:
    """The functions that a function may call by name, directly or not, itself included."""
    known = group.callees.get(identity)
    if known is not None:
        return known
    found = {identity}
    pending = [identity]
    while pending:
        function = group.functions.get(pending.pop())
        for block in function.blocks if function is not None else ():
            for statement in block.statements:
                if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                    for callee in group.by_name.get(statement.callee.name, ()):
                        if callee.identity not in found and len(found) < 200:
                            found.add(callee.identity)
                            pending.append(callee.identity)
    group.callees[identity] = frozenset(found)
    return group.callees[identity]


# ----------------------------------------------------------------------------------------------------------- the object


@dataclass(frozen=True, slots=True)
class _Root:
    """The object that holds the ring: a made structure, or one of the program's own."""

    name: str
    type: CType
    made: str


def world_of(group: Group, ring: Ring, slots: int) -> World | None:
    """The ring with that many slots, None where its object cannot be made or its indices cannot be read."""
    functions = [group.functions[name] for name in (*ring.functions, *ring.helpers) if name in group.functions]
    needed = {key[1] for key in _keys(ring) if key and key[0] == "member"}
    root: _Root | None = None
    if needed:
        root = _root(group, functions, needed, set(ring.functions))
        if root is None:
            return None
    made: list[Made] = []
    start: list[StartValue] = []
    assumed: list[str] = []
    if root is not None and root.made:
        made.append(Made(RING, root.made, 1))
    place = _place_of(group, ring.storage_key[:-1] if ring.storage_key[-1:] == ("*",) else ring.storage_key, root)
    if ring.storage_key and place is None:
        return None
    element = ring.element_size or 1
    pointed = ring.storage_key[-1:] == ("*",)
    if pointed and place is not None:
        name = _type_name(_pointed_type(group, place, root))
        if name is None:
            return None
        made.append(Made(STORAGE, name[0], slots * max(1, element // name[1])))
        start.append(StartValue(place[0], place[1], Reference(STORAGE)))
        assumed.append(f"the storage has {slots} elements")
    bound = ring.bound
    if bound is not None and bound.key and bound.form != "argument":
        found = _place_of(group, bound.key, root)
        if found is not None:
            start.append(StartValue(*found, slots - bound.plus))
    places: list[tuple[str, str, str, str]] = []
    for index in ring.indices:
        found = _place_of(group, index.key, root)
        if found is None:
            return None
        shown = index.name.rsplit(".", 1)[-1]
        places.append((shown, *found, index.role))
        if index.form == "pointer" and pointed:
            start.append(StartValue(*found, Reference(STORAGE)))
    struct = _element_struct(group, place, root, pointed)
    data = _data(group, element, struct)
    tokens = tokens_for(data.width, slots)
    made.append(Made(GIVEN, data.type, len(tokens) * data.parts))
    made.append(Made(TAKEN, data.type, (2 * slots + 4) * data.parts))
    start.extend(_given(tokens, data))
    operations = tuple(_operations(group, ring, functions, root, made, struct, element))
    base = Witness(
        group.program.model.name,
        tuple(made),
        tuple(start),
        (),
        NOWHERE,
        tuple(item[:3] for item in places),
        tuple(assumed),
    )
    try:
        memory = prepared(group.program, base)
        world = World(
            ring,
            group,
            slots,
            element,
            base,
            memory,
            None,
            0,
            tuple(places),
            operations,
            tokens=tokens,
            parts=data.parts,
        )
        _bind(world, place, pointed)
    except (Unfit, KeyError, ValueError, Undefined, Unsettled):
        return None
    return world


def _bind(world: World, place: tuple[str, str] | None, pointed: bool) -> None:
    """Find the storage's and the indices' bytes in the memory, and all objects that the functions can change."""
    memory, group = world.memory, world.group
    if place is not None:
        cells, offset, low, high = memory.address(STORAGE if pointed else "".join(place))
        world.storage, world.offset = cells, offset
        if high - low < world.slots * world.element and not pointed:
            raise ValueError("the storage is smaller than the ring")
    for _, name, path, _ in world.places:
        cells, offset, _, _ = memory.address(name + path)
        world.readers.append((cells, offset, memory.type_at(name + path)))
    numbers: set[int] = set()
    for operation in world.operations:
        for identity in called(group, operation.function.identity):
            function = group.functions[identity]
            for variable in function.variables:
                if variable.lasting:
                    for key, number in group.program.numbers.items():
                        if key[1] == variable.identity:
                            numbers.add(number)
    group.program.grow(memory)
    world.kept = [memory.cells[number] for number in sorted(numbers)]


def _keys(ring: Ring) -> Iterator[tuple[str, ...]]:
    yield ring.storage_key
    yield from (index.key for index in ring.indices)


def _root(group: Group, functions: Sequence[Function], needed: set[str], entered: set[str]) -> _Root | None:
    """The object that holds all the structures that are needed."""
    holders: Counter[str] = Counter()
    statics: Counter[str] = Counter()
    known: dict[str, Variable] = {}
    for function in functions:
        weight = 100 if function.identity in entered else 1  # a function for all says less than who calls it
        for parameter in function.parameters:
            struct = _struct_of(parameter.type)
            if struct is not None and needed <= inner_structs(struct, group.structs):
                holders[struct] += weight
        for variable in function.variables:
            if variable.lasting:
                inner = variable.type
                while isinstance(inner, ArrayType):
                    inner = inner.element
                if isinstance(inner, StructType) and needed <= inner_structs(inner.identity, group.structs):
                    statics[variable.identity] += weight
                    known[variable.identity] = variable
    if holders and holders.total() >= statics.total():
        # The outermost structure serves the most functions: those that get a part of it get its address.
        def serves(struct: str) -> int:
            inside = inner_structs(struct, group.structs)
            return sum(count for name, count in holders.items() if name in inside)

        best = min(holders, key=lambda name: (-serves(name), group.structs[name].size or 0, name))
        layout = group.structs.get(best)
        if layout is None or layout.size is None or layout.size > THING_BYTES:
            return None
        return _Root(RING, StructType(best, layout.union), best)
    if statics:
        best = min(statics, key=lambda name: (-statics[name], name))
        return _Root(best, known[best].type, "")
    return None


def _struct_of(type_: CType) -> str | None:
    return type_.to.identity if isinstance(type_, PointerType) and isinstance(type_.to, StructType) else None


def _place_of(group: Group, key: tuple[str, ...], root: _Root | None) -> tuple[str, str] | None:
    """The object and path of what a key names."""
    if not key:
        return None
    if key[0] == "var":
        rest = key[2:]
        path = "".join("[0]" if word == "[]" else word for word in rest)
        return (key[1], path) if all(word == "[]" or word.startswith(".") for word in rest) else None
    if key[0] != "member" or root is None:
        return None
    inner = path_to(group.structs, root.type, key[1])
    if inner is None:
        return None
    rest_path = "".join("[0]" if word == "[]" else word for word in key[3:])
    return root.name, f"{inner}.{key[2]}{rest_path}"


def path_to(structs: Mapping[str, StructLayout], type_: CType, struct: str) -> str | None:
    """The path from an object of a type to the first structure of that identity in it."""
    pending: list[tuple[str, CType]] = [("", type_)]
    while pending:
        path, at = pending.pop(0)
        while isinstance(at, ArrayType):
            path, at = path + "[0]", at.element
        if isinstance(at, StructType):
            if at.identity == struct:
                return path
            layout = structs.get(at.identity)
            for member in layout.fields if layout is not None else ():
                if member.name:
                    pending.append((f"{path}.{member.name}", member.type))
                elif isinstance(member.type, StructType):
                    pending.append((path, member.type))
    return None


def _type_at(group: Group, place: tuple[str, str], root: _Root | None) -> CType:
    made = (Made(RING, root.made, 1),) if root is not None and root.made else ()
    memory = prepared(group.program, Witness(group.program.model.name, made, (), (), NOWHERE))
    return memory.type_at("".join(place))


def _pointed_type(group: Group, place: tuple[str, str], root: _Root | None) -> CType:
    """What a pointer at a place points to."""
    type_ = _type_at(group, place, root)
    return type_.to if isinstance(type_, PointerType) else VoidType()


def _element_struct(
    group: Group, place: tuple[str, str] | None, root: _Root | None, pointed: bool
) -> StructType | None:
    """The structure that the ring's elements are, if they are one."""
    if place is None:
        return None
    type_ = _type_at(group, place, root)
    if pointed:
        type_ = type_.to if isinstance(type_, PointerType) else VoidType()
    while isinstance(type_, ArrayType):
        type_ = type_.element
    return type_ if isinstance(type_, StructType) else None


def _type_name(type_: CType) -> tuple[str, int] | None:
    """A made object's type for elements of a type, with its size in bytes."""
    match type_:
        case IntType(name=name, width=width):
            return name, max(1, width // 8)
        case StructType(identity=identity):
            return identity, 1 << 30  # one object each
        case PointerType(width=width):
            return ("unsigned long" if width == 64 else "unsigned int" if width == 32 else "unsigned short", width // 8)
        case VoidType():
            return "unsigned char", 1
    return None


def tokens_for(width: int, slots: int) -> tuple[int, ...]:
    """Element values of ``width`` bytes that are told apart easily and that no protocol takes for something special."""
    letters = [*range(0x41, 0x5B), *range(0x61, 0x7B), *range(0x30, 0x3A)]
    count = max(64, min(600, 2 * slots + 40))
    found: list[int] = []
    for number in range(count):
        high, low = divmod(number, len(letters))
        found.append(letters[low] + (0x41 + high << 8 if width > 1 else 0))
    return tuple(found)


@dataclass(frozen=True, slots=True)
class Data:
    """What callers' buffers are made of: ``parts`` objects of ``type`` make one element; the element's value goes to
    ``member`` (a path in it, empty for the whole), an integer of ``width`` bytes."""

    type: str
    parts: int
    member: str
    width: int


def _data(group: Group, element: int, struct: StructType | None) -> Data:
    if struct is not None:
        member = _widest(group.structs, struct, "")
        if member is not None:
            return Data(struct.identity, 1, *member)
    names = {1: "unsigned char", 2: "unsigned short", 4: "unsigned int"}
    if element in names:
        return Data(names[element], 1, "", element)
    return Data("unsigned char", element, "", min(element, 2))


def _widest(structs: Mapping[str, StructLayout], struct: StructType, path: str) -> tuple[str, int] | None:
    """A structure's widest integer member by its path, with its size in bytes."""
    layout = structs.get(struct.identity)
    found: list[tuple[str, int]] = []
    for member in layout.fields if layout is not None else ():
        type_, where = member.type, f"{path}.{member.name}"
        while isinstance(type_, ArrayType):
            type_, where = type_.element, where + "[0]"
        if isinstance(type_, IntType) and member.bits is None and member.name and type_.name != "_Bool":
            found.append((where, max(1, type_.width // 8)))
        elif isinstance(type_, StructType) and member.name:
            inner = _widest(structs, type_, where)
            if inner is not None:
                found.append(inner)
    return max(found, key=lambda item: item[1], default=None)


def _given(tokens: Sequence[int], data: Data) -> Iterator[StartValue]:
    for number, token in enumerate(tokens):
        if data.parts == 1:
            yield StartValue(GIVEN, f"[{number}]{data.member}", token)
            continue
        for byte in range(data.width):
            yield StartValue(GIVEN, f"[{number * data.parts + byte}]", token >> 8 * byte & 0xFF)


# ----------------------------------------------------------------------------------------------------------- parameters


def _operations(
    group: Group,
    ring: Ring,
    functions: Sequence[Function],
    root: _Root | None,
    made: list[Made],
    struct: StructType | None,
    element: int,
) -> Iterator[Operation]:
    entered = set(ring.functions)
    needed = {key[1] for key in _keys(ring) if key and key[0] == "member"}
    for function in functions:
        if len(function.blocks) > MOST_BLOCKS:
            continue
        parameters = _parameters(group, function, root, made, ring.bound, struct, needed)
        if parameters is not None:
            parameters = tuple(_lengths(tuple(_one_buffer(parameters, element, made))))
            yield Operation(function, parameters, function.identity not in entered)


def _parameters(
    group: Group,
    function: Function,
    root: _Root | None,
    made: list[Made],
    bound: Bound | None,
    struct: StructType | None,
    needed: set[str],
) -> tuple[Parameter, ...] | None:
    """What each parameter is for; None where one cannot be given a value."""
    found: list[Parameter] = []
    mine = False
    for variable in function.parameters:
        type_ = variable.type
        name = variable.name
        if isinstance(type_, IntType | FloatType):
            told = bound is not None and bound.form == "argument" and bound.key[-1] == name
            role: Role = "bound" if told else "value"
            found.append(Parameter(role, type_, name=name))
            continue
        if not isinstance(type_, PointerType):
            return None
        to = type_.to
        holds = isinstance(to, StructType) and not needed.isdisjoint(inner_structs(to.identity, group.structs))
        path = path_to(group.structs, root.type, to.identity) if root and holds and isinstance(to, StructType) else None
        if path is not None and not mine:
            mine = True
            found.append(Parameter("ring", type_, path, name, root.name if root else ""))
        elif isinstance(to, FunctionType):
            found.append(Parameter("null", type_, name=name))
        elif isinstance(to, IntType | VoidType | PointerType) or (struct is not None and to == struct):
            found.append(Parameter("buffer", type_, name=name))
        elif isinstance(to, StructType) and (size_of(group.structs, to) or THING_BYTES) < THING_BYTES:
            thing = f"thing_{len(made)}"
            known = next((item.name for item in made if item.type == to.identity and item.name.startswith("thing")), "")
            if not known:
                made.append(Made(thing, to.identity, 1))
            found.append(Parameter("thing", type_, known or thing, name))
        else:
            found.append(Parameter("null", type_, name=name))
    return tuple(found)


def _one_buffer(found: Sequence[Parameter], element: int, made: list[Made]) -> Iterator[Parameter]:
    """Of several pointers to numbers one is the buffer of elements; a count comes back through the others."""

    def fits(item: Parameter) -> int:
        to = item.type.to if isinstance(item.type, PointerType) else VoidType()
        if isinstance(to, IntType):
            return 2 if to.width == 8 * element else 0
        return 1 if isinstance(to, VoidType) else 3 if isinstance(to, StructType) else 0

    buffer = max((item for item in found if item.role == "buffer"), key=fits, default=None)
    for item in found:
        to = item.type.to if isinstance(item.type, PointerType) else None
        if item.role != "buffer" or item is buffer or not isinstance(to, IntType):
            yield item
            continue
        name = f"told_{len(made)}"
        made.append(Made(name, to.name, 1))
        yield Parameter("thing", item.type, name, item.name)


def _lengths(found: Sequence[Parameter]) -> Iterator[Parameter]:
    """Tell which number is the length of a buffer, which the only value, and which something else."""
    numbers = [item for item in found if item.role == "value"]
    buffers = any(item.role == "buffer" for item in found)
    length: Parameter | None = None
    if buffers and numbers:
        named = [item for item in numbers if _LENGTH.search(item.name.lower())]
        length = (named or numbers)[-1]
    for item in found:
        if item.role != "value" or (not buffers and item is numbers[0]):
            yield item
        else:
            yield Parameter("length" if item is length else "other", item.type, name=item.name)


def arguments(operation: Operation, *, number: int, given: Value, length: int, bound: int) -> tuple[Value, ...]:
    """The arguments of one call: ``number`` for a value, ``given`` for a buffer, ``length`` for its length."""
    found: list[Value] = []
    for item in operation.parameters:
        match item.role:
            case "ring":
                found.append(Reference(item.to, 0, item.path))
            case "bound":
                found.append(bound)
            case "length":
                found.append(length)
            case "value":
                found.append(number)
            case "buffer":
                found.append(given)
            case "thing":
                found.append(Reference(item.path))
            case "null":
                found.append(None)
            case "other":
                found.append(0)
    return tuple(found)
