"""Names at file scope, found without parsing: what a declaration declares and which identifiers it mentions.

A declaration's names stand where ISO C N1570 section 6.7.6 puts them: the last identifier before the parameters, the
array bound, the initialiser, the comma or the end; or the first one inside a parenthesised pointer declarator. Braces
are left out first; tags and enumerators are collected from them. The answer may hold a name too many where a macro is
unknown; that only means that a declaration more is parsed.
"""

import re
import sys
from dataclasses import dataclass
from functools import lru_cache

from stepring.read.words import word_set

_IDENTIFIER = re.compile(r"(?:(?<=\.\.\.)|(?<!->)(?<![\w$.]))[A-Za-z_$][\w$]*")
_TOKEN = re.compile(r"[A-Za-z_$][\w$]*|\.?\d[\w.]*|[()\[\],;=*:@{]")
_STRING = re.compile(r"\"(?:[^\"\\\n]|\\.)*\"|'(?:[^'\\\n]|\\.)*'")
_TAG = re.compile(
    r"\b(struct|union|enum)\b(?:\s*__attribute__\s*\(\((?:[^()]|\((?:[^()]|\([^()]*\))*\))*\)\)|\s*\[\[[^\]]*\]\])*"
    r"((?:\s+[A-Za-z_$][\w$]*)*)\s*(?::[^{};]*)?\{"
)
_ENUM_BODY = re.compile(r"\benum\b[^{};()]*(?:\(\([^{};]*\)\)[^{};()]*)?\{([^{}]*)\}")
_ENUMERATOR = re.compile(r"(?:^|,)\s*([A-Za-z_$][\w$]*)")
_INTERRUPT_MACRO = re.compile(r"\s*(?:ISR|SIGNAL|INTERRUPT)\s*\(\s*([A-Za-z_]\w*)")
_INTERRUPT_WORD = re.compile(r"\s*interrupt\s*\[[^\]]*\]")
_LINE = re.compile(r"(?m)^[ \t]*#.*$")

TYPE_WORDS = word_set(
    "void char short int long float double signed unsigned _Bool _Complex __signed__ __signed __int128"
)
_NO_NAMES = TYPE_WORDS | word_set(
    "const volatile restrict static extern register auto inline typedef struct union enum _Noreturn _Thread_local"
    " _Atomic __const __volatile__ __volatile __restrict __restrict__ __inline __inline__ __extension__ __thread"
    " __const__"
)
_TAKES_GROUP = word_set(
    "__attribute__ __attribute __declspec _Alignas alignas __asm__ asm __asm typeof __typeof__ __typeof _Atomic __at"
    " __align typeof_unqual _Static_assert static_assert __using __interrupt _BitInt _Pragma __pragma"
)


def identifiers(text: str) -> frozenset[str]:
    """All identifiers of a text but those that only name a member after ``.`` or ``->``."""
    return frozenset(map(sys.intern, _IDENTIFIER.findall(text)))


@dataclass(frozen=True, slots=True)
class Declared:
    """``names`` are objects and functions, ``tags`` tags and enumerators, ``typedefs`` type names.

    ``object`` says whether one is a variable.
    """

    names: tuple[str, ...] = ()
    tags: tuple[str, ...] = ()
    typedefs: tuple[str, ...] = ()
    object: bool = False


@lru_cache(maxsize=4096)
def declared_names(text: str, function: bool) -> Declared:
    """What a declaration (or, for a function, its head before the body) declares."""
    if "\n#" in text:
        text = _LINE.sub("", text)
    if '"' in text or "'" in text:
        text = _STRING.sub('""', text)
    if text.startswith("interrupt"):
        text = _INTERRUPT_WORD.sub("", text, count=1)
    tags: list[str] = []
    if "{" in text:
        for tag in _TAG.finditer(text):
            words = tag[2].split()
            if words:
                tags.append(words[-1])
        if "enum" in text:
            for body in _ENUM_BODY.finditer(text):
                tags.extend(_ENUMERATOR.findall(_without_groups(body[1])))
        text = _without_braces(text)
    found, is_object = _declarators(text, function)
    macro = _INTERRUPT_MACRO.match(text) if function else None
    if macro is not None:
        found = [macro[1]]
    intern = sys.intern
    marks = tuple(map(intern, dict.fromkeys(tags)))
    if not function and "typedef" in text and re.search(r"\btypedef\b", text):
        return Declared((), marks, tuple(map(intern, found)))
    is_object = is_object and not function and re.search(r"\bextern\b", text) is None
    return Declared(tuple(map(intern, found)), marks, (), is_object)


def _without_groups(text: str) -> str:
    """The text without what stands in parentheses, so that a comma in a value is none between enumerators."""
    return _outside(text, "(", ")", " ") if "(" in text else text


def _without_braces(text: str) -> str:
    return _outside(text, "{", "}", " { ")


def _outside(text: str, opening: str, closing: str, mark: str) -> str:
    """The text with a mark in place of each outermost group."""
    depth = 0
    kept: list[str] = []
    for part in re.split(f"([{re.escape(opening)}{re.escape(closing)}])", text):
        if part == opening:
            depth += 1
        elif part == closing:
            depth = max(0, depth - 1)
            kept.append(mark if depth == 0 else "")
        elif depth == 0:
            kept.append(part)
    return "".join(kept)


def _declarators(text: str, function: bool) -> tuple[list[str], bool]:
    """The declared names, and whether one of them is no function."""
    tokens = _TOKEN.findall(text)
    names: list[str] = []
    last = ""
    before = ""
    depth = 0
    taken = False
    is_object = False
    typed = False
    index = 0
    count = len(tokens)
    while index < count:
        token = tokens[index]
        if token == "(":
            if depth == 0 and not taken:
                if before in _TAKES_GROUP:
                    index = _skip_group(tokens, index)
                    if before in ("typeof", "__typeof__", "__typeof", "_Atomic"):
                        last, typed = "", True
                    before = ")"
                    continue
                inside = tokens[index + 1] if index + 1 < count else ""
                end = _skip_group(tokens, index)
                called = end < count and tokens[end] == "(" and before not in _TAKES_GROUP
                wrapped = tokens[index + 2 : index + 3] == ["("] and tokens[index + 3 : index + 4] != ["*"]
                if inside == "*" or before == "*" or not last or called or (wrapped and inside not in _TAKES_GROUP):
                    name = _first_inside(tokens, index)
                    if name:
                        names.append(name)
                        taken = is_object = True
                else:
                    names.append(last)
                    taken = True
                if function and taken:
                    return [_after_decoration(tokens, index, end) or names[0]], False
            depth += 1
        elif token == ")":
            depth -= 1
        elif depth == 0:
            if token in (",", ";"):
                if not taken and last:
                    names.append(last)
                    is_object = is_object or typed
                last, taken = "", False
                typed = True
            elif token in ("[", "=", ":", "@", "_at_"):
                if not taken and last:
                    names.append(last)
                    is_object = True
                taken = taken or token != "["
                taken = taken or bool(last)
                if token == "[":
                    index = _skip_group(tokens, index, "[", "]")
                    before = "]"
                    continue
            elif token in ("struct", "union", "enum"):
                last, typed = "", True  # what stood before a tag declares nothing
            elif token in ("*", "{") or before in ("struct", "union", "enum"):
                typed = True
            elif token != "]" and not token[0].isdigit() and token not in _NO_NAMES and token not in _TAKES_GROUP:
                typed = typed or bool(last)
                last = token
            elif token in TYPE_WORDS:
                typed = True
                last = ""
        before = token
        index += 1
    if last and not taken:
        names.append(last)
        is_object = is_object or typed
    return (names[:1] if function else names), is_object


def _after_decoration(tokens: list[str], index: int, end: int) -> str:
    """The second of two names with parentheses, where only its list holds a type: the first was a decoration."""
    if end + 1 >= len(tokens) or tokens[end + 1] != "(" or tokens[end] in _NO_NAMES or tokens[end] in _TAKES_GROUP:
        return ""
    first, second = tokens[index:end], tokens[end : _skip_group(tokens, end + 1)]
    typed = TYPE_WORDS.isdisjoint(first) and not TYPE_WORDS.isdisjoint(second)
    return tokens[end] if typed and tokens[end][0] not in "()[]," else ""


def _skip_group(tokens: list[str], index: int, opening: str = "(", closing: str = ")") -> int:
    """The index after the group that starts at ``index``."""
    depth = 0
    while index < len(tokens):
        if tokens[index] == opening:
            depth += 1
        elif tokens[index] == closing:
            depth -= 1
            if depth == 0:
                return index + 1
        index += 1
    return index


def _first_inside(tokens: list[str], index: int) -> str:
    while index < len(tokens):
        token = tokens[index]
        if token in _TAKES_GROUP:
            index = _skip_group(tokens, index + 1)
            continue
        if token[0].isalpha() or token[0] in "_$":
            after = tokens[index + 1] if index + 1 < len(tokens) else ""
            # a calling convention before the star is no name
            if token not in _NO_NAMES and after != "*":
                return token
        elif token == ")":
            return ""
        index += 1
    return ""
