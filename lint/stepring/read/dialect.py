"""Dialect: GNU C and the words of compilers for small processors turned into ISO C that the parser accepts.

One pass over the tokens. What has no meaning for the analysis is overwritten with spaces, so that the rest keeps its
columns; what has one gets a reserved spelling (see ``read.types``). Line ends are never added or removed.
"""

import re
from collections.abc import Collection

from stepring.read.assembler import lift_assembler
from stepring.read.infer import Guess
from stepring.read.rewrite import Cleaned
from stepring.read.vendor import NO_GUESS, VendorForms
from stepring.read.words import (
    ALIGNOF,
    ASM,
    BY_POSITION,
    DROPPED,
    INTERRUPT_MACROS,
    RENAMED,
    RENAMED_C23,
    SPECIAL,
    TAKES_GROUP,
    TYPEOF,
    VA_ARG,
)

_ODD = re.compile(
    r"\?\s*:|\.\.\.\s*[^\s)]|[=(,{\[*:?!]\s*&&|return\s*&&|\*\s*\)\s*&&|goto\s*\*|@|\[\s*\[|[{,]\s*[A-Za-z_$][\w$]*\s*:(?!:)"
    r"|[^\x00-\x7f]|\benum\b[^{};()]*:|\bauto\s+[A-Za-z_$][\w$]*\s*="
)


def clean(
    text: str,
    declared: Collection[str] = (),
    int_bytes: int = 4,
    guess: Guess = NO_GUESS,
    force: bool = False,
    types: Collection[str] = (),
) -> Cleaned:
    """The declaration (or a whole unit's text) in ISO C.

    ``declared`` are names that the unit declares: a dialect word among them is an identifier. ``int_bytes`` is the
    size of ``int``, needed for GNU machine modes. ``guess`` names unknown words that are no C (see ``read.infer``).
    ``force`` looks at every token even where nothing looks like dialect, and at what only unknown macros can make:
    a type (one of ``types``) or assembler operands as an argument.
    """
    words = guess.words()
    if not force and not _ODD.search(text) and not _has_special(text, words):
        return Cleaned(text)
    return _Cleaner(text, declared, int_bytes, guess, frozenset(types) if force else None).run()


_IDENT = re.compile(r"[A-Za-z_]\w*")


def _has_special(text: str, words: frozenset[str]) -> bool:
    found = _IDENT.findall(text)
    return not SPECIAL.isdisjoint(found) or not words.isdisjoint(found)


def clean_whole_unit(text: str) -> str:
    """A whole unit's preprocessed text in ISO C, with no carving: ``#define`` lines and inner pragmas left out."""
    cleaned = _Cleaner(lift_assembler(text), (), 4).run()
    names = sorted({one.name for one in cleaned.operands} | {"__builtin_va_list"})
    return f"typedef int {', '.join(names)};\n" + cleaned.text


class _Cleaner(VendorForms):
    """The one pass: looks at each significant token and calls the rule for it."""

    def __init__(
        self,
        text: str,
        declared: Collection[str] = (),
        int_bytes: int = 4,
        guess: Guess = NO_GUESS,
        types: frozenset[str] | None = None,
    ) -> None:
        super().__init__(text)
        self.declared = declared
        self.int_bytes = int_bytes
        self.guess = guess
        self.guessed = guess.words()
        self.types = types

    def run(self) -> Cleaned:
        words = self.words
        for index in range(len(words)):
            word = words[index]
            first = word[0]
            if index in self.out and first not in "(){}[]":
                continue
            if first.isalpha() or first in "_$":
                if word in SPECIAL:
                    self._special(index, word)
                elif self.types is not None and self.braces and self._argument(index, word):
                    pass
                elif word in self.guessed:
                    self._guessed(index, word)
                elif word == "case":
                    self._case(index)
                elif word == "goto":
                    self._goto(index)
                elif word == "auto":
                    self._auto(index)
                elif word == "enum":
                    self._enum(index)
                elif word[-1] in "\"'" and len(word) > 1:
                    self._literal(index, word)
                if not word.isascii() and word[-1] not in "\"'":
                    self.out[index] = "".join(c if c.isascii() else f"_u{ord(c):04x}" for c in word)
                if self.initialisers and self.initialisers[-1] and self.word(index + 1) == ":":
                    self._old_designator(index)
            elif first in "([{":
                self._open(index, word)
            elif first in ")]}":
                if self.openers:
                    self.openers.pop()
                    self.initialisers.pop()
                if first == "}":
                    self.braces -= 1
            elif word == "...":
                self._range(index)
            elif word == "?":
                if self.word(index + 1) == ":":
                    self.out[index] = "? __stepring_same"
            elif word == "&&":
                self._label_address(index)
            elif word == "@":
                self._placement(index)
            elif first in "\"'":
                self._literal(index, word)
            elif first.isdigit() or (first == "." and len(word) > 1 and word != "..."):
                self._number(index, word)
        return self.render()

    def _special(self, index: int, word: str) -> None:
        if word in ASM:
            self.assembler(index)
        elif word in ("__attribute__", "__attribute"):
            self._attribute(index)
        elif word in self.declared or self.word(index - 1) in (".", "->", "struct", "union"):
            return
        elif word in RENAMED:
            self.out[index] = RENAMED[word]
            if word in TAKES_GROUP and self.word(index + 1) == "(":
                self.blank(index + 1, self.group_end(index + 1))
        elif word in RENAMED_C23 and word not in ALIGNOF:
            before = self.word(index - 1)
            if word != "bool" or self._is_type_use(index):
                if before not in ("enum",) and self.word(index + 1) not in (":", "=", ",", ";"):
                    self.out[index] = RENAMED_C23[word]
        elif word in DROPPED:
            self._drop(index, word)
        elif word in TYPEOF:
            self._typeof(index)
        elif word in ALIGNOF:
            self._alignof(index)
        elif word in VA_ARG:
            self._va_arg(index)
        elif word == "__builtin_types_compatible_p":
            self._same_type(index)
        elif word == "__auto_type":
            self._auto_type(index)
        elif word == "_Pragma":
            if self.word(index - 1) not in ("", ";", "{", "}") and self.word(index + 1) == "(":
                self.blank(index, self.group_end(index + 1))
        elif word == "__label__":
            end = index
            while end < len(self.words) and self.words[end] != ";":
                end += 1
            self.blank(index, end - 1)
        elif word == "_at_":
            self.to_declarator_end(index)
            self.attributes.add("at")
        elif word in INTERRUPT_MACROS:
            self._interrupt_macro(index)
        elif word in BY_POSITION:
            self._by_position(index, word)

    def _is_type_use(self, index: int) -> bool:
        after = self.word(index + 1)
        return bool(after) and (after[0].isalpha() or after[0] in "_$*(),)") and after not in ("else",)

    def _open(self, index: int, word: str) -> None:
        if word == "[" and self.word(index + 1) == "[" and index not in self.out:
            end = self.group_end(index)
            self.collect(index + 2, end - 1)
            self.blank(index, end)
        initialiser = False
        if word == "{":
            self.braces += 1
            before = self.word(index - 1)
            if before == "=":
                initialiser = True
            elif before in ("{", ",", "]", ":"):
                initialiser = bool(self.initialisers) and self.initialisers[-1]
            elif before == ")":
                head = self.word(self.match.get(index - 1, index) - 1)
                initialiser = (bool(head) and not (head[0].isalnum() or head[0] in "_$)")) or head in (
                    "return",
                    "sizeof",
                )
        self.openers.append(index)
        self.initialisers.append(initialiser)
