"""Data models: how wide the basic types are, and the integer types of each.

The names LP64, LLP64 and ILP32 are those of the trade; ``IP16`` is the model of AVR and MSP430, whose ``int`` and
pointers have 16 bits and whose ``long`` has 32. Where a compiler was run, its predefined macros (``__SIZEOF_INT__``
and so on) give the model instead, so that an unusual target needs no name. Ranks and the typing of constants follow
N1570 6.3.1.1 and 6.4.4.1p5.
"""

from collections.abc import Mapping
from dataclasses import replace
from functools import cache

from stepring.meaning.types import CType, DataModel, FloatType, IntType

MODELS: dict[str, DataModel] = {
    "LP64": DataModel("LP64", 16, 32, 64, 64, 64),
    "LLP64": DataModel(
        "LLP64", 16, 32, 32, 64, 64, long_double=64, wchar=16, size_type="unsigned long long", ptrdiff_type="long long"
    ),
    "ILP32": DataModel("ILP32", 16, 32, 32, 64, 32, max_align=8, size_type="unsigned int", ptrdiff_type="int"),
    "IP16": DataModel(
        "IP16",
        16,
        16,
        32,
        64,
        16,
        double=32,
        long_double=32,
        max_align=1,
        wchar=16,
        size_type="unsigned int",
        ptrdiff_type="int",
    ),
}

_RANKS = {"_Bool": 0, "char": 1, "short": 2, "int": 3, "long": 4, "long long": 5, "__int128": 6}


def model_from_macros(predefined: Mapping[str, str]) -> DataModel | None:
    """The model that a compiler's predefined macros describe, or None where they do not say.

    A model equal to a named one but for its choices (sign of ``char``, size of enumerations) keeps the name.
    """

    def bits(name: str) -> int | None:
        text = predefined.get(f"__SIZEOF_{name}__", "")
        return 8 * int(text) if text.isdigit() else None

    short, int_, long, long_long, pointer = (bits(name) for name in ("SHORT", "INT", "LONG", "LONG_LONG", "POINTER"))
    if short is None or int_ is None or long is None or long_long is None or pointer is None:
        return None
    align = predefined.get("__BIGGEST_ALIGNMENT__", "")
    model = DataModel(
        "target",
        short,
        int_,
        long,
        long_long,
        pointer,
        double=bits("DOUBLE") or 64,
        long_double=bits("LONG_DOUBLE") or 64,
        max_align=int(align) if align.isdigit() else 16,
        wchar=bits("WCHAR_T") or 32,
        char_signed="__CHAR_UNSIGNED__" not in predefined,
        short_enums=_short_enums(predefined),
        size_type=_plain_name(predefined.get("__SIZE_TYPE__", "unsigned long")),
        ptrdiff_type=_plain_name(predefined.get("__PTRDIFF_TYPE__", "long")),
    )
    for name, known in MODELS.items():
        if (known.int_, known.long, known.pointer) == (model.int_, model.long, model.pointer):
            return replace(model, name=name)
    return model


def _short_enums(predefined: Mapping[str, str]) -> bool:
    # The ARM procedure call standard for bare metal lets an enumeration shrink; its compilers say so by this pair.
    return "__ARM_EABI__" in predefined and "__linux__" not in predefined


def _plain_name(text: str) -> str:
    words = text.split()
    signed = "unsigned " if "unsigned" in words else ""
    for name in ("long long", "long", "short", "char"):
        if all(words.count(word) >= name.split().count(word) for word in name.split()):
            return signed + name
    return signed + "int"


@cache
def integer(model: DataModel, name: str) -> IntType:
    """The integer type of that plain name (``unsigned long``); ``KeyError`` for a name that is none."""
    base = name.removeprefix("unsigned ").removeprefix("signed ")
    widths = {
        "_Bool": 1,
        "char": 8,
        "short": model.short,
        "int": model.int_,
        "long": model.long,
        "long long": model.long_long,
        "__int128": 128,
    }
    if name == "_Bool":
        return IntType("_Bool", 8, False, 0)
    if name == "char":
        return IntType("char", 8, model.char_signed, 1)
    return IntType(name, widths[base], not name.startswith("unsigned "), _RANKS[base])


def unsigned_of(model: DataModel, type_: IntType) -> IntType:
    """The unsigned type that corresponds to a signed one (6.2.5p6)."""
    if not type_.signed:
        return type_
    return integer(model, f"unsigned {type_.name.removeprefix('signed ')}")


def promoted(model: DataModel, type_: IntType) -> IntType:
    """The type after the integer promotions (6.3.1.1p2)."""
    int_ = integer(model, "int")
    if type_.rank > int_.rank or (type_.rank == int_.rank and type_.width == int_.width):
        return integer(model, type_.name)
    if type_.low >= int_.low and type_.high <= int_.high:
        return int_
    if type_.rank <= int_.rank:
        return integer(model, "unsigned int")
    return type_


def common(model: DataModel, left: CType, right: CType) -> CType:
    """The type after the usual arithmetic conversions (6.3.1.8p1)."""
    if isinstance(left, FloatType) or isinstance(right, FloatType):
        reals = [type_ for type_ in (left, right) if isinstance(type_, FloatType)]
        order = ["float", "double", "long double"]
        return max(reals, key=lambda real: (order.index(real.name) if real.name in order else 1, real.width))
    assert isinstance(left, IntType) and isinstance(right, IntType)
    left, right = promoted(model, left), promoted(model, right)
    if left == right:
        return left
    if left.signed == right.signed:
        return left if left.rank >= right.rank else right
    unsigned, signed = (right, left) if left.signed else (left, right)
    if unsigned.rank >= signed.rank:
        return unsigned
    if signed.low <= unsigned.low and signed.high >= unsigned.high:
        return signed
    return unsigned_of(model, signed)


def constant_type(model: DataModel, value: int, suffix: str, decimal: bool) -> IntType:
    """The type of an integer constant: the first of its list that holds the value (6.4.4.1p5)."""
    suffix = suffix.lower()
    ranks = ["int", "long", "long long", "__int128"]
    if "ll" in suffix:
        ranks = ranks[2:]
    elif "l" in suffix:
        ranks = ranks[1:]
    unsigned = "u" in suffix
    for rank in ranks:
        if not unsigned:
            signed_type = integer(model, rank)
            if value <= signed_type.high:
                return signed_type
        if unsigned or not decimal:
            unsigned_type = integer(model, f"unsigned {rank}")
            if value <= unsigned_type.high:
                return unsigned_type
    return integer(model, "unsigned long long")
