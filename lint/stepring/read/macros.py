"""Macros: their table and their expansion, as pcpp does it.

pcpp's ``Preprocessor`` offers ``define`` and ``expand_macros`` in public, and takes any lexer. It is used for just
these: finding macro uses, files and conditionals is done outside, with text. Three things are added: a lexer of
preprocessing tokens (ISO C N1570 6.4) that is one regular expression; a table that understands a macro only when it is
used, and once for all units; and limits, because a few lines of macros can ask for more text than there is memory (each
level of nesting doubles it).
"""

import re
import time
from collections.abc import Iterable, Sequence
from typing import Any

from pcpp import Preprocessor

from stepring.read.conditions import NoValue, value_of

EXPANSION_LIMIT = 400_000
_TYPES = {
    "+": "PLUS", "-": "MINUS", "*": "STAR", "/": "FSLASH", "%": "PERCENT", "|": "BAR", "&": "AMPERSAND", "~": "TILDE",
    "^": "HAT", "<": "LESS", ">": "GREATER", "=": "EQUAL", "!": "EXCLAMATION", "?": "QUESTION", "(": "LPAREN",
    ")": "RPAREN", "[": "LBRACKET", "]": "RBRACKET", "{": "LCURLY", "}": "RCURLY", ".": "DOT", ",": "COMMA",
    ";": "SEMICOLON", ":": "COLON", "\\": "BSLASH", "'": "SQUOTE", '"': "DQUOTE", "#": "POUND", "##": "DPOUND",
    "->": "DEREFERENCE", "-=": "MINUSEQUAL", "--": "MINUSMINUS", "<<": "LSHIFT", "<=": "LESSEQUAL", ">>": "RSHIFT",
    ">=": "GREATEREQUAL", "||": "LOGICALOR", "|=": "OREQUAL", "&&": "LOGICALAND", "&=": "ANDEQUAL", "==": "EQUALITY",
    "!=": "INEQUALITY", "^=": "XOREQUAL", "*=": "MULTIPLYEQUAL", "/=": "DIVIDEEQUAL", "+=": "PLUSEQUAL",
    "++": "PLUSPLUS", "%=": "PERCENTEQUAL", "<<=": "LSHIFTEQUAL", ">>=": "RSHIFTEQUAL",
}  # fmt: skip
_TOKEN = re.compile(
    r'(?P<CPP_STRING>(?:u8|[LuU])?"[^"\\\n]*(?:\\.[^"\\\n]*)*"?)'
    r"|(?P<CPP_CHAR>[LuU]?'[^'\\\n]*(?:\\.[^'\\\n]*)*'?)"
    r"|(?P<CPP_ID>[A-Za-z_$\x80-\U0010ffff][\w$]*)"
    r"|(?P<CPP_WS>[ \t\f\v]+|\n)"
    r"|(?P<NUMBER>\.?\d(?:[eEpP][+\-]|[\w.])*)"
    r"|(?P<CPP_LINECONT>\\[ \t]*\n)"
    r"|(?P<CPP_COMMENT1>/\*.*?\*/)"
    r"|(?P<CPP_COMMENT2>//[^\n]*)"
    r"|(?P<SIGN><<=|>>=|\.\.\.|##|->|--|-=|<<|<=|>>|>=|\|\||\|=|&&|&=|==|!=|\^=|\*=|/=|\+\+|\+=|%=|.)",
    re.DOTALL,
)
_INTEGER = re.compile(r"(0[xX][0-9a-fA-F]+|0[bB][01]+|\d+)([uUlLzZ]*)")
_SIMPLE = re.compile(r"\s*(!?)\s*(\d+)\s*")
_SINGLE = re.compile(r"\s*(!?)\s*defined\s*(?:\(\s*([A-Za-z_]\w*)\s*\))\s*")
# Two tokens that an expansion has put side by side and that would be read as one (or as a comment) if written so.
_PASTES = re.compile(
    r"[\w$][\w$\"']|\+\+|--|<<|>>|&&|\|\||[-+*/%&|^=!<>]=|->|//|/\*|##|\.\.|\.\d|[\d.][\d.]|<:|<%|%:|%>|:>|[eEpP][+-]"
)


class LimitReached(Exception):
    """An expansion was given up: ``whole`` says that the unit's time is over, not only this expansion's."""

    def __init__(self, text: str, *, whole: bool) -> None:
        super().__init__(text)
        self.whole = whole


class Token:
    """A preprocessing token with the members pcpp works with."""

    __slots__ = ("expanded_from", "lexpos", "lineno", "source", "type", "value")

    def __init__(self, kind: str, value: str, line: int, expanded_from: list[str]) -> None:
        self.type = kind
        self.value = value
        self.lineno = line
        self.lexpos = 0
        self.source = ""
        self.expanded_from = expanded_from

    def __copy__(self) -> "Token":
        return Token(self.type, self.value, self.lineno, self.expanded_from[:])


class Lexer:
    """A lexer as pcpp wants one: ``input``, ``token``, ``clone`` and a line number that counts on."""

    def __init__(self) -> None:
        self.lineno = 1
        self._tokens: list[Token] = []
        self._next = 0

    def input(self, text: str) -> None:
        """Take a text; its tokens come one by one from ``token``."""
        self._tokens = tokens_of(text, self.lineno)
        self._next = 0

    def token(self) -> Token | None:
        """The next token, or None at the end."""
        if self._next >= len(self._tokens):
            return None
        self._next += 1
        return self._tokens[self._next - 1]

    def clone(self) -> "Lexer":
        """Another lexer of the same kind."""
        return Lexer()


def tokens_of(text: str, line: int = 1) -> list[Token]:
    """A text's preprocessing tokens, all on one line."""
    tokens: list[Token] = []
    for found in _TOKEN.finditer(text):
        kind, value = found.lastgroup or "", found[0]
        if kind == "SIGN":
            name = _TYPES.get(value)
            kind = f"CPP_{name}" if name else value
        elif kind == "NUMBER":
            kind = "CPP_INTEGER" if _INTEGER.fullmatch(value) else "CPP_FLOAT"
        elif kind == "CPP_LINECONT":
            value = value[1:-1]
        tokens.append(Token(kind, value, line, []))
    return tokens


class Definition:
    """A macro as its directive wrote it; pcpp's own form of it is made when it is first used."""

    __slots__ = ("function_like", "name", "text", "understood")

    def __init__(self, name: str, text: str, *, function_like: bool) -> None:
        self.name = name
        self.text = text
        self.function_like = function_like
        self.understood: Any = None


_DEFINE = re.compile(r"([A-Za-z_$\x80-\U0010ffff][\w$]*)(\(?)(.*)", re.DOTALL)


def definition_of(rest: str) -> Definition | None:
    """What follows ``#define``, or None where it is malformed."""
    found = _DEFINE.fullmatch(rest)
    if found is None or found[1] == "defined":
        return None
    name, parenthesis, body = found.groups()
    if parenthesis:
        if ")" not in body:
            return None
        return Definition(name, rest, function_like=True)
    # Normalised so that a blank always follows the name, as pcpp expects.
    return Definition(name, f"{name} {body.strip()}" if body.strip() else name, function_like=False)


class Table(dict[str, Any]):
    """The macros of a unit by name; ``names`` is the same as a set, for set operations."""

    def __init__(self, engine: "Engine") -> None:
        super().__init__()
        self._engine = engine
        self.names: set[str] = set()

    def __getitem__(self, name: str) -> Any:
        value = dict.__getitem__(self, name)
        if value.understood is None:
            value.understood = self._engine.understand(value)
        return value.understood

    def definition(self, name: str) -> Definition:
        """The macro as it was written."""
        found: Definition = dict.__getitem__(self, name)
        return found

    def put(self, definition: Definition) -> None:
        """Define a macro, or define it anew."""
        self[definition.name] = definition
        self.names.add(definition.name)

    def drop(self, name: str) -> None:
        """Undefine a macro."""
        self.pop(name, None)
        self.names.discard(name)


class Engine(Preprocessor):  # type: ignore[misc]
    """pcpp with limits; one serves all units of a process, each with its own table."""

    def __init__(self) -> None:
        self.deadline = float("inf")
        self.spent = 0
        self.moving = False
        super().__init__(Lexer())
        self._scratch = self.macros
        self.complaints: list[str] = []
        self.start(float("inf"))

    def start(self, deadline: float) -> Table:
        """An empty table for a unit that has until ``deadline`` (``time.monotonic``)."""
        self.deadline = deadline
        self.table = Table(self)
        self.macros = self.table
        self.countermacro = 0
        self.complaints.clear()
        return self.table

    def on_error(self, file: Any, line: Any, msg: str) -> None:
        """Keep what pcpp complains about."""
        self.complaints.append(msg)

    def understand(self, definition: Definition) -> Any:
        """pcpp's form of a macro; a malformed one has no replacement."""
        self.macros = self._scratch
        try:
            self.define(definition.text)
            return self._scratch.pop(definition.name)
        except Exception:
            # pcpp indexes past the end of malformed parameter lists.
            self.complaints.append(f"macro {definition.name} is malformed")
            self.define(f"{definition.name} {definition.name}")
            return self._scratch.pop(definition.name)
        finally:
            self.macros = self.table

    def expand_macros(self, tokens: list[Any], expanding_from: list[str] | None = None) -> list[Any]:
        """pcpp's expansion, given up when it gets out of hand (every nested expansion passes here)."""
        if time.monotonic() > self.deadline:
            raise LimitReached("the time for this unit is over", whole=True)
        if not self.moving:
            self.moving = any(token.value in ("__LINE__", "__COUNTER__") for token in tokens)
        expanded: list[Any] = super().expand_macros(tokens, expanding_from or [])
        self.spent += len(expanded)
        if self.spent > EXPANSION_LIMIT:
            raise LimitReached(f"a macro expands to more than {EXPANSION_LIMIT} tokens", whole=False)
        return expanded

    def expand(self, text: str, line: int) -> str:
        """A piece of text with its macros expanded, on one line; raises ``LimitReached`` or pcpp's own exceptions."""
        self.spent = 0
        self.moving = False
        self.linemacro = 0
        self.linemacrodepth = 0
        return joined(self.expand_macros(tokens_of(text, line)))

    def holds(self, text: str, line: int) -> bool:
        """Whether an ``#if`` expression is true; raises ValueError with the reason where it has no value."""
        simple = _SIMPLE.fullmatch(text)
        if simple is not None:
            return (int(simple[2]) != 0) != bool(simple[1])
        single = _SINGLE.fullmatch(text)
        if single is not None:
            return (single[2] in self.table.names) != bool(single[1])
        self.spent = 0
        self.linemacro = 0
        self.linemacrodepth = 0
        tokens = self._without_defined(tokens_of(text, line))
        tokens = self._without_defined(self.expand_macros(tokens))
        return _value_of([token.value for token in tokens if not token.value.isspace()]) != 0

    def _without_defined(self, tokens: list[Token]) -> list[Token]:
        """``defined X`` and ``defined (X)`` replaced by 1 or 0."""
        if not any(token.value == "defined" for token in tokens):
            return tokens
        kept: list[Token] = []
        rest = [token for token in tokens if token.type not in self.t_WS]
        index = 0
        while index < len(rest):
            token = rest[index]
            index += 1
            if token.value == "defined":
                brackets = index < len(rest) and rest[index].value == "("
                index += brackets
                name = rest[index].value if index < len(rest) else ""
                index += 1 + (brackets and index + 1 < len(rest) and rest[index + 1].value == ")")
                token = Token("CPP_INTEGER", "1" if name in self.table.names else "0", token.lineno, [])
            kept.append(token)
        return kept


_values: dict[str, int | str] = {}


def _value_of(tokens: Sequence[str]) -> int:
    """An expanded expression's value, remembered: it depends on the tokens alone."""
    written = " ".join(tokens)
    known = _values.get(written)
    if known is None:
        if len(_values) > 100_000:
            _values.clear()
        try:
            known = value_of(tokens)
        except NoValue as error:
            known = str(error)
        _values[written] = known
    if isinstance(known, str):
        raise NoValue(known)
    return known


def joined(tokens: Iterable[Any]) -> str:
    """Tokens as text on one line; a blank keeps apart what an expansion put side by side."""
    pieces: list[str] = []
    last = ""
    for token in tokens:
        value: str = token.value
        if not value:
            continue
        if value.isspace():
            if last not in (" ", ""):
                pieces.append(" ")
                last = " "
            continue
        if last and last != " " and _PASTES.match(last + value[0]):
            pieces.append(" ")
        pieces.append(value)
        last = value[-1]
    return "".join(pieces)


def would_paste(left: str, right: str) -> bool:
    """Whether two characters at the border of two tokens would make them one."""
    return bool(left) and bool(right) and _PASTES.match(left + right) is not None
