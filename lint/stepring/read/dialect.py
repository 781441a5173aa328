"""Dialect: GNU C and the words of compilers for small processors turned into ISO C that the parser accepts.

One pass over the tokens. What has no meaning for the analysis is overwritten with spaces, so that the rest keeps its
columns; what has one gets a reserved spelling (see ``read.types``). Where a replacement is longer than what it
replaces, the shift is recorded, so that every place in the parsed text leads back to the place in the preprocessed
text. Line ends are never added or removed.
"""

import re
from bisect import bisect_right
from collections.abc import Collection
from dataclasses import dataclass

from stepring.read.infer import Guess
from stepring.read.words import (
    AFTER_DECLARATOR,
    ALIGNOF,
    ASM,
    AT_WORDS,
    BY_POSITION,
    DROPPED,
    INTERRUPT_MACROS,
    NEEDS_GROUP,
    RENAMED,
    RENAMED_C23,
    SPECIAL,
    STATEMENT_KEYWORDS,
    TAKES_GROUP,
    TAKES_TYPE,
    TYPE_KEYWORDS,
    TYPED_BY_POSITION,
    TYPEOF,
    VA_ARG,
    word_set,
)

NO_GUESS = Guess()


@dataclass(frozen=True, slots=True)
class Operand:
    """The operand of a ``typeof``: its text, and the offset in the cleaned text where it stood."""

    name: str
    text: str
    offset: int


@dataclass(frozen=True, slots=True)
class Cleaned:
    """A declaration's text in ISO C.

    ``falls`` are physical lines (from 0) that carry a fall-through attribute. ``shifts`` are pairs (offset in
    ``text``, offset in the text before) from which on the two run in step.
    """

    text: str
    operands: tuple[Operand, ...] = ()
    attributes: frozenset[str] = frozenset()
    falls: tuple[int, ...] = ()
    shifts: tuple[tuple[int, int], ...] = ((0, 0),)

    def offset_before(self, offset: int) -> int:
        """The offset in the text before cleaning that an offset in ``text`` came from."""
        index = bisect_right(self.shifts, offset, key=lambda pair: pair[0]) - 1
        here, there = self.shifts[index]
        moved = there + offset - here
        if index + 1 < len(self.shifts):
            # inserted text leads to the token it was inserted for
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
_ODD = re.compile(
    r"\?\s*:|\.\.\.\s*[^\s)]|[=(,{\[*:?!]\s*&&|return\s*&&|goto\s*\*|@|\[\s*\[|[{,]\s*[A-Za-z_$][\w$]*\s*:(?!:)"
    r"|[^\x00-\x7f]|\benum\b[^{};()]*:|\bauto\s+[A-Za-z_$][\w$]*\s*="
)
_GOOD_NUMBER = re.compile(
    r"(?:0[xX][0-9a-fA-F]+|0[bB][01]+|\d+)(?:[uU]ll|[uU]LL|ll[uU]?|LL[uU]?|[uU][lL]|[lL][uU]?|[uU])?"
    r"|(?:\d+\.\d*|\.\d+|\d+(?=[eE]))(?:[eE][-+]?\d+)?[fFlL]?|0[xX][0-9a-fA-F]*\.?[0-9a-fA-F]*[pP][-+]?\d+[fFlL]?"
)
_NUMBER_PARTS = re.compile(
    r"(0[xX][0-9a-fA-F']*\.?[0-9a-fA-F]*(?:[pP][-+]?\d+)?|0[bB][01']+|[\d']*\.?[\d']*(?:[eE][-+]?\d+)?)(.*)"
)
_ESCAPE = re.compile(r"\\(.)", re.DOTALL)
_GOOD_ESCAPES = frozenset("0123456789abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ._~!=&^-\\?'\"\n")
_OPENERS = {"(": ")", "[": "]", "{": "}"}
_ASM_QUALIFIERS = word_set("volatile __volatile__ __volatile goto inline __inline __inline__ const")
_MODES = {"QI": "char", "byte": "char", "HI": "short", "DI": "long long", "SF": "", "DF": ""}
_SIGNS = ("signed", "unsigned", "long", "short")


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


_ASM_LINES = re.compile(r"\n[ \t]*#[ \t]*asm\b(?!\s*\()[^\n]*\n(?s:.*?)\n[ \t]*#[ \t]*endasm\b[^\n]*")
_ASM_CALL = re.compile(r'\n([ \t]*)#[ \t]*asm[ \t]*\([ \t]*("(?:[^"\\\n]|\\.)*")[ \t]*\)')
_ASM_WORDS = re.compile(r"__?asm\b(?![ \t]*[({])((?:(?!_endasm\b)[\s\S])*?)_?_endasm\b")
_INNER = r"\{((?:[^{}]|\{[^{}]*\})*)\}"
_PLAIN_ASM = r"(?:volatile|__volatile__|__volatile|goto|inline|__inline__|__inline)\b"
_ASM_BARE = re.compile(
    r"asm(?:__)?(?:\s+(?:volatile|__volatile__|__volatile))?\s*\{|asm[ \t\r\n]+(?!" + _PLAIN_ASM + r")[A-Za-z.]"
)
_ASM_FUNCTION = re.compile(r"\b_{0,2}asm\b((?:\s+[A-Za-z_]\w*[\s*]*)+\([^(){};]*\)\s*)" + _INNER)
_ASM_BLOCK = re.compile(r"\b_{0,2}asm(?:__)?(?:\s+(?:volatile|__volatile__|__volatile))?\s*" + _INNER)
_ASM_LINE = re.compile(r"\b_{0,2}asm[ \t]+(?!" + _PLAIN_ASM + r")(?=[A-Za-z.])[^\n;{}]*;?")


def lift_assembler(text: str) -> str:
    """Replace blocks of assembler text by an empty ``__asm__("");`` statement, line ends kept.

    They must go before carving: quotes, braces and semicolons mean something else in them.
    """
    if "endasm" in text:
        text = _ASM_LINES.sub(lambda m: "\n" + _asm_in_place(m[0][1:]), text)
        text = _ASM_WORDS.sub(lambda m: _asm_in_place(m[0], ""), text)
    if "#asm" in text or "# asm" in text:
        text = _ASM_CALL.sub(r"\n\1__asm__(\2);", text)
    if _ASM_BARE.search(text):
        text = _ASM_FUNCTION.sub(lambda m: m[1] + "{" + _asm_in_place(m[2]) + "}", text)
        text = _ASM_BLOCK.sub(lambda m: _asm_in_place(m[0]), text)
        text = _ASM_LINE.sub(lambda m: _asm_in_place(m[0]), text)
    return text


def _asm_in_place(text: str, end: str = ";") -> str:
    return '__asm__("")' + end + "\n" * text.count("\n")


def clean_whole_unit(text: str) -> str:
    """A whole unit's preprocessed text in ISO C, with no carving: ``#define`` lines and inner pragmas left out."""
    cleaned = _Cleaner(lift_assembler(text), (), 4).run()
    names = sorted({one.name for one in cleaned.operands} | {"__builtin_va_list"})
    return f"typedef int {', '.join(names)};\n" + cleaned.text


def _wordlike(word: str) -> bool:
    """Whether a token is an identifier or a keyword."""
    return bool(word) and (word[0].isalpha() or word[0] in "_$") and word[-1] not in "\"'"


class _Cleaner:
    """The state of one pass: significant tokens, what each becomes, what stands between."""

    def __init__(
        self,
        text: str,
        declared: Collection[str],
        int_bytes: int,
        guess: Guess = NO_GUESS,
        types: frozenset[str] | None = None,
    ) -> None:
        self.types = types
        self.guess = guess
        self.guessed = guess.words()
        self.declared = declared
        self.int_bytes = int_bytes
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
            if word in _OPENERS:
                stack.append(index)
            elif word in (")", "]", "}"):
                while stack:
                    opener = stack.pop()
                    if _OPENERS[self.words[opener]] == word:
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
        return self._render()

    # -- words ---------------------------------------------------------------------------------------------------

    def _special(self, index: int, word: str) -> None:
        if word in ASM:
            self._asm(index)
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
        elif word == "__label__":
            end = index
            while end < len(self.words) and self.words[end] != ";":
                end += 1
            self.blank(index, end - 1)
        elif word == "_at_":
            self._to_declarator_end(index)
            self.attributes.add("at")
        elif word in INTERRUPT_MACROS:
            self._interrupt_macro(index)
        elif word in BY_POSITION:
            self._by_position(index, word)

    def _guessed(self, index: int, word: str) -> None:
        """An unknown word that stands where no C could: left out, or given the statement it stands for."""
        grouped = self.word(index + 1) == "("
        end = self.group_end(index + 1) if grouped else index
        after = self.word(end + 1)
        if word in self.guess.types:
            if self.word(index - 1) in _SIGNS:
                self.out[index] = ""
        elif word in self.guess.decorations:
            before = self.word(index - 1)
            beside = _wordlike(after) or _wordlike(before) or before in (")", "]") or (grouped and not self.braces)
            call = grouped and after == ";" and self.braces and before != "]"
            if beside and before not in (".", "->", "return", "goto") and not call:
                self.blank(index, end)
        elif word in self.guess.strings:
            if self.word(index - 1)[-1:] == '"' or after[:1] == '"':
                self.out[index] = '""'
        elif grouped and word in self.guess.loops and after == "{":
            self.before.setdefault(index, []).append("while (")
            self.out[end] = "))"
        elif grouped and word in self.guess.statements and after not in (";", ",", ")"):
            self.out[end] = ");"

    def _argument(self, index: int, word: str) -> bool:
        """What can only be an argument of an unknown macro: assembler operands, a type (which becomes its size)."""
        types = self.types or frozenset()
        if self.word(index + 1) == "(" and self.word(index + 2)[:1] == '"' and word not in STATEMENT_KEYWORDS:
            end = self.group_end(index + 1)
            inner = self.words[index + 2 : end]
            if ":" in inner and "?" not in inner and self.word(index - 1) in (";", "{", "}"):
                self._asm(index)
                return True
        if self.word(index - 1) not in ("(", ",") or not self.openers or self.words[self.openers[-1]] != "(":
            return False
        callee = self.word(self.openers[-1] - 1)
        if not _wordlike(callee) or callee in STATEMENT_KEYWORDS or callee in TAKES_TYPE or callee in types:
            return False
        end = index
        typed = False
        while end < len(self.words) and self.words[end] not in (",", ")"):
            word = self.words[end]
            tagged = self.word(end - 1) in ("struct", "union", "enum") and _wordlike(word)
            if not (word in TYPE_KEYWORDS or word in types or tagged or (word == "*" and typed)):
                return False
            typed = True
            end += 1
        before = self.word(self.openers[-1] - 2)
        if before in TYPE_KEYWORDS or before in types or before == "*":
            return False
        self.before.setdefault(index, []).append("sizeof(")
        self.before.setdefault(end, []).append(")")
        return True

    def _is_type_use(self, index: int) -> bool:
        after = self.word(index + 1)
        return bool(after) and (after[0].isalpha() or after[0] in "_$*(),)") and after not in ("else",)

    def _drop(self, index: int, word: str) -> None:
        before, after = self.word(index - 1), self.word(index + 1)
        if after in (";", ",", "=", "[", ")") and (before[:1].isalpha() or before[:1] in ("_", "*")):
            return  # the declared name itself, as headers have members called __align
        if word in NEEDS_GROUP and after != "(" and not after[:1].isdigit():
            return
        self.out[index] = ""
        if word in TAKES_GROUP:
            if after == "(":
                if word == "__declspec":
                    self._collect(index + 2, self.group_end(index + 1))
                self.blank(index + 1, self.group_end(index + 1))
            elif after and after[0].isdigit():
                self.blank(index + 1, index + 1)
        if DROPPED[word]:
            self.attributes.add(DROPPED[word])

    def _collect(self, first: int, last: int) -> None:
        """Attribute words between two brackets: identifiers that are not arguments of another one."""
        index = first
        while index < last:
            word = self.words[index]
            if word[0].isalpha() or word[0] == "_":
                name = word.strip("_")
                self.attributes.add(name)
                if name == "mode" and self.word(index + 1) == "(":
                    self._mode(index, self.word(index + 2).strip("_"))
                if name in ("fallthrough", "__fallthrough__"):
                    self.falls.append(self.places[index])
            elif word == "(":
                if index != first:
                    index = self.group_end(index)
            index += 1

    def _attribute(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        self._collect(index + 2, end)
        self.blank(index, end)

    def _mode(self, index: int, mode: str) -> None:
        """A GNU machine mode gives the width: the declaration's ``int`` becomes the type of that width."""
        if mode in ("SI",):
            wide = "long" if self.int_bytes < 4 else "int"
        elif mode in ("word", "pointer"):
            wide = "int" if self.int_bytes < 4 else "long"
        else:
            wide = _MODES.get(mode, "")
        if not wide:
            return
        back = index - 1
        while back >= 0 and self.words[back] not in (";", "{", "}"):
            if self.words[back] == "int":
                self.out[back] = wide
                return
            if self.words[back] in ("unsigned", "signed") and self.word(back + 1) not in (
                "int",
                "char",
                "long",
                "short",
            ):
                self.out[back] = f"{self.words[back]} {wide}"
                return
            back -= 1

    def _asm(self, index: int) -> None:
        at = index + 1
        while self.word(at) in _ASM_QUALIFIERS:
            at += 1
        before = self.word(index - 1)
        if self.word(at) != "(":
            if self.word(at)[:1] == '"':
                while self.word(at)[:1] == '"':
                    at += 1
                self.blank(index, at - 1)
                self.out[index] = "__stepring_asm()"
            return
        end = self.group_end(at)
        if self.braces == 0:
            self.blank(index, end)
            if before in ("", ";", "}") and self.word(end + 1) == ";":
                self.blank(end + 1, end + 1)
            return
        statement = before in (";", "{", "}", ":", "else", "do")
        if before == ")":
            head = self.word(self.match.get(index - 1, index) - 1)
            statement = head in ("if", "while", "for", "switch")
        if not statement:
            self.blank(index, end)
            return
        self.blank(index, end)
        self.out[index] = "__stepring_asm"
        self.out[at] = "("
        self.out[end] = ")"
        section = 0
        walk = at + 1
        kept = False
        while walk < end:
            word = self.words[walk]
            if word == ":":
                section += 1
                if section > 1:
                    break
            elif section == 1:
                if word == "[":
                    walk = self.group_end(walk)
                elif word == "(":
                    close = self.group_end(walk)
                    for one in range(walk, close + 1):
                        self.out.pop(one, None)
                    walk = close
                    kept = True
                elif word == "," and kept:
                    self.out.pop(walk, None)
            elif word == "(":
                walk = self.group_end(walk)
            walk += 1

    def _typeof(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        self.fresh += 1
        name = f"__stepring_typeof_{self.fresh}"
        self.out[index] = name
        self.operands.append((name, index + 2, end - 1))
        self.hidden.append((index + 1, end))

    def _auto_type(self, index: int) -> None:
        at = index + 1
        while at < len(self.words) and self.words[at] not in ("=", ";"):
            at += 1
        self.fresh += 1
        name = f"__stepring_typeof_{self.fresh}"
        self.out[index] = name
        end = at + 1
        while end < len(self.words) and self.words[end] not in (",", ";"):
            end = self.group_end(end) + 1 if self.words[end] in _OPENERS else end + 1
        self.operands.append((name, at + 1, end - 1))

    def _auto(self, index: int) -> None:
        after = self.word(index + 1)
        if (
            after
            and (after[0].isalpha() or after[0] == "_")
            and self.word(index + 2) == "="
            and after not in TYPE_KEYWORDS
        ):
            self._auto_type(index)

    def _alignof(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        self.out[index] = "_Alignof"
        if self.word(index + 2) in TYPE_KEYWORDS:
            return
        self.fresh += 1
        name = f"__stepring_typeof_{self.fresh}"
        self.out[index + 1] = f"({name}"
        self.operands.append((name, index + 2, end - 1))
        self.hidden.append((index + 2, end - 1))

    def _comma(self, first: int, last: int) -> int:
        """The first comma between two indices that stands in no inner group; -1 if none."""
        index = first
        while index < last:
            if self.words[index] == ",":
                return index
            index = self.group_end(index) + 1 if self.words[index] in _OPENERS else index + 1
        return -1

    def _va_arg(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        comma = self._comma(index + 2, end)
        if comma < 0:
            return
        star = " *"
        for at in range(comma + 1, end - 1):
            if self.words[at] == "(" and self.words[at + 1] == "*":
                # a pointer to function or array: the star goes inside its declarator
                self.before.setdefault(at + 1, []).append("*")
                star = ""
                break
        self.before.setdefault(index, []).extend(["(*(", (comma + 1, end - 1), f"{star})__stepring_va_arg"])
        self.out[index] = ""
        self.hidden.append((comma, end - 1))
        self.out[end] = "))"

    def _same_type(self, index: int) -> None:
        if self.word(index + 1) != "(":
            return
        end = self.group_end(index + 1)
        comma = self._comma(index + 2, end)
        if comma < 0:
            return
        self.out[index] = "__stepring_same_type"
        self.out[index + 1] = "(sizeof("
        self.out[comma] = "), sizeof("
        self.out[end] = "))"

    def _interrupt_macro(self, index: int) -> None:
        """``ISR(vector) { ... }`` where no header defines the macro: a function of that name without parameters."""
        end = self.group_end(index + 1)
        if (
            self.braces
            or self.word(index + 1) != "("
            or self.word(end + 1) != "{"
            or self.word(index - 1) not in ("", ";", "}")
        ):
            return
        if not (self.word(index + 2)[:1].isalpha() or self.word(index + 2)[:1] == "_"):
            return
        self.out[index] = "void"
        self.out[index + 1] = ""
        self.blank(index + 3, end)
        self.out[end] = "(void)"
        self.attributes.add("interrupt")

    def _by_position(self, index: int, word: str) -> None:
        before, after = self.word(index - 1), self.word(index + 1)
        plain_after = bool(after) and (after[0].isalpha() or after[0] in "_$") and after not in STATEMENT_KEYWORDS
        typed_before = bool(before) and (before[0].isalpha() or before[0] in "_$") and before not in STATEMENT_KEYWORDS
        if before in ("struct", "union", "enum", ".", "->", "goto"):
            return
        starts = before in ("", ";", "}", "{", "(", ",") or before in TYPE_KEYWORDS or typed_before or before == "*"
        if (
            word in AFTER_DECLARATOR
            and self.braces == 0
            and before
            and before not in ("{", ";", "}", "static", "extern")
        ):
            closes = before == ")" or before[0].isdigit() or before in AFTER_DECLARATOR
            if closes and (after in ("{", ";", ",") or after[:1].isdigit() or after in AFTER_DECLARATOR or plain_after):
                self.out[index] = ""
                if after[:1].isdigit() or (
                    plain_after and word in ("interrupt", "using") and after not in AFTER_DECLARATOR
                ):
                    self.out[index + 1] = ""
                if BY_POSITION[word]:
                    self.attributes.add(BY_POSITION[word])
                return
        if word == "interrupt" and after == "[" and self.braces == 0 and before in ("", ";", "}"):
            self.blank(index, self.group_end(index + 1))
            self.attributes.add("interrupt")
            return
        if word in TYPED_BY_POSITION and before == "(" and after == ")":
            operand = self.word(index + 2)
            if operand and (operand[0].isalnum() or operand[0] == "_"):
                self.out[index] = TYPED_BY_POSITION[word]
            return
        if not starts or not (plain_after or (after == "*" and typed_before)):
            return
        typed = TYPED_BY_POSITION.get(word)
        self.out[index] = typed or ""
        if BY_POSITION[word]:
            self.attributes.add(BY_POSITION[word])
        if typed and word != "bit" and self.word(index + 2) == "=":
            self._to_declarator_end(index + 2, stop_at_assign=False)
            self.attributes.add("at")

    def _placement(self, index: int) -> None:
        after = self.word(index + 1)
        if after in AT_WORDS and self.word(index + 2) not in (";", "=", ","):
            self.blank(index, index + 1)
            if AT_WORDS[after]:
                self.attributes.add(AT_WORDS[after])
            return
        self._to_declarator_end(index)
        self.attributes.add("at")

    def _to_declarator_end(self, index: int, stop_at_assign: bool = True) -> None:
        end = index
        while end < len(self.words):
            word = self.words[end]
            if word in (";", ",") or (word == "{") or (stop_at_assign and word == "="):
                break
            end = self.group_end(end) + 1 if word in ("(", "[") else end + 1
        self.blank(index, end - 1)

    # -- punctuation ---------------------------------------------------------------------------------------------

    def _open(self, index: int, word: str) -> None:
        if word == "[" and self.word(index + 1) == "[" and index not in self.out:
            end = self.group_end(index)
            self._collect(index + 2, end - 1)
            self.blank(index, end)
        initialiser = False
        if word == "{":
            self.braces += 1
            before = self.word(index - 1)
            if before == "=":
                initialiser = True
            elif before in ("{", ",", "]"):
                initialiser = bool(self.initialisers) and self.initialisers[-1]
            elif before == ")":
                head = self.word(self.match.get(index - 1, index) - 1)
                initialiser = (bool(head) and not (head[0].isalnum() or head[0] in "_$)")) or head in (
                    "return",
                    "sizeof",
                )
        self.openers.append(index)
        self.initialisers.append(initialiser)

    def _old_designator(self, index: int) -> None:
        if self.word(index - 1) in ("{", ","):
            self.before.setdefault(index, []).append(".")
            self.out[index + 1] = "="

    def _range(self, index: int) -> None:
        if not self.openers or self.words[self.openers[-1]] != "[":
            return
        opener = self.openers[-1]
        self.before.setdefault(opener + 1, []).append("__stepring_range(")
        self.out[index] = ","
        self.before.setdefault(self.group_end(opener), []).append(")")

    def _case(self, index: int) -> None:
        at = index + 1
        dots = -1
        choices = 0
        while at < len(self.words):
            word = self.words[at]
            if word == "?":
                choices += 1
            elif word == ":":
                if not choices:
                    break
                choices -= 1
            elif word == "...":
                dots = at
            elif word in (";", "{", "}"):
                return
            at = self.group_end(at) + 1 if word in ("(", "[") else at + 1
        if dots >= 0:
            self.before.setdefault(index + 1, []).append("__stepring_range(")
            self.out[dots] = ","
            self.before.setdefault(at, []).append(")")

    def _goto(self, index: int) -> None:
        if self.word(index + 1) != "*":
            return
        self.out[index] = "__stepring_goto("
        self.out[index + 1] = ""
        end = index
        while end < len(self.words) and self.words[end] != ";":
            end += 1
        self.before.setdefault(end, []).append(")")

    def _label_address(self, index: int) -> None:
        before, after = self.word(index - 1), self.word(index + 1)
        if not after or not (after[0].isalpha() or after[0] in "_$"):
            return
        operand = bool(before) and (before[0].isalnum() or before[0] in "_$)]'\"}" or before in ("++", "--"))
        if before == ")":
            # after a cast to a pointer; a parenthesised value would make it a conjunction
            operand = self.word(index - 2) != "*"
        if before in ("return", "case"):
            operand = False
        if operand or not before:
            return
        self.out[index] = "__stepring_label("
        self.before.setdefault(index + 2, []).append(")")

    def _enum(self, index: int) -> None:
        """An enumeration's fixed underlying type is left out."""
        at = index + 1
        if self.word(at) != ":" and self.word(at + 1) != ":":
            return
        colon = at if self.word(at) == ":" else at + 1
        end = colon + 1
        while end < len(self.words) and (self.words[end][0].isalpha() or self.words[end][0] == "_"):
            end += 1
        if self.word(end) == "{" and end > colon + 1:
            self.blank(colon, end - 1)

    def _literal(self, index: int, word: str) -> None:
        if "\\" in word:
            word = _ESCAPE.sub(lambda m: m[0] if m[1] in _GOOD_ESCAPES else m[1], word).replace("\\\n", "")
        quote = word[-1]
        if quote == "'":
            inner = word[word.index("'") + 1 : -1]
            parts = re.findall(r"\\x[0-9a-fA-F]*|\\[0-7]{1,3}|\\.|.", inner)
            if not parts:
                word = r"'\0'"
            elif len(parts) > 4:
                word = "'" + "".join(parts[-4:]) + "'"
        if word != self.words[index]:
            self.out[index] = word

    def _number(self, index: int, word: str) -> None:
        if _GOOD_NUMBER.fullmatch(word):
            return
        parts = _NUMBER_PARTS.fullmatch(word)
        if parts is None or not parts[1]:
            return
        digits, suffix = parts[1], parts[2].lower()
        if suffix == "" and "'" in digits:
            return
        real = not digits.lower().startswith(("0x", "0b")) and ("." in digits or "e" in digits.lower())
        if real or (digits.lower().startswith("0x") and "p" in digits.lower()):
            kept = suffix[0] if suffix[:1] in ("f", "l") and suffix != "f64" else ""
        else:
            kept = ("u" if "u" in suffix else "") + ("ll" if "ll" in suffix else "l" if "l" in suffix else "")
        self.out[index] = digits + kept

    # -- the cleaned text ----------------------------------------------------------------------------------------

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

    def _render(self) -> Cleaned:
        hidden: set[int] = set()
        for start, end in self.hidden:
            hidden.update(range(start, end + 1))
        significant = {place: index for index, place in enumerate(self.places)}
        starts: dict[int, int] = {}
        for _, first, _last in self.operands:
            starts[first] = -1
        parts: list[str] = []
        shifts: list[tuple[int, int]] = [(0, 0)]
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
                    parts.append(inserted)
                    here += len(inserted)
                    shifts.append((here, there))
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
                shifts.append((here, there))
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
