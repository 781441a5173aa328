"""What generated code calls where C's rules need more than one Python operator, and what it raises.

Names here appear in the text that ``translate`` writes. Reals are computed in double precision and rounded to single
where the type is ``float``, which gives IEC 60559 results for the four operations.
"""

import math
import struct
from typing import Any

from stepring.meaning.fold import convert
from stepring.meaning.types import CType, FloatType, IntType, PointerType, StructType
from stepring.paths.memory import Blob, Cells, FunctionPointer, address_of, new_cells
from stepring.paths.types import Undefined, Unsettled
from stepring.places import Position

# ------------------------------------------------------------------------------------------------------ what to raise


def overflow(value: Any, text: str, type_: IntType, position: Position | None) -> Exception:
    """A signed result that does not fit."""
    return Undefined("overflow", f"{text} gives {value}, which {type_.name} cannot hold", position)


def divided_by_zero(text: str, position: Position | None) -> Exception:
    """A division by zero."""
    return Undefined("division", f"{text} divides by zero", position)


def bad_shift(left: int, count: int, text: str, type_: IntType, position: Position | None) -> Exception:
    """A shift whose count or operand is out of range."""
    if not 0 <= count < type_.width:
        return Undefined("shift", f"{text} shifts a value of {type_.width} bits by {count}", position)
    if left < 0:
        return Undefined("shift", f"{text} shifts the negative value {left} to the left", position)
    return Undefined("shift", f"{text} shifts {left} by {count}, which {type_.name} cannot hold", position)


def unset_variable(run: Any, name: str, identity: str, position: Position | None) -> Exception:
    """A variable without a value is read."""
    why = run.unknown.get(identity)
    if why:
        return Unsettled(f"{name} has a value that is not known here: {why}", position)
    return Undefined("uninitialised", f"{name} is read before it has a value", position)


def outside(
    cells: Cells, offset: int, size: int, low: int, high: int, text: str, position: Position | None
) -> Exception:
    """An access outside the array that a pointer walks, or outside its object."""
    if cells.size == 0 and cells.why:
        return Unsettled(f"{text} cannot be reached: {cells.why}", position)
    within = f"bytes {low} to {high - 1} of {cells.name}" if high > low else f"no byte of {cells.name}"
    return Undefined("bounds", f"{text} takes byte {offset} to {offset + size - 1}; it may use {within}", position)


def bad_index(index: int, length: int, text: str, position: Position | None) -> Exception:
    """A subscript outside its array."""
    return Undefined("bounds", f"the subscript in {text} is {index}; the array has {length} elements", position)


def ended(cells: Cells, text: str, position: Position | None) -> Exception:
    """An object is used after its life."""
    return Undefined("lifetime", f"{text} uses {cells.name}, whose life has ended", position)


def read_only(cells: Cells, position: Position | None) -> Exception:
    """A constant object is changed."""
    return Undefined("read-only", f"{cells.name} is constant and is stored into", position)


def not_a_bool(text: str, position: Position | None) -> Exception:
    """A ``_Bool`` that holds neither 0 nor 1."""
    return Undefined("conversion", f"{text} holds neither 0 nor 1", position)


# ----------------------------------------------------------------------------------------------------------- pointers


def target(
    run: Any, pointer: Any, text: str, position: Position | None, size: int = 1, kind: str = "load"
) -> Any:
    """The object for a pointer that is no object's so far: at a fixed address, or an error.

    A run that was given a device asks it for ``size`` bytes there, to ``load`` or ``store`` them.
    """
    if isinstance(pointer, FunctionPointer):
        raise Undefined("pointer", f"{text} reads or writes the function {pointer.name}", position)
    if pointer == 0:
        raise Undefined("null", f"{text} uses a null pointer", position)
    found = run.memory.resolve(pointer) if run.device is None else run.memory.placed(pointer)
    if isinstance(found, tuple):
        return found
    if run.device is not None:
        return run.device(pointer, size, kind)
    raise Unsettled(f"{text} uses the address 0x{pointer:x}, where no object was given", position)


def stepped(pointer: Any, steps: int, size: int, text: str, position: Position | None) -> Any:
    """A pointer some elements on."""
    if pointer.__class__ is not tuple:
        if isinstance(pointer, FunctionPointer):
            raise Undefined("pointer", f"{text} steps from the function {pointer.name}", position)
        if pointer == 0:
            if steps == 0:
                return 0
            raise Undefined("null", f"{text} steps from a null pointer", position)
        return pointer + steps * size
    cells, offset, low, high = pointer
    moved = offset + steps * size
    if not low <= moved <= high:
        if cells.size == 0 and cells.why:
            raise Unsettled(f"{text} cannot be reached: {cells.why}", position)
        where = f"bytes {low} to {high} of {cells.name}"
        raise Undefined("pointer", f"{text} makes a pointer to byte {moved}; the array is {where}", position)
    return (cells, moved, low, high)


def distance(left: Any, right: Any, size: int, position: Position | None) -> int:
    """How many elements lie between two pointers."""
    if left.__class__ is tuple and right.__class__ is tuple and left[0] is right[0]:
        return int((left[1] - right[1]) // size)
    if left.__class__ is int and right.__class__ is int:
        return int((left - right) // size)
    raise Undefined("pointer", "pointers into different objects are subtracted", position)


def same_pointer(left: Any, right: Any) -> bool:
    """Whether two pointers compare equal."""
    if left.__class__ is tuple and right.__class__ is tuple:
        return left[0] is right[0] and left[1] == right[1]
    if left.__class__ is right.__class__:
        return bool(left == right)
    return bool(left and right) and address_of(left) == address_of(right)


def pointer_order(left: Any, right: Any, text: str, position: Position | None) -> int:
    """Less than, equal to or greater than zero as the left pointer lies before, at or after the right one."""
    if left.__class__ is tuple and right.__class__ is tuple and left[0] is right[0]:
        return int(left[1] - right[1])
    if left.__class__ is int and right.__class__ is int:
        return int(left - right)
    raise Undefined("pointer", f"{text} compares pointers into different objects", position)


def renewed(cells: Cells) -> Cells:
    """A new life of a variable: the old object is gone."""
    cells.alive = False
    fresh = new_cells(cells.name, cells.size, cells.address)
    fresh.why = cells.why if cells.size == 0 else ""
    return fresh


# -------------------------------------------------------------------------------------------------------------- reals


def single(value: float | int) -> float:
    """The nearest value of type ``float``."""
    if isinstance(value, int) and abs(value) >= 1 << 53:
        # Rounding to double first could round twice: round to 24 bits at once, ties to even.
        sign, whole = (-1, -value) if value < 0 else (1, value)
        shift = whole.bit_length() - 24
        kept, rest = whole >> shift, whole & ((1 << shift) - 1)
        half = 1 << (shift - 1)
        kept += rest > half or (rest == half and kept & 1)
        return float(sign * (kept << shift))
    try:
        return float(struct.unpack("<f", struct.pack("<f", value))[0])
    except OverflowError:
        return math.copysign(math.inf, value)


def quotient(left: float, right: float) -> float:
    """A division of reals; by zero it gives an infinity or no number (IEC 60559)."""
    if right != 0.0:
        return left / right
    if left == 0.0 or math.isnan(left):
        return math.nan
    return math.copysign(math.inf, left) * math.copysign(1.0, right)


def whole(value: float, type_: IntType, text: str, position: Position | None) -> int:
    """A real converted to an integer type: its fraction is dropped, and it must fit."""
    if not math.isnan(value) and not math.isinf(value):
        result = int(value)
        if type_.low <= result <= type_.high:
            return result
    raise Undefined("conversion", f"{text} is {value}, which {type_.name} cannot hold", position)


def adopted(value: Any, type_: CType, name: str, position: Position | None) -> Any:
    """A value that came from outside, converted to the type it is wanted in."""
    if value is None:
        raise Unsettled(f"{name} was given no result", position)
    match type_:
        case IntType() if isinstance(value, int):
            return convert(value, type_)
        case FloatType(width=width) if isinstance(value, int | float):
            return single(value) if width == 32 else float(value)
        case PointerType() if isinstance(value, int):
            return convert(value, type_)
        case StructType() if not isinstance(value, Blob):
            raise Unsettled(f"{name} was given no structure as its result", position)
    return value
