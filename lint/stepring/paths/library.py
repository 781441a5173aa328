"""Functions of the C library that a run carries out itself (N1570 7.22, 7.24), on the memory of the run.

They are known by their standard names and by ``__builtin_`` before them. Each gets the run, its arguments and the
place of the call, and gives its result.
"""

from collections.abc import Callable, Iterator
from typing import Any

from stepring.meaning.fold import convert
from stepring.meaning.models import integer
from stepring.paths.arithmetic import ended, outside, overflow, read_only, target
from stepring.paths.memory import Blob, Cells, copy_in, copy_out, unset
from stepring.paths.types import Undefined, Unsettled
from stepring.places import Position

Builtin = Callable[[Any, list[Any], Position], Any]


def _range(run: Any, pointer: Any, size: int, what: str, at: Position, *, write: bool = False) -> tuple[Cells, int]:
    """The object and offset of ``size`` bytes that a library function uses."""
    if pointer.__class__ is not tuple:
        pointer = target(run, pointer, what, at)
    cells, offset, low, high = pointer
    if not cells.alive:
        raise ended(cells, what, at)
    if offset < low or offset + size > high:
        raise outside(cells, offset, size, low, high, what, at)
    if write and cells.frozen:
        raise read_only(cells, at)
    return cells, offset


def _memset(run: Any, arguments: list[Any], at: Position) -> Any:
    goal, value, size = arguments
    if size:
        cells, offset = _range(run, goal, size, "memset", at, write=True)
        copy_in(cells, offset, Blob(bytes((value & 0xFF,)) * size, None, {}))
    return goal


def _memcpy(run: Any, arguments: list[Any], at: Position) -> Any:
    goal, source, size = arguments
    if size:
        to, put = _range(run, goal, size, "memcpy", at, write=True)
        origin, take = _range(run, source, size, "memcpy", at)
        if to is origin and abs(put - take) < size:
            raise Undefined("overlap", f"memcpy copies {size} bytes of {to.name} between ranges that overlap", at)
        copy_in(to, put, copy_out(origin, take, size))
    return goal


def _memmove(run: Any, arguments: list[Any], at: Position) -> Any:
    goal, source, size = arguments
    if size:
        to, put = _range(run, goal, size, "memmove", at, write=True)
        origin, take = _range(run, source, size, "memmove", at)
        copy_in(to, put, copy_out(origin, take, size))
    return goal


def _bytes(run: Any, pointer: Any, what: str, at: Position) -> Iterator[int]:
    """The bytes from a pointer on, each checked as it is taken."""
    if pointer.__class__ is not tuple:
        pointer = target(run, pointer, what, at)
    cells, offset, low, high = pointer
    if not cells.alive:
        raise ended(cells, what, at)
    while True:
        if not low <= offset < high:
            raise outside(cells, offset, 1, low, high, what, at)
        if cells.known is not None and cells.known[offset] != 0xFF:
            if what == "memcmp":  # padding may be compared; what comes out is then not specified (6.2.6.1p6)
                raise Unsettled(f"memcmp compares bytes of {cells.name} that were never set", at)
            raise unset(cells, f"{what}'s argument", at)
        yield cells.data[offset]
        offset += 1


def _compare(left: Iterator[int], right: Iterator[int], count: int | None, *, text: bool) -> int:
    done = 0
    while count is None or done < count:
        a, b = next(left), next(right)
        if a != b:
            return 1 if a > b else -1
        if text and a == 0:
            return 0
        done += 1
    return 0


def _memcmp(run: Any, arguments: list[Any], at: Position) -> int:
    left, right, size = arguments
    return _compare(_bytes(run, left, "memcmp", at), _bytes(run, right, "memcmp", at), size, text=False)


def _strcmp(run: Any, arguments: list[Any], at: Position) -> int:
    left, right = arguments
    return _compare(_bytes(run, left, "strcmp", at), _bytes(run, right, "strcmp", at), None, text=True)


def _strncmp(run: Any, arguments: list[Any], at: Position) -> int:
    left, right, size = arguments
    return _compare(_bytes(run, left, "strncmp", at), _bytes(run, right, "strncmp", at), size, text=True)


def _text(run: Any, pointer: Any, what: str, at: Position) -> bytes:
    letters = bytearray()
    for letter in _bytes(run, pointer, what, at):
        if letter == 0:
            break
        letters.append(letter)
    return bytes(letters)


def _strlen(run: Any, arguments: list[Any], at: Position) -> int:
    return len(_text(run, arguments[0], "strlen", at))


def _put(run: Any, goal: Any, letters: bytes, what: str, at: Position) -> None:
    if letters:
        cells, offset = _range(run, goal, len(letters), what, at, write=True)
        copy_in(cells, offset, Blob(letters, None, {}))


def _strcpy(run: Any, arguments: list[Any], at: Position) -> Any:
    goal, source = arguments
    _put(run, goal, _text(run, source, "strcpy", at) + b"\0", "strcpy", at)
    return goal


def _strncpy(run: Any, arguments: list[Any], at: Position) -> Any:
    goal, source, size = arguments
    letters = bytearray()
    for letter in _bytes(run, source, "strncpy", at):
        if letter == 0 or len(letters) >= size:
            break
        letters.append(letter)
    _put(run, goal, bytes(letters[:size]).ljust(size, b"\0"), "strncpy", at)
    return goal


def _absolute(name: str) -> Builtin:
    def absolute(run: Any, arguments: list[Any], at: Position) -> int:
        type_ = integer(run.program.model, name)
        result = abs(arguments[0])
        if result > type_.high:
            raise overflow(result, "an absolute value", type_, at)
        return int(result)

    return absolute


def _malloc(run: Any, arguments: list[Any], at: Position) -> Any:
    return run.memory.allocate(arguments[0])


def _calloc(run: Any, arguments: list[Any], at: Position) -> Any:
    return run.memory.allocate(arguments[0] * arguments[1], zero=True)


def _free(run: Any, arguments: list[Any], at: Position) -> None:
    pointer = arguments[0]
    if pointer == 0:
        return
    if pointer.__class__ is not tuple or pointer[1] != 0 or pointer[0] not in run.memory.others:
        raise Undefined("pointer", "free is given a pointer that no allocation gave", at)
    if not pointer[0].alive:
        raise ended(pointer[0], "free", at)
    pointer[0].alive = False


def _swap(size: int) -> Builtin:
    def swap(run: Any, arguments: list[Any], at: Position) -> int:
        return int.from_bytes((arguments[0] & ((1 << 8 * size) - 1)).to_bytes(size, "little"), "big")

    return swap


def _count(kind: str, name: str) -> Builtin:
    def count(run: Any, arguments: list[Any], at: Position) -> int:
        type_ = integer(run.program.model, name)
        value = convert(arguments[0], type_)
        if kind == "ones":
            return value.bit_count()
        if kind == "lowest":
            return (value & -value).bit_length()
        if value == 0:
            raise Undefined("arguments", f"counting the {kind} zeros of 0 has no result", at)
        if kind == "leading":
            return type_.width - value.bit_length()
        return (value & -value).bit_length() - 1

    return count


def _abort(run: Any, arguments: list[Any], at: Position) -> None:
    raise Unsettled("the program ends itself here", at)


def _unreachable(run: Any, arguments: list[Any], at: Position) -> None:
    raise Undefined("arguments", "control comes to a place marked as never reached", at)


_PLAIN: dict[str, Builtin] = {
    "memset": _memset,
    "memcpy": _memcpy,
    "memmove": _memmove,
    "memcmp": _memcmp,
    "strcmp": _strcmp,
    "strncmp": _strncmp,
    "strlen": _strlen,
    "strcpy": _strcpy,
    "strncpy": _strncpy,
    "abs": _absolute("int"),
    "labs": _absolute("long"),
    "llabs": _absolute("long long"),
    "malloc": _malloc,
    "calloc": _calloc,
    "free": _free,
    "abort": _abort,
    "exit": _abort,
}

BUILTINS: dict[str, Builtin] = {
    **_PLAIN,
    **{f"__builtin_{name}": function for name, function in _PLAIN.items()},
    "__builtin_bswap16": _swap(2),
    "__builtin_bswap32": _swap(4),
    "__builtin_bswap64": _swap(8),
    "__builtin_trap": _abort,
    "__builtin_unreachable": _unreachable,
    **{
        f"__builtin_{short}{suffix}": _count(kind, f"unsigned {base}")
        for short, kind in (("popcount", "ones"), ("ffs", "lowest"), ("clz", "leading"), ("ctz", "trailing"))
        for suffix, base in (("", "int"), ("l", "long"), ("ll", "long long"))
    },
}
