"""What a ring's elements are when it is run: values that are told apart, and the buffers that callers give and get.

The one idea: an element is known by one integer in it, the widest one of a structure, and no value that is given looks
like what a cleared slot or a protocol's special byte would.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from stepring.meaning.types import ArrayType, CType, IntType, PointerType, StructLayout, StructType, VoidType
from stepring.paths.witness import StartValue
from stepring.shapes.ring_parameters import GIVEN


def type_name(type_: CType) -> tuple[str, int] | None:
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


def data_of(structs: Mapping[str, StructLayout], element: int, struct: StructType | None) -> Data:
    """What callers' buffers are made of for elements of so many bytes, or that are a structure."""
    if struct is not None:
        member = _widest(structs, struct, "")
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


def given(tokens: Sequence[int], data: Data) -> Iterator[StartValue]:
    """The start values of the buffer of elements that are put in."""
    for number, token in enumerate(tokens):
        if data.parts == 1:
            yield StartValue(GIVEN, f"[{number}]{data.member}", token)
            continue
        for byte in range(data.width):
            yield StartValue(GIVEN, f"[{number * data.parts + byte}]", token >> 8 * byte & 0xFF)
