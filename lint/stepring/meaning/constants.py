"""What C's constants denote: numbers, characters, strings (N1570 6.4.4, 6.4.5)."""

import re

from stepring.meaning.models import constant_type, integer
from stepring.meaning.types import DataModel, IntType

_INTEGER = re.compile(r"(0[xX][0-9a-fA-F']+|0[bB][01']+|[0-9][0-9']*)([uUlLzZ]*)\Z")
_ESCAPE = re.compile(r"\\(x[0-9a-fA-F]+|[0-7]{1,3}|u[0-9a-fA-F]{4}|U[0-9a-fA-F]{8}|.)", re.DOTALL)
_SIMPLE = {"n": "\n", "t": "\t", "r": "\r", "a": "\a", "b": "\b", "f": "\f", "v": "\v", "e": "\x1b", "0": "\0"}


def number(model: DataModel, spelling: str) -> tuple[int, IntType] | float | None:
    """An integer constant's value and type, a floating constant's value, or None for neither."""
    match = _INTEGER.match(spelling)
    if match is None:
        body = spelling.rstrip("fFlLdD") if "x" not in spelling.lower() else spelling.rstrip("lL")
        try:
            return float.fromhex(body) if "x" in body.lower() else float(body)
        except ValueError:
            return None
    digits = match[1].replace("'", "")
    lower = digits.lower()
    if lower.startswith("0x"):
        value = int(digits, 16)
    elif lower.startswith("0b"):
        value = int(digits, 2)
    elif digits.startswith("0") and len(digits) > 1:
        if any(digit in "89" for digit in digits):
            return None
        value = int(digits, 8)
    else:
        value = int(digits)
    decimal = not digits.startswith("0") or digits == "0"
    return value, constant_type(model, value, match[2], decimal)


def _replace(match: "re.Match[str]") -> str:
    body = match[1]
    if body[0] in "xuU" and len(body) > 1:
        code = int(body[1:], 16)
        return chr(code & 0xFF if body[0] == "x" else code)
    if body[0] in "01234567":
        return chr(int(body, 8) & 0xFF)
    return _SIMPLE.get(body, body)


def text(spelling: str) -> str:
    """The characters of a string literal, adjacent ones already joined by the parser; without the final null.

    Each character of a plain literal stands for one byte; what is beyond ASCII is encoded in UTF-8, as compilers do.
    """
    wide = spelling.startswith(("L", "U", 'u"'))
    parts = re.findall(r'(?:u8|[uUL])?"((?:[^"\\]|\\.)*)"', spelling, re.DOTALL)
    if wide:
        return "".join(_ESCAPE.sub(_replace, part) for part in parts)
    return "".join(_ESCAPE.sub(_replace_by_bytes, _as_bytes(part)) for part in parts)


def element_type(model: DataModel, spelling: str) -> IntType:
    """The type of a string literal's elements, by its prefix (6.4.5p6)."""
    prefixes = re.findall(r'(u8|[uUL]?)"(?:[^"\\]|\\.)*"', spelling, re.DOTALL)
    prefix = next((found for found in prefixes if found in ("L", "u", "U")), "")
    if prefix == "L":
        wide = ("int", "unsigned short", "long", "unsigned int")
        return next(type_ for name in wide if (type_ := integer(model, name)).width == model.wchar)
    if prefix:
        wanted = 16 if prefix == "u" else 32
        names = ("unsigned short", "unsigned int", "unsigned long")
        return next(type_ for name in names if (type_ := integer(model, name)).width == wanted)
    return integer(model, "char")


def _as_bytes(part: str) -> str:
    return part if part.isascii() else part.encode("utf-8", "surrogateescape").decode("latin-1")


def _replace_by_bytes(match: "re.Match[str]") -> str:
    return _as_bytes(_replace(match)) if match[1][0] in "uU" else _replace(match)


def character(spelling: str, signed: bool) -> int:
    """The value of a character constant; several characters count as compilers of the trade do, big end first."""
    body = spelling[spelling.index("'") + 1 : spelling.rindex("'")]
    value = 0
    decoded = _ESCAPE.sub(_replace, body)
    wide = spelling[0] in "LuU"
    if len(decoded) == 1:
        code = ord(decoded)
        return code - 256 if signed and not wide and 128 <= code < 256 else code
    for letter in decoded:
        value = value << 8 | (ord(letter) & 0xFF)
    return value - (1 << 32) if value >> 31 & 1 else value & 0xFFFFFFFF
