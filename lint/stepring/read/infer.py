"""Guessing what unknown names are where headers are missing: type names, decorations, statement macros.

A C declaration cannot be told from an expression without knowing which names are types (ISO C N1570 section 6.7.8).
Where a name has no declaration, its position tells: two identifiers in a row, a star between an identifier and a
declared name at the start of a declaration, a cast, a parameter. An unknown word beside a known type is a decoration
(an attribute hidden in a macro) and is left out; a call that runs into a statement is a statement macro, before a
brace a loop.
"""

import re
from collections import Counter
from collections.abc import Collection
from dataclasses import dataclass

from stepring.read.source import TOKEN
from stepring.read.words import SPECIAL, STATEMENT_KEYWORDS, TYPE_KEYWORDS, word_set

_KEYWORDS = (
    TYPE_KEYWORDS
    | STATEMENT_KEYWORDS
    | word_set(
        "auto _Noreturn _Thread_local _Static_assert _Generic _Alignas _Pragma offsetof __builtin_va_arg __func__"
    )
)
_SPECIFIERS = word_set("const volatile static extern register inline restrict typedef _Noreturn _Thread_local")
_PLAIN_TYPES = word_set("void char short int long float double signed unsigned _Bool")
_LINE = re.compile(r"(?m)^#line .*$")


@dataclass(frozen=True, slots=True)
class Guess:
    """What unknown names were taken for."""

    types: frozenset[str] = frozenset()
    decorations: frozenset[str] = frozenset()
    statements: frozenset[str] = frozenset()
    loops: frozenset[str] = frozenset()
    strings: frozenset[str] = frozenset()

    def words(self) -> frozenset[str]:
        """All names that the text may have to be rewritten for."""
        return self.types | self.decorations | self.statements | self.loops | self.strings


class Votes:
    """What each place where an unknown name stands says about it; a unit's declarations vote together."""

    def __init__(self) -> None:
        self.counts: dict[str, Counter[str]] = {}

    def add(self, name: str, kind: str) -> None:
        self.counts.setdefault(name, Counter())[kind] += 1

    def has(self, name: str, kind: str) -> bool:
        return name in self.counts and self.counts[name][kind] > 0

    def decide(self) -> Guess:
        """The majority's answer for each name; a type where the votes are even."""
        order = ("type", "decoration", "statement", "loop", "string")
        chosen: dict[str, set[str]] = {kind: set() for kind in order}
        for name, counts in self.counts.items():
            kind = max(order, key=lambda one: (counts[one], -order.index(one)))
            chosen[kind].add(name)
        return Guess(*(frozenset(chosen[kind]) for kind in order))


def _name(word: str) -> bool:
    return bool(word) and (word[0].isalpha() or word[0] in "_$") and word not in _KEYWORDS and word[-1] not in "\"'"


def infer(text: str, types: Collection[str], declared: Collection[str], votes: Votes) -> None:
    """Collect votes on the unknown names of one declaration's text.

    ``types`` are the known type names, ``declared`` all names that the unit declares at file scope.
    """
    words = [word for word in TOKEN.findall(_LINE.sub("", text)) if not word.isspace()]
    _Inference(words, types, declared, votes).run()


class _Inference:
    """One walk over a declaration's tokens; each rule looks at what stands around an unknown name."""

    def __init__(self, words: list[str], types: Collection[str], declared: Collection[str], votes: Votes) -> None:
        self.words = words
        self.types = types
        self.declared = declared
        self.votes = votes
        self.pairs = _pairs(words)
        self.values = _values(words)
        self.braces = 0
        self.groups = 0

    def at(self, index: int) -> str:
        return self.words[index] if 0 <= index < len(self.words) else ""

    def unknown(self, word: str) -> bool:
        return _name(word) and word not in self.types and word not in self.declared and word not in SPECIAL

    def type_like(self, word: str) -> bool:
        return word in _PLAIN_TYPES or word in _TAGGED or word in self.types or self.votes.has(word, "type")

    def run(self) -> None:
        for index, word in enumerate(self.words):
            if word in ("{", "}"):
                self.braces += 1 if word == "{" else -1
            elif word in ("(", ")"):
                self.groups = max(0, self.groups + (1 if word == "(" else -1))
            elif self.unknown(word) and self.at(index - 1) not in (".", "->", "goto", "enum"):
                self._look(index, word)

    def _look(self, index: int, word: str) -> None:
        before, after = self.at(index - 1), self.at(index + 1)
        cast = after == ")" and self.braces and self.at(index - 2) == "(" and not _name(self.at(index - 3))
        if before in _SIGNS and (after == "*" or cast or _name(after)):
            self.votes.add(word, "type")  # a macro for a type: ``unsigned BASE x``
        elif before[-1:] == '"' or (after[:1] == '"' and before in ("(", ",", "return", "=")):
            self.votes.add(word, "string")
        elif before in ("struct", "union"):
            if _name(after) and self.at(index + 2) == "{":
                self.votes.add(word, "decoration")
        elif _name(after):
            self._before_name(index, word)
        elif after in _PLAIN_TYPES or after in _SPECIFIERS or after in _TAGGED:
            if after in ("const", "volatile") and before in ("(", ",", ";", "{", "}", "", "static", "extern"):
                self.votes.add(word, "type")
            elif before != ")" or self.braces == 0:
                self.votes.add(word, "decoration")
        elif (after in STATEMENT_KEYWORDS - {"sizeof", "_Alignof"} and self.braces and before in (";", "{", "}")) or (
            after == "}" and self.braces and before in (";", "}")
        ):
            self.votes.add(word, "decoration")
        elif after == "*":
            self._before_star(index, word)
        elif after == "(" and before == "]":
            self.votes.add(word, "decoration")
        elif after == "(":
            self._before_group(index, word)
        elif before == "(" and after == ")":
            self._in_parentheses(index, word)
        elif self.braces == 0 and self.groups and after in (",", ")") and before in ("(", ",", "const", "volatile"):
            qualified = before in ("const", "volatile") and self.at(index - 2) != "*"
            if qualified or (before in ("(", ",") and _typed_list(self.words, self.pairs, index)):
                self.votes.add(word, "type")
        elif (before in (")", "]") and self.braces == 0 and self.groups == 0 and after in ("{", ";", "=")) or (
            _shouts(word) and _name(before) and not self.type_like(before) and self.type_like(self.at(index - 2))
        ):
            self.votes.add(word, "decoration")

    def _before_name(self, index: int, word: str) -> None:
        """Two identifiers in a row: a type and what it declares, or a decoration and one of these."""
        before, after, third = self.at(index - 1), self.at(index + 1), self.at(index + 2)
        tagged = before in _TAGGED or self.at(index - 2) in _TAGGED
        if before == "*" and (_name(self.at(index - 2)) or self.type_like(self.at(index - 2))):
            self.votes.add(word, "decoration")  # nothing but qualifiers stands between a star and its declarator
        elif self.braces and before in (";", "{", "}") and _shouts(word) and third in _AFTER_STATEMENT_WORD:
            self.votes.add(word, "decoration")  # a statement macro without parentheses
        elif self.type_like(before) and not tagged:
            self.votes.add(word, "decoration")  # a type stands already before it
        elif third == "*" and (self.unknown(after) or after in self.types):
            shouted = _shouts(after) and not _shouts(word)
            self.votes.add(after if shouted else word, "decoration")
            self.votes.add(word if shouted else after, "type")
        elif self.unknown(after) and _name(third) and not self.votes.has(after, "decoration"):
            if (_shouts(after) and not _shouts(word)) or (word.endswith("_t") and not after.endswith("_t")):
                self.votes.add(word, "type")
                self.votes.add(after, "decoration")
            else:
                self.votes.add(word, "decoration")
        elif (
            (after in self.types and (_name(third) or third == "*"))
            or (before == ")" and self.braces == 0)
            or (_name(before) and not self.votes.has(before, "decoration") and self.type_like(self.at(index - 2)))
        ):
            self.votes.add(word, "decoration")
        elif not self.votes.has(word, "decoration"):
            self.votes.add(word, "type")

    def _before_star(self, index: int, word: str) -> None:
        """A star after a name: a pointer type where a declaration can stand and a declarator follows."""
        before = self.at(index - 1)
        star = index + 1
        while self.at(star) == "*" or self.at(star) in ("const", "volatile", "restrict"):
            star += 1
        target, then = self.at(star), self.at(star + 1)
        if (before == "(" and target == ")") or before in ("const", "volatile", "static", "extern", "register"):
            self.votes.add(word, "type")
        elif before in ("(", ",") and self.braces == 0 and self.groups:
            if _name(target) or target in (",", ")", "[", "("):
                self.votes.add(word, "type")
        elif word not in self.values and (before in ("", ";", "{", "}") or before in _SPECIFIERS):
            if _name(target) and then in (";", "=", ",", "[", "(") and (self.braces == 0 or then != "("):
                self.votes.add(word, "type")

    def _in_parentheses(self, index: int, word: str) -> None:
        """``(name)`` before an operand and after no callee: a cast."""
        callee, operand = self.at(index - 2), self.at(index + 2)
        called = _name(callee) or callee in ("sizeof", "if", "while", "switch", "for")
        starts = _name(operand) or operand[:1].isdigit() or operand[-1:] in ("'", '"') or operand == "sizeof"
        if not called and operand and (starts or (operand == "{" and callee not in (")", "]"))):
            self.votes.add(word, "type")

    def _before_group(self, index: int, word: str) -> None:
        """``name (...)``: a decoration with arguments at file scope, a statement or loop macro in a body."""
        before = self.at(index - 1)
        follow = self.at(self.pairs.get(index + 1, len(self.words)) + 1)
        if self.braces:
            inside = self.words[index + 2 : self.pairs.get(index + 1, index)]
            if before in (";", "{", "}") and ";" in inside and "{" not in inside:
                self.votes.add(word, "decoration")  # a statement as an argument
            elif before in (";", "{", "}") and follow == "{":
                self.votes.add(word, "loop")
            elif before in (";", "{", "}") and (
                _name(follow) or follow == "}" or follow in STATEMENT_KEYWORDS - {"sizeof"}
            ):
                self.votes.add(word, "statement")
        elif before in ("", ";", "}") or before in _SPECIFIERS or self.type_like(before) or before == "*":
            inner = _name(self.at(index + 2)) and self.at(index + 3) == "(" and self.at(index + 4) != "*"
            if inner and follow in ("{", ";") and before != "*" and not self.type_like(before):
                self.votes.add(word, "type")  # a macro round a declarator: ``THREAD(name(parameters))``
            elif self.at(index + 2) == "*" and _name(self.at(index + 3)) and self.at(index + 4) == ")":
                self.votes.add(word, "type")
            elif self.type_like(follow) or _name(follow) or follow in _SPECIFIERS:
                self.votes.add(word, "decoration")
        elif follow in ("{", ";", "=") and (before == ")" or (_name(before) and self.type_like(self.at(index - 2)))):
            self.votes.add(word, "decoration")


_SIGNS = ("signed", "unsigned", "long", "short")
_AFTER_STATEMENT_WORD = ("(", "->", ".", "++", "--", "+=", "-=", "|=", "&=", "^=")
_TAGGED = ("struct", "union", "enum")
_AFTER_VALUE = frozenset(("=", "[", ".", "->", "++", "--", "+=", "-=", "|=", "&="))


def _values(words: list[str]) -> set[str]:
    """Names that the text surely uses as objects: stored to, subscripted, declared with a keyword type."""
    values: set[str] = set()
    for before, word, after in zip(["", *words], words, [*words[1:], ""], strict=False):
        if _name(word) and before not in (".", "->", "struct", "union", "enum"):
            if after in _AFTER_VALUE or before in _PLAIN_TYPES or (before == "," and after == ";"):
                values.add(word)
    return values


def _shouts(word: str) -> bool:
    """Whether a word is written in capitals (but for a prefix), as macros are."""
    capitals = sum(map(str.isupper, word))
    return len(word) > 2 and capitals > 4 * sum(map(str.islower, word))


def _pairs(words: list[str]) -> dict[int, int]:
    pairs: dict[int, int] = {}
    stack: list[int] = []
    for index, word in enumerate(words):
        if word == "(":
            stack.append(index)
        elif word == ")" and stack:
            pairs[stack.pop()] = index
    return pairs


def _typed_list(words: list[str], pairs: dict[int, int], index: int) -> bool:
    """Whether the parameter list around ``index`` holds a keyword type, so that it is no list of plain names."""
    start = index
    while start > 0 and words[start] != "(":
        start -= 1
    end = pairs.get(start, index)
    return any(word in TYPE_KEYWORDS or word == "*" for word in words[start + 1 : end])
