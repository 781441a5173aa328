"""Memory of a run: every object is bytes with a note of which bits have been set and which bytes are pointers.

An object lives in ``Cells``. Bytes make unions, ``memcpy`` and views through another type exact without rules of their
own; bytes are in little-endian order, that of the processors of the trade. Each object also has an address, so that a
pointer can be turned into an integer and back, but a pointer is the object itself with an offset and the bounds of the
array it walks, so that nothing that leaves an array lands in a neighbour by luck (N1570 6.5.6p8).

Not modelled: alignment faults, effective types (6.5p7), and pointers to volatile objects as such.
"""

import re
import struct
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any, TypeAlias

from stepring.meaning.fold import convert
from stepring.meaning.scope import find_field, size_of
from stepring.meaning.types import ArrayType, CType, FloatType, IntType, PointerType, StructLayout, StructType
from stepring.paths.types import Undefined, Unsettled
from stepring.places import Position


@dataclass(slots=True, eq=False)
class Cells:
    """One object: ``size`` bytes of ``data``.

    ``known`` has a bit for each bit of ``data`` that has been set, or is None where all have. ``pointers`` keeps whole
    pointers by their offset; one counts as long as the bytes there are still its address. ``why`` tells what set
    unknown bits from outside the program (inline assembly, a definition that was not read), else it is empty.
    """

    name: str
    size: int
    data: bytearray
    known: bytearray | None
    address: int
    alive: bool = True
    frozen: bool = False
    why: str = ""
    pointers: dict[int, Any] = field(default_factory=dict)


Pointer: TypeAlias = tuple[Cells, int, int, int]
"""A pointer that points to an object: the object, the offset in bytes, and the bytes (from, to) of the array in it."""


@dataclass(frozen=True, slots=True)
class FunctionPointer:
    """A pointer to a function: the number of the unit that names it, its name there, and its address."""

    unit: int
    name: str
    address: int


@dataclass(frozen=True, slots=True)
class Blob:
    """The value of a structure or union: a copy of its bytes."""

    data: bytes
    known: bytes | None
    pointers: dict[int, Any]


LARGEST = 1 << 26
"""The size in bytes of the largest object that is kept."""


def new_cells(name: str, size: int, address: int, *, zero: bool = False) -> Cells:
    """A new object; its value is zero or indeterminate. ``Unsettled`` if it is too large to be kept."""
    if size > LARGEST:
        raise Unsettled(f"{name} has {size} bytes, which is too large to be kept")
    return Cells(name, size, bytearray(size), None if zero else bytearray(size), address)


# ------------------------------------------------------------------------------------------------------- addresses


def address_of(value: Any) -> int:
    """A pointer's address as an integer."""
    if isinstance(value, tuple):
        return int(value[0].address + value[1])
    if isinstance(value, FunctionPointer):
        return value.address
    return int(value)


def load_pointer(memory: "Memory", cells: Cells, offset: int, size: int) -> Any:
    """The pointer stored at an offset; an integer where it is null or points to nothing known."""
    address = int.from_bytes(cells.data[offset : offset + size], "little")
    if address == 0:
        return 0
    kept = cells.pointers.get(offset)
    if kept is not None and address_of(kept) & ((1 << 8 * size) - 1) == address:
        return kept
    return memory.resolve(address)


def store_pointer(cells: Cells, offset: int, size: int, value: Any) -> None:
    """Store a pointer."""
    if isinstance(value, int):
        cells.pointers.pop(offset, None)
    else:
        cells.pointers[offset] = value
    mask = (1 << 8 * size) - 1
    cells.data[offset : offset + size] = (address_of(value) & mask).to_bytes(size, "little")


# --------------------------------------------------------------------------------------------------- runs of bytes


def copy_out(cells: Cells, offset: int, size: int) -> Blob:
    """The bytes of a range with all that is known of them."""
    end = offset + size
    known = None if cells.known is None else bytes(cells.known[offset:end])
    pointers = {at - offset: kept for at, kept in cells.pointers.items() if offset <= at < end}
    return Blob(bytes(cells.data[offset:end]), known, pointers)


def copy_in(cells: Cells, offset: int, blob: Blob) -> None:
    """Store a range of bytes."""
    end = offset + len(blob.data)
    cells.data[offset:end] = blob.data
    if blob.known is not None:
        if cells.known is None:
            cells.known = bytearray(b"\xff" * cells.size)
        cells.known[offset:end] = blob.known
    elif cells.known is not None:
        cells.known[offset:end] = b"\xff" * len(blob.data)
    if cells.pointers or blob.pointers:
        for at in [at for at in cells.pointers if offset <= at < end]:
            del cells.pointers[at]
        for at, kept in blob.pointers.items():
            cells.pointers[offset + at] = kept


def forget(cells: Cells, offset: int, size: int, why: str) -> None:
    """Make a range of bytes unknown, for a reason outside the program."""
    if cells.known is None:
        cells.known = bytearray(b"\xff" * cells.size)
    cells.known[offset : offset + size] = bytes(size)
    cells.why = why


def unset(cells: Cells, what: str, position: Position | None) -> Exception:
    """What to raise where bits are read that were never set."""
    if cells.why:
        return Unsettled(f"{what} has a value that is not known here: {cells.why}", position)
    return Undefined("uninitialised", f"{what} is read before it has a value", position)


# ----------------------------------------------------------------------------------------------------------- memory


@dataclass(slots=True, eq=False)
class Memory:
    """All objects of a program at one moment; runs on the same memory see what earlier ones left.

    ``cells`` are the objects with static storage by their number in the program, ``others`` those allocated or given
    from outside. ``stacks`` hold the frames of runs under way, for resolving addresses. Frames keep their objects
    between ``floor`` and ``top``.
    """

    program: Any
    cells: list[Cells] = field(default_factory=list)
    others: list[Cells] = field(default_factory=list)
    names: dict[str, tuple[Cells, CType]] = field(default_factory=dict)
    stacks: list[list[Any]] = field(default_factory=list)
    next_static: int = 0x100
    top: int = 0
    heap: int = 0

    # The address space has three parts, far enough apart for wide pointers: static, automatic, allocated.
    def __post_init__(self) -> None:
        width = self.program.model.pointer
        self.top = 1 << (width - 2)
        self.heap = 1 << (width - 1)

    def resolve(self, address: int) -> Any:
        """The pointer for an address, or the address itself where no object lies."""
        if address == 0:
            return 0
        past: Pointer | None = None
        for cells in self._all():
            offset = address - cells.address
            if 0 <= offset < cells.size:
                return (cells, offset, 0, cells.size)
            if offset == cells.size:
                past = (cells, offset, 0, cells.size)
        return self.program.function_at(address) or past or address

    def placed(self, address: int) -> Pointer | None:
        """The pointer into an object that was placed at a fixed address, if one covers it."""
        for cells in self.others:
            if cells.alive and 0 <= address - cells.address < cells.size:
                return (cells, address - cells.address, 0, cells.size)
        return None

    def _all(self) -> Iterator[Cells]:
        yield from self.cells
        yield from (cells for cells in self.others if cells.alive)
        for stack in self.stacks:
            for frame in stack:
                yield from (cells for cells in frame if isinstance(cells, Cells))

    def allocate(self, size: int, name: str = "an allocated object", *, zero: bool = False) -> Pointer:
        """A new object of ``size`` bytes that lives until it is released."""
        cells = new_cells(name, size, self.heap, zero=zero)
        self.heap += (size + 31) // 16 * 16
        self.others.append(cells)
        return (cells, 0, 0, size)

    def place_at(self, address: int, size: int, name: str, *, zero: bool = True) -> Pointer:
        """An object at a fixed address, such as a device's registers."""
        cells = new_cells(name, size, address, zero=zero)
        self.others.append(cells)
        return (cells, 0, 0, size)

    def declare(self, name: str, type_: CType, *, zero: bool = False) -> Pointer:
        """A new object of a C type that ``read`` and ``write`` know by ``name``; gives a pointer to it."""
        size = size_of(self.program.structs, type_)
        if size is None:
            raise ValueError(f"{name} cannot be made: its type has no known size")
        pointer = self.allocate(size, name, zero=zero)
        self.names[name] = (pointer[0], type_)
        return pointer

    def read(self, path: str) -> Any:
        """The value at a path such as ``head``, ``ring.slots[2].mass`` or ``queue->head``."""
        cells, offset, type_ = self._follow(path)
        return read_value(self, cells, offset, type_, path)

    def write(self, path: str, value: Any) -> None:
        """Store a value at a path; an integer is converted to the type there."""
        cells, offset, type_ = self._follow(path)
        write_value(cells, offset, type_, value)

    def type_at(self, path: str) -> CType:
        """The type of what a path names; of a bit-field its declared type."""
        type_ = self._follow(path)[2]
        return type_.type if isinstance(type_, _Bits) else type_

    def address(self, path: str) -> Pointer:
        """A pointer to what a path names; an array's first element."""
        cells, offset, type_ = self._follow(path)
        size = size_of(self.program.structs, type_.type if isinstance(type_, _Bits) else type_) or 0
        if isinstance(type_, ArrayType):
            return (cells, offset, offset, offset + size)
        return (cells, offset, 0, cells.size)

    def snapshot(self) -> Any:
        """All values now, for ``restore``."""
        saved = [
            (cells, copy_out(cells, 0, cells.size), cells.alive, cells.why) for cells in (*self.cells, *self.others)
        ]
        return saved, len(self.others), self.heap

    def restore(self, snapshot: Any) -> None:
        """Bring back the values of a snapshot taken of this memory; objects allocated since then are dropped."""
        saved, others, self.heap = snapshot
        for cells, blob, alive, why in saved:
            copy_in(cells, 0, blob)
            cells.alive, cells.why = alive, why
        del self.others[others:]

    def key(self) -> tuple[bytes, ...]:
        """All values as something that can be compared and hashed: equal keys go on in the same way."""
        parts: list[bytes] = []
        for cells in (*self.cells, *self.others):
            if not cells.frozen:
                parts.append(bytes(cells.data))
                parts.append(b"" if cells.known is None else bytes(cells.known))
        return tuple(parts)

    def _follow(self, path: str) -> tuple[Cells, int, Any]:
        match = _START.match(path)
        if match is None:
            raise KeyError(f"{path!r} is no path; one looks like ring.slots[2].mass")
        cells, type_ = self._named(match[0])
        offset = 0
        at = match.end()
        where: Any = type_
        while at < len(path):
            step = _STEP.match(path, at)
            if step is None:
                raise KeyError(f"{path!r} is no path; one looks like ring.slots[2].mass")
            at = step.end()
            if step[1] is not None or step[2] == "->":
                index = int(step[1]) if step[1] is not None else 0
                if isinstance(where, PointerType):
                    pointer = read_value(self, cells, offset, where, path)
                    if not isinstance(pointer, tuple):
                        raise KeyError(f"{path!r} goes through a pointer that points to nothing known")
                    cells, offset, where = pointer[0], pointer[1], where.to
                elif isinstance(where, ArrayType):
                    if where.length is not None and index >= where.length:
                        raise KeyError(f"{path!r} leaves an array of {where.length} elements")
                    where = where.element
                else:
                    raise KeyError(f"{path!r} subscripts what is no array")
                offset += index * (size_of(self.program.structs, where) or 0)
                if not 0 <= offset <= cells.size:
                    raise KeyError(f"{path!r} leaves {cells.name}")
            if step[3] is not None:
                where, moved = member_at(self.program.structs, where, step[3], path)
                offset += moved
        return cells, offset, where

    def _named(self, name: str) -> tuple[Cells, CType]:
        if name in self.names:
            return self.names[name]
        number = self.program.static_named(name)
        if number is None:
            raise KeyError(f"no object with static storage is called {name!r}")
        self.program.grow(self)
        return self.cells[number], self.program.statics[number].variable.type


_START = re.compile(r"(?:.*:)?\w*(?:@\d+(?:\.\d+)?)?")
_STEP = re.compile(r"\[(\d+)\]|(\.|->)(\w+)")


# ------------------------------------------------------------------------------------------------------ typed access


@dataclass(frozen=True, slots=True)
class _Bits:
    """A bit-field: its type and its first bit, counted from the start of the byte at the offset that goes with it."""

    type: IntType
    bits: int
    shift: int


def member_at(structs: Any, type_: CType, name: str, path: str) -> tuple[Any, int]:
    """A member's type and offset in bytes; a bit-field's type is a ``_Bits``."""
    chain = list(find_field(structs, type_.identity, name)) if isinstance(type_, StructType) else []
    if not chain:
        raise KeyError(f"{path!r} names {name!r}, which is no member there")
    bits = sum(found.offset for _, found in chain)
    last = chain[-1][1]
    if last.bits is not None and isinstance(last.type, IntType):
        return _Bits(last.type, last.bits, bits % 8), bits // 8
    return last.type, bits // 8


def read_value(memory: Memory, cells: Cells, offset: int, type_: Any, what: str) -> Any:
    """A value of any type at an offset."""
    structs: dict[str, StructLayout] = memory.program.structs
    size = (type_.shift + type_.bits + 7) // 8 if isinstance(type_, _Bits) else size_of(structs, type_)
    if size is None or not 0 <= offset <= cells.size - size:
        raise KeyError(f"{what!r} leaves {cells.name}")
    raw = bytes(cells.data[offset : offset + size])
    if cells.known is not None and not isinstance(type_, StructType | ArrayType):
        mask = int.from_bytes(cells.known[offset : offset + size], "little")
        wanted = ((1 << type_.bits) - 1) << type_.shift if isinstance(type_, _Bits) else (1 << 8 * size) - 1
        if mask & wanted != wanted:
            raise unset(cells, what, None)
    match type_:
        case _Bits(type=inner, bits=bits, shift=shift):
            value = int.from_bytes(raw, "little") >> shift & ((1 << bits) - 1)
            return value - (1 << bits) if inner.signed and value >> (bits - 1) else value
        case IntType(signed=signed):
            return int.from_bytes(raw, "little", signed=signed)
        case FloatType(width=width):
            return struct.unpack("<f" if width == 32 else "<d", raw[: 4 if width == 32 else 8])[0]
        case PointerType():
            return load_pointer(memory, cells, offset, size)
    return copy_out(cells, offset, size)


def write_value(cells: Cells, offset: int, type_: Any, value: Any) -> None:
    """Store a value of any type at an offset."""
    match type_:
        case _Bits(type=inner, bits=bits, shift=shift):
            write_bits(cells, offset, shift, bits, convert(value, inner))
            return
        case IntType(width=width):
            size = max(1, width // 8)
            whole = convert(value, type_) & ((1 << 8 * size) - 1)
            cells.data[offset : offset + size] = whole.to_bytes(size, "little")
        case FloatType(width=width):
            size = max(4, width // 8)
            packed = struct.pack("<f" if width == 32 else "<d", value)
            cells.data[offset : offset + size] = packed + bytes(size - len(packed))
        case PointerType(width=width):
            size = width // 8
            store_pointer(cells, offset, size, value)
        case _:
            if not isinstance(value, Blob):
                raise ValueError(f"{cells.name} holds a structure here: give one of its members")
            copy_in(cells, offset, value)
            return
    if cells.known is not None:
        cells.known[offset : offset + size] = b"\xff" * size


def read_bits(cells: Cells, offset: int, shift: int, bits: int) -> tuple[int, bool]:
    """A bit-field's bits as an unsigned number, and whether all of them have been set."""
    end = offset + (shift + bits + 7) // 8
    mask = (1 << bits) - 1
    value = int.from_bytes(cells.data[offset:end], "little") >> shift & mask
    if cells.known is None:
        return value, True
    return value, int.from_bytes(cells.known[offset:end], "little") >> shift & mask == mask


def write_bits(cells: Cells, offset: int, shift: int, bits: int, value: int) -> None:
    """Store a bit-field; the bits beside it stay."""
    size = (shift + bits + 7) // 8
    end = offset + size
    mask = ((1 << bits) - 1) << shift
    held = int.from_bytes(cells.data[offset:end], "little")
    cells.data[offset:end] = (held & ~mask | (value << shift) & mask).to_bytes(size, "little")
    if cells.known is not None:
        known = int.from_bytes(cells.known[offset:end], "little")
        cells.known[offset:end] = (known | mask).to_bytes(size, "little")
