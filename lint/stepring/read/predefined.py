"""What a compiler would predefine, for a data model that is known by name only.

A data model fixes the sizes of the integer types (``LP64``: long and pointers have 64 bits; ``LLP64``: long has 32,
pointers 64; ``ILP32``: all three 32; ``IP16``: int and pointers 16, long 32). The macros are those of ISO C (N1570
6.10.8) and the usual GNU ones that say sizes, types and limits, so that headers can ask for them. ``__GNUC__`` is among
them: headers of firmware know a few compilers each and stop at any other, and its dialect is the one that is read.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType


@dataclass(frozen=True, slots=True)
class _Model:
    """Sizes in bytes; type names for the exact widths."""

    int_: int
    long: int
    pointer: int
    double: int
    wchar: str


_MODELS = {
    "LP64": _Model(4, 8, 8, 8, "int"),
    "LLP64": _Model(4, 4, 8, 8, "unsigned short"),
    "ILP32": _Model(4, 4, 4, 8, "int"),
    "IP16": _Model(2, 4, 2, 4, "int"),
}
_UNKNOWN = "ILP32"


def data_models() -> tuple[str, ...]:
    """The names of the data models that are known."""
    return tuple(_MODELS)


def predefined_for(model: str) -> Mapping[str, str]:
    """The predefined macros of a data model by name; an unknown name gives those of ``ILP32``."""
    sizes = _MODELS.get(model.upper(), _MODELS[_UNKNOWN])
    widths = {1: "signed char", 2: "short" if sizes.int_ != 2 else "int", 4: "int" if sizes.int_ == 4 else "long int"}
    widths[8] = "long int" if sizes.long == 8 else "long long int"
    macros = {
        "__STDC__": "1",
        "__STDC_VERSION__": "201112L",
        "__STDC_HOSTED__": "1",
        "__DATE__": '"Jan  1 1970"',
        "__TIME__": '"00:00:00"',
        "__GNUC__": "9",
        "__GNUC_MINOR__": "0",
        "__GNUC_PATCHLEVEL__": "0",
        "__CHAR_BIT__": "8",
        "__BYTE_ORDER__": "1234",
        "__ORDER_LITTLE_ENDIAN__": "1234",
        "__ORDER_BIG_ENDIAN__": "4321",
        "__ORDER_PDP_ENDIAN__": "3412",
        "__SIZEOF_SHORT__": "2",
        "__SIZEOF_INT__": str(sizes.int_),
        "__SIZEOF_LONG__": str(sizes.long),
        "__SIZEOF_LONG_LONG__": "8",
        "__SIZEOF_POINTER__": str(sizes.pointer),
        "__SIZEOF_SIZE_T__": str(sizes.pointer),
        "__SIZEOF_PTRDIFF_T__": str(sizes.pointer),
        "__SIZEOF_FLOAT__": "4",
        "__SIZEOF_DOUBLE__": str(sizes.double),
        "__SIZEOF_LONG_DOUBLE__": str(sizes.double),
        "__SIZEOF_WCHAR_T__": "2" if sizes.int_ == 2 or "short" in sizes.wchar else "4",
        "__SCHAR_MAX__": "127",
        "__SHRT_MAX__": "32767",
        "__INT_MAX__": _largest(sizes.int_, ""),
        "__LONG_MAX__": _largest(sizes.long, "L"),
        "__LONG_LONG_MAX__": _largest(8, "LL"),
        "__WCHAR_TYPE__": sizes.wchar,
        "__WINT_TYPE__": "unsigned int",
    }
    for width, name in widths.items():
        bits, unsigned = 8 * width, "unsigned char" if width == 1 else f"unsigned {name}"
        suffix = "L" * name.count("long")
        macros[f"__INT{bits}_TYPE__"] = name
        macros[f"__UINT{bits}_TYPE__"] = unsigned
        macros[f"__INT{bits}_MAX__"] = _largest(width, suffix)
        macros[f"__UINT{bits}_MAX__"] = _largest_unsigned(width, sizes.int_, suffix)
        macros[f"__INT_LEAST{bits}_TYPE__"] = name
        macros[f"__UINT_LEAST{bits}_TYPE__"] = unsigned
        macros[f"__INT_FAST{bits}_TYPE__"] = name if width != 1 else "signed char"
        macros[f"__UINT_FAST{bits}_TYPE__"] = unsigned
    pointer, suffix = widths[sizes.pointer], "L" * widths[sizes.pointer].count("long")
    if sizes.pointer == sizes.long:
        pointer, suffix = "long int", "L"
    if sizes.pointer == sizes.int_:
        pointer, suffix = "int", ""
    macros |= {
        "__SIZE_TYPE__": f"unsigned {pointer}" if pointer != "int" else "unsigned int",
        "__PTRDIFF_TYPE__": pointer,
        "__INTPTR_TYPE__": pointer,
        "__UINTPTR_TYPE__": f"unsigned {pointer}",
        "__INTMAX_TYPE__": widths[8],
        "__UINTMAX_TYPE__": f"unsigned {widths[8]}",
        "__SIZE_MAX__": _largest_unsigned(sizes.pointer, sizes.int_, suffix),
        "__PTRDIFF_MAX__": _largest(sizes.pointer, suffix),
        "__INTPTR_MAX__": _largest(sizes.pointer, suffix),
        "__UINTPTR_MAX__": _largest_unsigned(sizes.pointer, sizes.int_, suffix),
    }
    if sizes.long == 8 and sizes.pointer == 8:
        macros |= {"__LP64__": "1", "_LP64": "1"}
    return MappingProxyType(macros)


def _largest(width: int, suffix: str) -> str:
    return f"{(1 << (8 * width - 1)) - 1}{suffix}"


def _largest_unsigned(width: int, int_width: int, suffix: str) -> str:
    """Promoted where the type is narrower than ``int`` (N1570 7.20.2p2)."""
    return f"{(1 << (8 * width)) - 1}{'' if width < int_width else 'U' + suffix}"
