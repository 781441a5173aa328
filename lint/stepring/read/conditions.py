"""The value of an ``#if`` expression, in ``intmax_t`` and ``uintmax_t`` (ISO C N1570 6.10.1).

Written out here because it has to be safe with any input: 64 bits and no more whatever is shifted, nothing computed in
an operand that is not evaluated, one sentence for what has no value. Precedence climbing; the operators are a table.
"""

import re
from collections.abc import Callable, Sequence

_MASK = (1 << 64) - 1
_INTEGER = re.compile(r"(0[xX][0-9a-fA-F]+|0[bB][01]+|\d+)([uUlLzZ]*)", re.ASCII)
_ESCAPES = {"n": 10, "t": 9, "r": 13, "0": 0, "a": 7, "b": 8, "f": 12, "v": 11, "e": 27}
_ESCAPE = re.compile(r"\\(?:x([0-9a-fA-F]+)|([0-7]{1,3})|(.))|(.)", re.DOTALL)
# A number and whether it is unsigned.
Value = tuple[int, bool]
_LEVELS = (
    ("||",),
    ("&&",),
    ("|",),
    ("^",),
    ("&",),
    ("==", "!="),
    ("<", ">", "<=", ">="),
    ("<<", ">>"),
    ("+", "-"),
    ("*", "/", "%"),
)
_PRECEDENCE = {sign: level for level, signs in enumerate(_LEVELS) for sign in signs}
_COMPARISONS: dict[str, Callable[[int, int], bool]] = {
    "==": lambda left, right: left == right,
    "!=": lambda left, right: left != right,
    "<": lambda left, right: left < right,
    ">": lambda left, right: left > right,
    "<=": lambda left, right: left <= right,
    ">=": lambda left, right: left >= right,
}


class NoValue(ValueError):
    """The expression has no value; the text says why."""


def value_of(tokens: Sequence[str]) -> int:
    """The value of macro-expanded tokens (without white space); names that are left count as 0. Raises ``NoValue``."""
    reader = _Reader(tokens)
    number, _ = reader.conditional(live=True)
    while reader.next_is(","):
        number, _ = reader.conditional(live=True)
    if reader.place < len(tokens):
        raise NoValue(f"{tokens[reader.place][:40]!r} is not expected there")
    return number


class _Reader:
    """The tokens and how far they are read; ``live`` is False in operands that are not evaluated."""

    def __init__(self, tokens: Sequence[str]) -> None:
        self.tokens = tokens
        self.place = 0

    def next_is(self, sign: str) -> bool:
        """Read one token if it is this one."""
        if self.place < len(self.tokens) and self.tokens[self.place] == sign:
            self.place += 1
            return True
        return False

    def conditional(self, *, live: bool) -> Value:
        condition = self.binary(0, live=live)
        if not self.next_is("?"):
            return condition
        chosen = self.conditional(live=live and condition[0] != 0)
        if not self.next_is(":"):
            raise NoValue("a ':' is missing")
        other = self.conditional(live=live and condition[0] == 0)
        number, _ = chosen if condition[0] else other
        return _wrapped(number, chosen[1] or other[1])

    def binary(self, lowest: int, *, live: bool) -> Value:
        left = self.unary(live=live)
        while self.place < len(self.tokens):
            sign = self.tokens[self.place]
            level = _PRECEDENCE.get(sign, -1)
            if level < lowest:
                return left
            self.place += 1
            if sign == "||":
                right = self.binary(level + 1, live=live and left[0] == 0)
                left = int(left[0] != 0 or right[0] != 0), False
            elif sign == "&&":
                right = self.binary(level + 1, live=live and left[0] != 0)
                left = int(left[0] != 0 and right[0] != 0), False
            else:
                left = _combined(sign, left, self.binary(level + 1, live=live), live=live)
        return left

    def unary(self, *, live: bool) -> Value:
        signs: list[str] = []
        while self.place < len(self.tokens) and self.tokens[self.place] in ("!", "~", "-", "+"):
            signs.append(self.tokens[self.place])
            self.place += 1
        number, unsigned = self.primary(live=live)
        for sign in reversed(signs):
            if sign == "!":
                number, unsigned = int(number == 0), False
            elif sign == "~":
                number, unsigned = _wrapped(~number, unsigned)
            elif sign == "-":
                number, unsigned = _wrapped(-number, unsigned)
        return number, unsigned

    def primary(self, *, live: bool) -> Value:
        if self.place >= len(self.tokens):
            raise NoValue("an operand is missing")
        token = self.tokens[self.place]
        self.place += 1
        if token == "(":
            inner = self.conditional(live=live)
            while self.next_is(","):
                inner = self.conditional(live=live)
            if not self.next_is(")"):
                raise NoValue("a ')' is missing")
            return inner
        if token[0].isdigit():
            return _integer(token)
        if token[0] == "'" or token[:2] in ("L'", "u'", "U'"):
            return _character(token)
        if token[0].isalpha() or token[0] in "_$":
            self._skip_arguments()
            return 0, False
        raise NoValue(f"{token[:40]!r} is not expected there")

    def _skip_arguments(self) -> None:
        """Pass over what looks like the arguments of a macro that is not known."""
        if self.place >= len(self.tokens) or self.tokens[self.place] != "(":
            return
        depth = 0
        while self.place < len(self.tokens):
            token = self.tokens[self.place]
            self.place += 1
            depth += (token == "(") - (token == ")")
            if depth == 0:
                return


def _combined(sign: str, left: Value, right: Value, *, live: bool) -> Value:
    """Two operands after the usual conversions (a shift has its left operand's type)."""
    (one, other), unsigned = (left[0], right[0]), left[1] or right[1]
    if sign in ("<<", ">>"):
        count = other if right[1] or other >= 0 else -other
        towards_left = (sign == "<<") == (right[1] or other >= 0)
        count = min(count, 64)
        return _wrapped(one << count if towards_left else one >> count, left[1])
    if unsigned:
        one, other = one & _MASK, other & _MASK
    if sign in _COMPARISONS:
        return int(_COMPARISONS[sign](one, other)), False
    if sign in ("/", "%"):
        if other == 0:
            if live:
                raise NoValue("it divides by zero")
            return 0, unsigned
        quotient = abs(one) // abs(other) * (1 if (one < 0) == (other < 0) else -1)
        return _wrapped(quotient if sign == "/" else one - quotient * other, unsigned)
    results = {"+": one + other, "-": one - other, "*": one * other, "&": one & other, "|": one | other}
    return _wrapped(results[sign] if sign in results else one ^ other, unsigned)


def _wrapped(number: int, unsigned: bool) -> Value:
    number &= _MASK
    return (number if unsigned or number >> 63 == 0 else number - (1 << 64)), unsigned


def _integer(token: str) -> Value:
    found = _INTEGER.fullmatch(token)
    if found is None:
        raise NoValue(f"{token[:40]!r} is not an integer")
    digits, suffix = found[1].lower(), found[2].lower()
    if len(digits) > 100:
        raise NoValue("a number in it is too large")
    octal = digits[0] == "0" and digits.isdigit()
    if octal and digits.strip("01234567"):
        raise NoValue(f"{token!r} is not an octal number")
    number = int(digits, 8 if octal else 0)
    return _wrapped(number, "u" in suffix or number >> 63 != 0)


def _character(token: str) -> Value:
    """A character constant; several characters count as the compilers of the GNU family count them, 8 bits each."""
    body = token.lstrip("LuU")[1:]
    body = body[:-1] if body.endswith("'") else body
    if not body:
        raise NoValue("a character constant is empty")
    number = 0
    for hexadecimal, octal, simple, plain in _ESCAPE.findall(body[:64]):
        if hexadecimal:
            code = int(hexadecimal[-8:], 16)
        elif octal:
            code = int(octal, 8)
        else:
            code = _ESCAPES.get(simple, ord(simple)) if simple else ord(plain)
        number = (number << 8) | (code & 0xFF) if len(body) > 1 else code
    return _wrapped(number, False)
