"""A ring made ready to be run: its object with some slots, and how each of its functions is to be called.

The one idea: everything a run needs is in a ``Witness`` without calls. The program's own objects are used where the
code names them; where its functions get the ring by a pointer, a structure is made, its storage beside it, and its
capacity and buffer are start values (or what the ring's own function for setting up stores). Whoever runs the witness
again stands in the same world.
"""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from stepring.meaning.types import (
    ArrayType,
    Call,
    Cast,
    Const,
    CType,
    Expr,
    Function,
    FunctionName,
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
from stepring.shapes.ring_elements import data_of, given, tokens_for, type_name
from stepring.shapes.ring_keys import inner_structs
from stepring.shapes.ring_parameters import (
    GIVEN,
    RING,
    STORAGE,
    TAKEN,
    THING_BYTES,
    Operation,
    Root,
    keys_of,
    operations_of,
    path_to,
)
from stepring.shapes.types import Ring

NOWHERE = Ending("endless", Origin("", 1, 1, 1))


@dataclass(slots=True, eq=False)
class Group:
    """The program that several rings belong to.

    ``wanted`` are the functions without body whose result some call uses, ``entered`` the functions of any ring.
    ``unconditional`` are those whose first argument is a plain number in every call: no condition.
    """

    program: Program
    functions: dict[str, Function]
    by_name: dict[str, list[Function]]
    wanted: frozenset[str]
    structs: Mapping[str, StructLayout]
    entered: frozenset[str] = frozenset()
    unconditional: frozenset[str] = frozenset()
    callees: dict[str, frozenset[str]] = field(default_factory=dict)


@dataclass(slots=True, eq=False)
class World:
    """A ring's object in memory: ``slots`` elements of ``element`` bytes from ``offset`` on in ``storage``.

    ``base`` is the witness without calls that this memory was made from; ``parts`` objects of callers' buffers make an
    element. ``places`` are the indices and counts that can be read, as (shown, object, path, role).
    ``kept`` are the objects that the ring's functions can change, ``feeders`` other rings' functions that change them.
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
    feeders: tuple[Operation, ...] = ()
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

    def keeps_size(self) -> bool:
        """Whether the ring's bound is still the number of slots."""
        fixed = [item for item in self.base.start if isinstance(item.value, int) and item.object not in (GIVEN, TAKEN)]
        return all(self.memory.read(item.object + item.path) == item.value for item in fixed)

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


def group_of(units: Sequence[TypedUnit], entered: frozenset[str] = frozenset()) -> Group:
    """Join the units of a program for all its rings; ``entered`` are the functions of any of them."""
    made = program(units)
    functions: dict[str, Function] = {}
    by_name: dict[str, list[Function]] = {}
    wanted: set[str] = set()
    constant: dict[str, bool] = {}
    for unit in units:
        for function in unit.functions:
            if function.identity not in functions:
                functions[function.identity] = function
                by_name.setdefault(function.name, []).append(function)
            for block in function.blocks:
                for statement in block.statements:
                    if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                        name = statement.callee.name
                        if statement.result is not None:
                            wanted.add(name)
                        first = statement.arguments[:1]
                        constant[name] = constant.get(name, True) and _is_no_condition(first)
    unconditional = frozenset(name for name, plain in constant.items() if plain)
    return Group(made, functions, by_name, frozenset(wanted), made.structs, entered, unconditional)


def _is_no_condition(arguments: Sequence[Expr]) -> bool:
    """Whether the first argument is a number, and neither true nor false: a line, a code of an error."""
    found = arguments[0] if arguments else None
    while isinstance(found, Cast):
        found = found.operand
    return isinstance(found, Const) and found.value not in (0, 1)


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


def _lasting(group: Group, identity: str) -> set[str]:
    """The lasting variables that a function and what it calls name."""
    return {
        variable.identity
        for name in called(group, identity)
        for variable in group.functions[name].variables
        if variable.lasting
    }


def _feeding(group: Group, functions: Sequence[Function]) -> list[Function]:
    """Functions of other rings that work on what these functions work on."""
    mine = {function.identity for function in functions}
    named = {name for identity in mine for name in _lasting(group, identity)}
    return [
        group.functions[identity]
        for identity in sorted(group.entered - mine)
        if identity in group.functions and named & _lasting(group, identity)
    ]


# ----------------------------------------------------------------------------------------------------------- the object


def world_of(group: Group, ring: Ring, slots: int) -> World | None:
    """The ring with that many slots, None where its object cannot be made or its indices cannot be read."""
    functions = [group.functions[name] for name in (*ring.functions, *ring.helpers) if name in group.functions]
    needed = {key[1] for key in keys_of(ring) if key and key[0] == "member"}
    root: Root | None = None
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
        name = type_name(_pointed_type(group, place, root))
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
    data = data_of(group.structs, element, struct)
    tokens = tokens_for(data.width, slots)
    made.append(Made(GIVEN, data.type, len(tokens) * data.parts))
    made.append(Made(TAKEN, data.type, (2 * slots + 4) * data.parts))
    start.extend(given(tokens, data))
    operations = tuple(operations_of(group.structs, ring, functions, root, made, struct, element))
    feeders = tuple(operations_of(group.structs, ring, _feeding(group, functions), root, made, struct, element))
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
            feeders,
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
    named = {
        name
        for operation in (*world.operations, *world.feeders)
        for name in _lasting(group, operation.function.identity)
    }
    for key, number in group.program.numbers.items():
        if key[1] in named:
            numbers.add(number)
    group.program.grow(memory)
    world.kept = [memory.cells[number] for number in sorted(numbers)]


def _root(group: Group, functions: Sequence[Function], needed: set[str], entered: set[str]) -> Root | None:
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
    if holders and not any(weight >= 100 for weight in statics.values()):
        # The outermost structure serves the most functions: those that get a part of it get its address.
        def serves(struct: str) -> int:
            inside = inner_structs(struct, group.structs)
            return sum(count for name, count in holders.items() if name in inside)

        best = min(holders, key=lambda name: (-serves(name), group.structs[name].size or 0, name))
        layout = group.structs.get(best)
        if layout is None or layout.size is None or layout.size > THING_BYTES:
            return None
        return Root(RING, StructType(best, layout.union), best)
    if statics:
        best = min(statics, key=lambda name: (-statics[name], name))
        return Root(best, known[best].type, "")
    return None


def _struct_of(type_: CType) -> str | None:
    return type_.to.identity if isinstance(type_, PointerType) and isinstance(type_.to, StructType) else None


def _place_of(group: Group, key: tuple[str, ...], root: Root | None) -> tuple[str, str] | None:
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


def _type_at(group: Group, place: tuple[str, str], root: Root | None) -> CType:
    made = (Made(RING, root.made, 1),) if root is not None and root.made else ()
    memory = prepared(group.program, Witness(group.program.model.name, made, (), (), NOWHERE))
    return memory.type_at("".join(place))


def _pointed_type(group: Group, place: tuple[str, str], root: Root | None) -> CType:
    """What a pointer at a place points to."""
    type_ = _type_at(group, place, root)
    return type_.to if isinstance(type_, PointerType) else VoidType()


def _element_struct(group: Group, place: tuple[str, str] | None, root: Root | None, pointed: bool) -> StructType | None:
    """The structure that the ring's elements are, if they are one."""
    if place is None:
        return None
    type_ = _type_at(group, place, root)
    if pointed:
        type_ = type_.to if isinstance(type_, PointerType) else VoidType()
    while isinstance(type_, ArrayType):
        type_ = type_.element
    return type_ if isinstance(type_, StructType) else None
