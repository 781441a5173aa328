"""What the parameters of a ring's function are for, and the arguments of a call.

Types say most: a pointer to the ring's structure is the ring, another pointer is a buffer of elements, a number beside
a buffer its length, a lone number the element. Where several roles fit, ``variants`` lists them, and what a call does
tells which is meant.
"""

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal, TypeAlias

from stepring.meaning.scope import size_of
from stepring.meaning.types import (
    ArrayType,
    CType,
    FloatType,
    Function,
    FunctionType,
    IntType,
    PointerType,
    StructLayout,
    StructType,
    VoidType,
)
from stepring.paths.witness import Made, Reference, Value
from stepring.shapes.ring_keys import inner_structs
from stepring.shapes.types import Bound, Ring

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


@dataclass(frozen=True, slots=True)
class Root:
    """The object that holds the ring: a made structure, or one of the program's own."""

    name: str
    type: CType
    made: str


def keys_of(ring: Ring) -> Iterator[tuple[str, ...]]:
    """The storage's and the indices' keys."""
    yield ring.storage_key
    yield from (index.key for index in ring.indices)


def operations_of(
    structs: Mapping[str, StructLayout],
    ring: Ring,
    functions: Sequence[Function],
    root: Root | None,
    made: list[Made],
    struct: StructType | None,
    element: int,
) -> Iterator[Operation]:
    entered = set(ring.functions)
    needed = {key[1] for key in keys_of(ring) if key and key[0] == "member"}
    for function in functions:
        if len(function.blocks) > MOST_BLOCKS:
            continue
        parameters = _parameters(structs, function, root, made, ring.bound, struct, needed)
        if parameters is not None:
            parameters = tuple(_lengths(tuple(_one_buffer(parameters, element, made))))
            yield Operation(function, parameters, function.identity not in entered)


def _parameters(
    structs: Mapping[str, StructLayout],
    function: Function,
    root: Root | None,
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
        holds = isinstance(to, StructType) and not needed.isdisjoint(inner_structs(to.identity, structs))
        path = path_to(structs, root.type, to.identity) if root and holds and isinstance(to, StructType) else None
        if path is not None and not mine:
            mine = True
            found.append(Parameter("ring", type_, path, name, root.name if root else ""))
        elif isinstance(to, FunctionType):
            found.append(Parameter("null", type_, name=name))
        elif isinstance(to, IntType | VoidType | PointerType) or (struct is not None and to == struct):
            found.append(Parameter("buffer", type_, name=name))
        elif isinstance(to, StructType) and (size_of(structs, to) or THING_BYTES) < THING_BYTES:
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


def variants(operation: Operation) -> Iterator[Operation]:
    """The operation, and the same with other roles for its numbers: which of them is the element, which says nothing.

    A number that says nothing is 0: it chooses a channel, or belongs to the element.
    """
    yield operation
    numbers = [at for at, item in enumerate(operation.parameters) if item.role in ("value", "other", "length")]
    if operation.has("buffer"):
        choices: list[int | None] = [None] if operation.has("length") else []
    else:
        choices = [*(at for at in numbers if operation.parameters[at].role != "value"), None] if numbers else []
    for chosen in choices:
        parameters = tuple(
            replace(item, role="value" if at == chosen else "other") if at in numbers else item
            for at, item in enumerate(operation.parameters)
        )
        yield replace(operation, parameters=parameters)


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
