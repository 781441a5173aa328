"""Guessing what unknown names are where headers are missing: type names, decorations, statement macros.

A C declaration cannot be told from an expression without knowing which names are types (ISO C N1570 section 6.7.8).
Where a name has no declaration, its position tells: two identifiers in a row, a star between an identifier and a
declared name at the start of a declaration, a cast, a parameter. An unknown word beside a known type is a decoration
(an attribute hidden in a macro) and is left out; a call that runs into a statement is a statement macro, before a
brace a loop.
"""

import re
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

    def __or__(self, other: "Guess") -> "Guess":
        return Guess(
            self.types | other.types,
            self.decorations | other.decorations,
            self.statements | other.statements,
            self.loops | other.loops,
        )

    def words(self) -> frozenset[str]:
        """All names that the text is rewritten for (types need no rewriting)."""
        return self.decorations | self.statements | self.loops


def _name(word: str) -> bool:
    return bool(word) and (word[0].isalpha() or word[0] in "_$") and word not in _KEYWORDS and word[-1] not in "\"'"


def infer(text: str, types: Collection[str], declared: Collection[str]) -> Guess:
    """Guess the unknown names of one declaration's text.

    ``types`` are the known type names, ``declared`` all names that the unit declares at file scope.
    """
    words = [w for w in TOKEN.findall(_LINE.sub("", text)) if not w.isspace()]
    count = len(words)
    found: set[str] = set()
    decorations: set[str] = set()
    statements: set[str] = set()
    loops: set[str] = set()
    pairs = _pairs(words)
    depth = groups = 0

    def at(index: int) -> str:
        return words[index] if 0 <= index < count else ""

    def unknown(word: str) -> bool:
        return _name(word) and word not in types and word not in declared and word not in SPECIAL

    def type_like(word: str) -> bool:
        return word in _PLAIN_TYPES or word in types or word in found or word in ("struct", "union", "enum")

    for index, word in enumerate(words):
        if word == "{":
            depth += 1
            continue
        if word == "}":
            depth -= 1
            continue
        if word == "(":
            groups += 1
            continue
        if word == ")":
            groups = max(0, groups - 1)
            continue
        if not unknown(word):
            continue
        before, after = at(index - 1), at(index + 1)
        if before in (".", "->", "goto", "enum"):
            continue
        if before in ("struct", "union"):
            if _name(after) and at(index + 2) in ("{", ";", "*") and after not in ("{",):
                if at(index + 2) == "{":
                    decorations.add(word)
            continue
        if _name(after):
            if (
                type_like(before)
                and before not in ("struct", "union", "enum")
                and at(index - 2) not in ("struct", "union", "enum")
            ):
                decorations.add(word)  # a type stands already before it
            elif (
                after in types
                or (unknown(after) and _name(at(index + 2)) and at(index + 2) not in decorations)
                or (before == ")" and depth == 0)
            ):
                decorations.add(word)
            elif (
                _name(before)
                and before not in decorations
                and (before in found or before not in types)
                and depth + groups >= 0
            ):
                if at(index - 2) in _PLAIN_TYPES or type_like(at(index - 2)):
                    decorations.add(word)
                else:
                    found.add(word)
            else:
                found.add(word)
        elif after in _PLAIN_TYPES or after in _SPECIFIERS or after in ("struct", "union", "enum"):
            if after in ("const", "volatile") and before in ("(", ",", ";", "{", "}", "", "static", "extern"):
                found.add(word)
            elif before != ")" or depth == 0:
                decorations.add(word)
        elif after == "*":
            star = index + 1
            while at(star) == "*" or at(star) in ("const", "volatile", "restrict"):
                star += 1
            target = at(star)
            begins = before in ("", ";", "{", "}") or before in _SPECIFIERS or (before == ":" and depth)
            parameter = before in ("(", ",") and depth == 0 and groups > 0
            if (
                (before == "(" and target == ")")
                or before in ("const", "volatile", "static", "extern", "register")
                or (parameter and (_name(target) or target in (",", ")", "[", "(")))
            ):
                found.add(word)
            elif begins and _name(target) and at(star + 1) in (";", "=", ",", "[", "(") and word not in declared:
                if depth == 0 or at(star + 1) != "(":
                    found.add(word)
        elif before == "(" and after == ")":
            follow = at(index + 2)
            call = at(index - 2)
            head = _name(call) or call in (")", "]") or call in ("sizeof", "if", "while", "switch", "for")
            operand = bool(follow) and (
                _name(follow) or follow[0].isdigit() or follow[-1] in "\"'" or follow == "{" or follow == "sizeof"
            )
            if not head and operand:
                found.add(word)
        elif depth == 0 and groups > 0 and after in (",", ")") and before in ("(", ",", "const", "volatile"):
            if before in ("const", "volatile") or _typed_list(words, pairs, index):
                found.add(word)
        elif before == ")" and depth == 0 and groups == 0 and after in ("{", ";", "="):
            decorations.add(word)
        elif _name(before) and type_like(at(index - 2)) and after in (";", "=", ",") and before != word:
            if before not in types:
                decorations.add(word)
        elif after == "(":
            close = pairs.get(index + 1, -1)
            follow = at(close + 1) if close > 0 else ""
            if depth == 0:
                head = before in ("", ";", "}") or before in _SPECIFIERS
                if head and at(index + 2) == "*" and _name(at(index + 3)) and at(index + 4) == ")":
                    found.add(word)
                elif (head and (type_like(follow) or _name(follow) or follow in _SPECIFIERS)) or (
                    before == ")" and follow in ("{", ";", "=")
                ):
                    decorations.add(word)
            elif before in (";", "{", "}") and follow:
                if follow == "{":
                    loops.add(word)
                elif _name(follow) or follow in STATEMENT_KEYWORDS - {"sizeof"} or follow in ("}",):
                    statements.add(word)
    return Guess(
        frozenset(found - decorations), frozenset(decorations - found), frozenset(statements - loops), frozenset(loops)
    )


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
