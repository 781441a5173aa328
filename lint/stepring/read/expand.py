"""Macro expansion that remembers where every token came from (ISO C N1570 section 6.10.3).

The preprocessor did the expansion; it is done again here, on a few lines and only when somebody asks for a place, to
know which token of the source each token of its output stems from. A token of a macro's body stems from the macro's
name in the source; an argument's token stems from its own place. The algorithm is the one of the standard's authors:
every token carries the set of macro names that may not expand it again.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import NamedTuple

from stepring.read.source import TOKEN
from stepring.read.types import Macro
from stepring.read.words import word_set

Place = tuple[int, int, int]
"""Line, column, and the column after the end, in the source file."""

ANY = "\0any"
"""The text of a token whose spelling only the preprocessor knows (``__LINE__``); it equals any one token."""
ANY_STRING = "\0string"
"""The text of a string made by ``#``; it equals any string literal."""

_DYNAMIC = word_set(
    "__LINE__ __FILE__ __COUNTER__ __DATE__ __TIME__ __TIMESTAMP__ __BASE_FILE__ __FILE_NAME__ __INCLUDE_LEVEL__"
)
_LIMIT = 100_000
_NOTHING: frozenset[str] = frozenset()


class Token(NamedTuple):
    """A token on its way through expansion."""

    text: str
    place: Place
    hidden: frozenset[str] = _NOTHING


class NeedsMore(Exception):
    """The tokens end inside a macro's invocation."""


@dataclass(frozen=True, slots=True)
class _Body:
    tokens: tuple[str, ...]
    parameters: tuple[str, ...] | None
    variadic: str | None


@lru_cache(maxsize=8192)
def _body(macro: Macro) -> _Body:
    tokens = tuple(match for match in TOKEN.findall(_no_comments(macro.body)) if not match.isspace())
    parameters = macro.parameters
    variadic = None
    if parameters and parameters[-1].endswith("..."):
        variadic = parameters[-1][:-3].strip() or "__VA_ARGS__"
        parameters = (*parameters[:-1], variadic)
    return _Body(tokens, parameters, variadic)


def _no_comments(text: str) -> str:
    if "/*" not in text:
        return text
    out, at = [], 0
    while (start := text.find("/*", at)) >= 0:
        end = text.find("*/", start + 2)
        out.append(text[at:start])
        at = len(text) if end < 0 else end + 2
    out.append(text[at:])
    return " ".join(out)


def expand(tokens: Sequence[Token], lookup: Callable[[str], Macro | None], complete: bool = False) -> list[Token]:
    """Expand tokens fully.

    Raises ``NeedsMore`` where they end inside an invocation, unless ``complete`` says that nothing follows.
    """
    stack = list(reversed(tokens))
    out: list[Token] = []
    steps = 0
    while stack:
        token = stack.pop()
        text = token.text
        if not (text[0].isalpha() or text[0] in "_$") or text[-1] in "\"'":
            out.append(token)
            continue
        if text in _DYNAMIC:
            out.append(Token(ANY, token.place))
            continue
        macro = None if text in token.hidden else lookup(text)
        if macro is None:
            out.append(token)
            continue
        body = _body(macro)
        steps += 1 + len(body.tokens)
        if steps > _LIMIT:
            out.append(token)
            out.extend(reversed(stack))
            return out
        if body.parameters is None:
            hidden = token.hidden | {text}
            stack.extend(reversed(_substitute(body, (), token.place, hidden, lookup)))
            continue
        if not stack:
            if not complete:
                raise NeedsMore
            out.append(token)
            continue
        if stack[-1].text != "(":
            out.append(token)
            continue
        taken = _arguments(stack, body)
        if taken is None:
            if not complete:
                raise NeedsMore
            out.append(token)
            continue
        arguments, closing = taken
        hidden = (token.hidden & closing.hidden) | {text}
        stack.extend(reversed(_substitute(body, arguments, token.place, hidden, lookup)))
    return out


def _arguments(stack: list[Token], body: _Body) -> tuple[list[list[Token]], Token] | None:
    """Take an invocation's arguments off the stack; None where it does not end."""
    depth = 0
    arguments: list[list[Token]] = [[]]
    fixed = len(body.parameters or ()) - (1 if body.variadic else 0)
    at = len(stack) - 1
    while at >= 0:
        token = stack[at]
        at -= 1
        text = token.text
        if text == "(":
            depth += 1
            if depth == 1:
                continue
        elif text == ")":
            depth -= 1
            if depth == 0:
                del stack[at + 1 :]
                return arguments, token
        elif text == "," and depth == 1 and not (body.variadic and len(arguments) > fixed):
            arguments.append([])
            continue
        arguments[-1].append(token)
    return None


def _substitute(
    body: _Body,
    arguments: Sequence[list[Token]],
    place: Place,
    hidden: frozenset[str],
    lookup: Callable[[str], Macro | None],
) -> list[Token]:
    names = {name: index for index, name in enumerate(body.parameters or ())}
    expanded: dict[int, list[Token]] = {}

    def raw(name: str) -> list[Token]:
        index = names[name]
        return arguments[index] if index < len(arguments) else []

    def full(name: str) -> list[Token]:
        index = names[name]
        if index not in expanded:
            expanded[index] = expand(raw(name), lookup, complete=True)
        return expanded[index]

    out: list[Token] = []
    texts = body.tokens
    index = 0
    while index < len(texts):
        text = texts[index]
        after = texts[index + 1] if index + 1 < len(texts) else ""
        if text == "#" and body.parameters is not None and after in names:
            out.append(Token(ANY_STRING, place))
            index += 2
        elif text == "##" and out and after:
            index += 2
            if after in names:
                right = list(raw(after))
                if out[-1].text == "," and after == body.variadic:
                    # GNU C: the comma goes where nothing follows
                    if not right and names[after] >= len(arguments):
                        out.pop()
                    out.extend(right)
                    continue
            else:
                right = [Token(after, place)]
            if right and out[-1].text != _EMPTY:
                joined = Token(out[-1].text + right[0].text, place, out[-1].hidden & right[0].hidden)
                out[-1:] = [joined, *right[1:]]
            elif right:
                out[-1:] = right
        elif text == "__VA_OPT__" and body.variadic and after == "(":
            depth, end = 0, index + 1
            while end < len(texts):
                depth += {"(": 1, ")": -1}.get(texts[end], 0)
                if depth == 0:
                    break
                end += 1
            if raw(body.variadic):
                inner = _Body(texts[index + 2 : end], body.parameters, body.variadic)
                out.extend(_substitute(inner, arguments, place, _NOTHING, lookup))
            index = end + 1
        elif text in names:
            pasted = after == "##"
            tokens = raw(text) if pasted else full(text)
            out.extend(tokens)
            if pasted and not tokens:
                out.append(Token(_EMPTY, place))
            index += 1
        else:
            out.append(Token(text, place))
            index += 1
    return [Token(one.text, one.place, one.hidden | hidden) for one in out if one.text != _EMPTY]


_EMPTY = "\0empty"
