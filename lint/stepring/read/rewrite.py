"""Rewriting C by tokens: what becomes of each token, and the way back for every place in the new text.

The text is cut into tokens once; rules then say what a token becomes, what goes before it, and which ranges are moved
elsewhere. A token that goes away leaves spaces of its width, so that the rest of its line keeps its columns; where the
new text is longer, the shift is recorded.
"""

import re
from bisect import bisect_right
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Operand:
    """The operand of a ``typeof``: its text, and the offset in the cleaned text where it stood."""

    name: str
    text: str
    offset: int


@dataclass(frozen=True, slots=True)
class Cleaned:
    """A declaration's text in ISO C.

    ``falls`` are physical lines (from 0) that carry a fall-through attribute. ``shifts`` are triples (offset in
    ``text``, offset in the text before, inserted): from there on the two run in step, or the text was inserted.
    """

    text: str
    operands: tuple[Operand, ...] = ()
    attributes: frozenset[str] = frozenset()
    falls: tuple[int, ...] = ()
    shifts: tuple[tuple[int, int, bool], ...] = ((0, 0, False),)

    def offset_before(self, offset: int) -> int:
        """The offset in the text before cleaning that an offset in ``text`` came from."""
        index = bisect_right(self.shifts, offset, key=lambda shift: shift[0]) - 1
        here, there, inserted = self.shifts[index]
        if inserted:
            return there
        moved = there + offset - here
        if index + 1 < len(self.shifts):
            # a token that became longer stays inside the one it was
            moved = min(moved, max(there, self.shifts[index + 1][1] - 1))
        return moved


_TOKEN = re.compile(
    r"(?:(?<=\n)|\A)[ \t]*\#[^\n]*"
    r'|(?:u8|[LuU])?"(?:[^"\\\n]|\\.|\\\n)*"?'
    r"|(?:u8|[LuU])?'(?:[^'\\\n]|\\.)*'?"
    r"|[^\W\d][\w$]*|\$[\w$]*"
    r"|\.?\d(?:[eEpP][+-]|'(?=\w)|[\w]|\.(?!\.))*"
    r"|\s+"
    r"|\.\.\.|->|&&|\|\||\+\+|--|[-+*/%&|^!<>=]=|<<=|>>=|<<|>>|."
)
OPENERS = {"(": ")", "[": "]", "{": "}"}


def wordlike(word: str) -> bool:
    """Whether a token is an identifier or a keyword."""
    return bool(word) and (word[0].isalpha() or word[0] in "_$") and word[-1] not in "\"'"


class Rewriting:
    """A text's tokens and what becomes of them. Indices count significant tokens (no space, no directive lines).

    ``out`` holds what a token becomes, ``before`` what is put before it (texts, or ranges of tokens to be copied),
    ``hidden`` ranges that are blanked, ``operands`` (name, first, last) ranges that are handed out on their own.
    """

    def __init__(self, text: str) -> None:
        self.tokens: list[str] = _TOKEN.findall(text)
        self.places = [
            number
            for number, token in enumerate(self.tokens)
            if not token.isspace() and not (token.lstrip(" \t").startswith("#"))
        ]
        self.words = [self.tokens[place] for place in self.places]
        self.out: dict[int, str] = {}
        self.before: dict[int, list[str | tuple[int, int]]] = {}
        self.hidden: list[tuple[int, int]] = []
        self.operands: list[tuple[str, int, int]] = []
        self.attributes: set[str] = set()
        self.falls: list[int] = []
        self.match = self._pairs()
        self.openers: list[int] = []
        self.initialisers: list[bool] = []
        self.braces = 0
        self.fresh = 0

    def _pairs(self) -> dict[int, int]:
        stack: list[int] = []
        pairs: dict[int, int] = {}
        for index, word in enumerate(self.words):
            if word in OPENERS:
                stack.append(index)
            elif word in (")", "]", "}"):
                while stack:
                    opener = stack.pop()
                    if OPENERS[self.words[opener]] == word:
                        pairs[opener] = index
                        pairs[index] = opener
                        break
        return pairs

    def word(self, index: int) -> str:
        return self.words[index] if 0 <= index < len(self.words) else ""

    def blank(self, first: int, last: int) -> None:
        for index in range(first, min(last, len(self.words) - 1) + 1):
            self.out[index] = ""

    def group_end(self, index: int) -> int:
        """The index of the closing bracket of the group at ``index`` (itself where it is unbalanced)."""
        return self.match.get(index, index)

    def comma(self, first: int, last: int) -> int:
        """The first comma between two indices that stands in no inner group; -1 if none."""
        index = first
        while index < last:
            if self.words[index] == ",":
                return index
            index = self.group_end(index) + 1 if self.words[index] in OPENERS else index + 1
        return -1

    def _piece(self, index: int) -> str:
        """What one significant token became, at least as wide as it was where it was dropped."""
        word = self.words[index]
        new = self.out.get(index)
        if new is None:
            return word
        return new if len(new) >= len(word) else new + " " * (len(word) - len(new))

    def _insert(self, index: int) -> str:
        """The text to put before a token."""
        parts = self.before.get(index)
        if not parts:
            return ""
        return "".join(part if isinstance(part, str) else self._flat(part[0], part[1]) for part in parts)

    def _flat(self, first: int, last: int) -> str:
        """Tokens on one line, inner hidden ranges left out."""
        hidden = self._hidden_within(first, last)
        return " ".join(
            self._insert(index) + self._piece(index).strip() for index in range(first, last + 1) if index not in hidden
        )

    def _hidden_within(self, first: int, last: int) -> set[int]:
        inside: set[int] = set()
        for start, end in self.hidden:
            if first <= start and end <= last and not (start <= first and end >= last):
                inside.update(range(start, end + 1))
        return inside

    def render(self) -> Cleaned:
        hidden: set[int] = set()
        for start, end in self.hidden:
            hidden.update(range(start, end + 1))
        significant = {place: index for index, place in enumerate(self.places)}
        starts: dict[int, int] = {}
        for _, first, _last in self.operands:
            starts[first] = -1
        parts: list[str] = []
        shifts: list[tuple[int, int, bool]] = [(0, 0, False)]
        here = there = 0
        lines = 0
        fall_lines: list[int] = []
        falls = set(self.falls)
        for place, token in enumerate(self.tokens):
            index = significant.get(place)
            if index is None:
                if "#" in token:
                    token_out = self._directive(token)
                else:
                    token_out = token
                lines += token.count("\n")
                parts.append(token_out)
                here += len(token_out)
            else:
                inserted = "" if index in hidden else self._insert(index)
                if inserted:
                    shifts.append((here, there, True))
                    parts.append(inserted)
                    here += len(inserted)
                    shifts.append((here, there, False))
                if index in starts:
                    starts[index] = here
                text = " " * len(self._piece(index)) if index in hidden else self._piece(index)
                parts.append(text)
                here += len(text)
                token_out = text
                if place in falls:
                    fall_lines.append(lines)
            there += len(token)
            if len(token_out) != len(token):
                shifts.append((here, there, False))
        operands = tuple(
            Operand(name, self._region(first, last), starts.get(first, 0)) for name, first, last in self.operands
        )
        return Cleaned("".join(parts), operands, frozenset(self.attributes), tuple(fall_lines), tuple(shifts))

    def _directive(self, token: str) -> str:
        if re.match(r"[ \t]*#[ \t]*(?:line\b|\d)", token):
            return token
        if not self.braces and re.match(r"[ \t]*#[ \t]*pragma\b", token):
            return token
        return ""

    def _region(self, first: int, last: int) -> str:
        """An operand's own text with its line ends, inner typeofs hidden."""
        if last < first:
            return ""
        hidden = self._hidden_within(first, last)
        parts: list[str] = []
        significant = {place: index for index, place in enumerate(self.places[first : last + 1], first)}
        for place in range(self.places[first], self.places[last] + 1):
            index = significant.get(place)
            if index is None:
                parts.append(
                    self.tokens[place] if "#" not in self.tokens[place] else self._directive(self.tokens[place])
                )
            elif index in hidden:
                parts.append(" " * len(self._piece(index)))
            else:
                parts.append(self._insert(index) + self._piece(index))
        return "".join(parts)
