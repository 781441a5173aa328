"""Conditions as the source spells them: from a place in a file to the text of the operand that begins there.

The parser keeps where an operand of a condition begins, so its text is read off the source's own tokens: to the ``&&``,
``||`` or parenthesis that ends it. Macros stay unexpanded that way, which is how a person knows the condition.
"""

from collections.abc import Callable
from typing import NamedTuple

from stepring.places import Origin
from stepring.read.source import SourceFile

_STATEMENTS = frozenset(("if", "while", "for", "switch", "return"))
_ENDS = frozenset(("&&", "||", ";", ",", "?", ":", "{", "}"))
_PREFIX = frozenset(("*", "-", "~", "&", "++", "--", "+"))
_BEFORE_PREFIX = frozenset(("(", "&&", "||", "!", ",", ";", "?", ":", "=", "return"))
_BINARY = frozenset(
    ("==", "!=", "<", "<=", ">", ">=", "+", "-", "*", "/", "%", "&", "|", "^", "<<", ">>", "->", ".", "[", "=", "(")
)
_OPPOSITE = {"==": "!=", "!=": "==", "<": ">=", ">=": "<", ">": "<=", "<=": ">"}
_LOOSER = frozenset(("&", "|", "^", "&&", "||", "?", "=", "+=", "-=", "|=", "&=", ","))
_MOST_TOKENS = 200


class Spelled(NamedTuple):
    """A condition's tokens with the spaces between them, and the statement that it belongs to (empty if none)."""

    tokens: tuple[str, ...]
    spaced: tuple[bool, ...]
    statement: str

    @property
    def text(self) -> str:
        parts = (f" {token}" if gap else token for token, gap in zip(self.tokens, self.spaced, strict=True))
        return "".join(parts).strip()


def condition_at(source: SourceFile | None, where: Origin, is_macro: Callable[[str], bool]) -> Spelled | None:
    """The operand of a condition that begins at a place, or None where the source is not at hand.

    What begins inside a macro's argument is the macro's whole call: the operand was made by expanding it.
    """
    if source is None:
        return None
    first = source.first_on(where.line)
    while first < len(source.texts) and source.lines[first] == where.line and source.columns[first] < where.column:
        first += 1
    texts = source.texts
    if first >= len(texts) or source.lines[first] != where.line or source.columns[first] != where.column:
        return None
    first = _with_prefix(texts, _outermost(texts, first, is_macro))
    depth, at = 0, first
    while at < len(texts) and at - first < _MOST_TOKENS:
        token = texts[at]
        if token in "([":
            depth += 1
        elif token in ")]":
            if depth == 0:
                opened = first - 1
                closes = token == ")" and opened > 0 and texts[opened] == "(" and not _is_word(texts[opened - 1])
                if not closes or at + 1 >= len(texts) or texts[at + 1] not in _BINARY:
                    break
                first = _with_prefix(texts, opened)
            else:
                depth -= 1
        elif depth == 0 and token in _ENDS:
            break
        at += 1
    if at == first:
        return None
    spaced = [False]
    for number in range(first + 1, at):
        before = source.columns[number - 1] + len(texts[number - 1])
        spaced.append(source.lines[number] != source.lines[number - 1] or source.columns[number] > before)
    return Spelled(tuple(texts[first:at]), tuple(spaced), _statement(texts, first))


def _outermost(texts: list[str], first: int, is_macro: Callable[[str], bool]) -> int:
    """The name of the outermost macro in whose arguments a token stands, or the token."""
    depth = 0
    for at in range(first - 1, max(0, first - _MOST_TOKENS), -1):
        token = texts[at]
        if token == ")":
            depth += 1
        elif token == "(":
            if depth == 0 and is_macro(texts[at - 1]):
                first = at - 1
            depth = max(0, depth - 1)
        elif depth == 0 and token in (";", "{", "}"):
            break
    return first


def _with_prefix(texts: list[str], first: int) -> int:
    """Where the unary operators before an operand begin."""
    while first > 1 and texts[first - 1] in _PREFIX and texts[first - 2] in _BEFORE_PREFIX | _PREFIX:
        first -= 1
    return first


def _is_word(token: str) -> bool:
    return token[0].isalpha() or token[0] in "_)]"


def _statement(texts: list[str], first: int) -> str:
    """The keyword of the statement whose parentheses hold a token."""
    depth = 0
    for at in range(first - 1, max(-1, first - 400), -1):
        token = texts[at]
        if token in (")", "]"):
            depth += 1
        elif token in ("(", "["):
            if depth == 0 and at > 0 and texts[at - 1] in _STATEMENTS:
                return texts[at - 1]
            depth = max(0, depth - 1)
        elif depth == 0 and token in ("{", "}"):
            break
    return ""


def negated(spelled: Spelled) -> str:
    """The text of the opposite condition."""
    depth = 0
    found: list[int] = []
    loose = False
    for number, token in enumerate(spelled.tokens):
        depth += (token in "([") - (token in ")]")
        if depth == 0 and token in _OPPOSITE:
            found.append(number)
        loose = loose or (depth == 0 and token in _LOOSER and number > 0)
    if len(found) == 1 and not loose:
        tokens = list(spelled.tokens)
        tokens[found[0]] = _OPPOSITE[tokens[found[0]]]
        return spelled._replace(tokens=tuple(tokens)).text
    return negated_text(spelled.text)


def negated_text(text: str) -> str:
    """The opposite of a condition of which only the text is known."""
    if text.startswith("!") and _is_plain(text[1:]):
        return text[1:]
    return f"!{text}" if _is_plain(text) else f"!({text})"


def _is_plain(text: str) -> bool:
    """Whether a text is one operand: a name, a member, a call."""
    depth = 0
    for number, character in enumerate(text):
        depth += (character in "([") - (character in ")]")
        if depth < 0 or (depth == 0 and not (character.isalnum() or character in "_.)]") and character != "-"):
            if not (character == ">" and text[number - 1] == "-"):
                return False
        if depth == 0 and character == "-" and text[number + 1 : number + 2] != ">":
            return False
    return bool(text)
