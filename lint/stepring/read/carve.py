"""Carving: from a unit's preprocessed text to its top-level declarations, without parsing any of them.

One regular expression finds the few characters that can end or nest a declaration at file scope (braces, semicolons,
strings, comments, ``#`` lines); everything between them is skipped at the speed of the regular expression engine. Most
of a unit's text comes from headers that other units include too, so the text is first split where the line markers
change the file, and each such piece is carved once for the whole run. A piece also carries what it does to the table
of macros (``#define`` and ``#undef`` lines, which the preprocessor was asked to keep).

Declarations are told apart by ISO C N1570 section 6.9: a brace at file scope opens the body of a function unless it
belongs to a struct, union or enum specifier or to an initialiser. An unbalanced brace costs only the declaration it
stands in: carving goes on at the next line that looks like the start of a declaration.
"""

import os
import re
from bisect import bisect_right
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cache
from typing import Literal

from stepring.places import Notice
from stepring.read.kept import Kept
from stepring.read.names import Declared, declared_names, identifiers
from stepring.read.types import Macro

ChunkKind = Literal["function", "other", "pragma"]


@dataclass(slots=True, eq=False)
class Chunk:
    """One declaration of file scope as text.

    ``text`` starts at ``line`` and ``column`` of ``file`` and holds nothing but C, ``#line`` markers and line ends:
    each of its physical lines has a place of its own (no two share file, line and columns). ``offset`` and
    ``end_offset`` bound it in its piece. ``names`` are the objects and functions that it declares, ``tags`` the
    tags and enumerators, ``typedefs`` the type names; ``variable`` says that it defines an object. ``uses`` are all
    identifiers in it.
    """

    kind: ChunkKind
    text: str
    file: str
    line: int
    column: int
    end_line: int
    offset: int
    end_offset: int
    system: bool
    names: tuple[str, ...]
    tags: tuple[str, ...]
    typedefs: tuple[str, ...]
    variable: bool
    uses: frozenset[str]
    marks: tuple[tuple[int, int], ...] = ()

    def piece_offset(self, offset: int) -> int:
        """The offset in the piece that an offset in ``text`` came from."""
        index = bisect_right(self.marks, (offset, 1 << 62)) - 1
        here, there = self.marks[index] if index >= 0 else (0, 0)
        return self.offset + there + offset - here


@dataclass(frozen=True, slots=True)
class Change:
    """What one ``#define`` (``macro``) or ``#undef`` (None) line does, its offset in the piece and its line."""

    offset: int
    line: int
    macro: Macro | None


@dataclass(slots=True, eq=False)
class Piece:
    """A stretch of preprocessed text that was carved at once.

    ``changes`` are its ``#define`` and ``#undef`` lines per name, in order.
    ``declares`` maps every declared name to its chunks.
    """

    chunks: tuple[Chunk, ...]
    changes: Mapping[str, tuple[Change, ...]]
    notices: tuple[Notice, ...]
    declares: dict[str, tuple[Chunk, ...]] = field(default_factory=dict)
    typedefs: frozenset[str] = frozenset()
    open: bool = False


_MARKER = r'#[ \t]*(?:line[ \t]+)?(\d+)(?:[ \t]+"((?:[^"\\\n]|\\.)*)"([^\n]*))?'
_FILE_MARKER = re.compile(r'\n#[ \t]*(?:line[ \t]+)?(\d+)[ \t]+"((?:[^"\\\n]|\\.)*)"[^\n]*')
_MARKER_LINE = re.compile(r"\n[ \t]*" + _MARKER + r"[ \t]*(?=\n|\Z)")
_DIRECTIVE = r"\n[ \t]*\#[^\n]*(?:(?<=\\)\n[^\n]*)*"
_EVENT_TEXT = (
    r"\{|\}|;"
    r'|"(?:[^"\\\n]|\\[^\n]|\\\n)*"?'
    r"|'(?:[^'\\\n]|\\[^\n])*'?"
    r"|" + _DIRECTIVE + r"|/\*(?:[^*]|\*(?!/))*(?:\*/)?|//[^\n]*"
)
_EVENT = re.compile(_EVENT_TEXT)
_TYPE_WORD = (
    r"(?:static|extern|inline|typedef|const|volatile|unsigned|signed|struct|union|enum|void|int|char|short|long|float"
    r"|double|_Bool|bool|register|[A-Za-z_]\w*)"
)
_FRESH_START = re.compile(
    r"\n(?!(?:return|else|goto|case|if|while|for|do|switch|default|break|continue|sizeof)\b)"
    r"(?=" + _TYPE_WORD + r"(?:[ \t]+\**|[ \t]*\*+[ \t]*)(?:" + _TYPE_WORD + r"(?:[ \t]+\**|[ \t]*\*+[ \t]*)){0,6}"
    r"[A-Za-z_]\w*[ \t]*[(=;\[{])"
)
_DEFINE = re.compile(
    r"\n[ \t]*\#[ \t]*define[ \t]+([A-Za-z_$][\w$]*)(?:(\([^()\n]*\))|(?=[\s\\]|\Z|[^\w(]))[ \t]*(.*)", re.DOTALL
)
_UNDEF = re.compile(r"\n[ \t]*\#[ \t]*undef[ \t]+([A-Za-z_$][\w$]*)")
_PRAGMA = re.compile(r"\n[ \t]*\#[ \t]*pragma\b[ \t]*(.*)", re.DOTALL)
_IDLE_PRAGMA = re.compile(r"(?:GCC|clang|STDC|once\b|message\b|warning\b|diag_|poison|push_macro|pop_macro)")
_OLD_STYLE = re.compile(r"[^=;{}]*\([\w\s,]+\)\s*[A-Za-z_][^{}]*;\Z")
_STRING = re.compile(r'"(?:[^"\\\n]|\\.)*"')
_ASSIGNS = re.compile(r"(?<![=!<>])=(?!=)")
_AGGREGATE = re.compile(r"\b(?:struct|union|enum)\b")
_NOT_CLOSED = "A declaration that starts here is not closed; it was left out."
_LONGEST_HEAD = 20_000
_DECORATION = re.compile(
    r"\b(?:__attribute__|__attribute|__declspec|_Alignas|alignas|__align|__packed__)\s*"
    r"\((?:[^()]|\((?:[^()]|\([^()]*\))*\))*\)|\[\[[^\]]*\]\]"
)
_LINKAGE = re.compile(r'extern\s*"C(?:\+\+)?"\s*\Z')
_COMMENT = re.compile(r'"(?:[^"\\\n]|\\.)*"?|\'(?:[^\'\\\n]|\\.)*\'?|(/\*(?:[^*]|\*(?!/))*(?:\*/)?|//[^\n]*)')
_ANY_LINE = re.compile(r"^[ \t]*" + _MARKER + r"[ \t]*\Z")


@cache
def marker_file(spelled: str) -> str:
    """The file that a line marker names: escapes undone, ``..`` removed, Windows separators turned to ``/``."""
    if re.match(r"[A-Za-z]:\\", spelled) or ("\\" in spelled and "/" not in spelled and '\\"' not in spelled):
        name = re.sub(r"\\+", "/", spelled)
    elif "\\" in spelled:
        octal = re.sub(r"\\([0-7]{3})", lambda m: chr(int(m.group(1), 8)), spelled)
        name = re.sub(r"\\(.)", r"\1", octal)
        name = name.encode("latin-1", "replace").decode("utf-8", "replace") if octal != spelled else name
    else:
        name = spelled
    return name if name.startswith("<") else os.path.normpath(name)


def spelled_file(name: str) -> str:
    """A file name as it can stand in a ``#line`` for the parser, which undoes no escapes."""
    return name.replace("\\", "/").replace('"', "'").replace("\n", " ")


def carve(text: str, source: str, pieces: Kept[str, Piece]) -> list[Piece]:
    """Split preprocessed text into carved pieces, in order; ``pieces`` holds those of the run, by text.

    ``source`` names the file of text before the first line marker.
    """
    texts = list(_split(text, source))
    carved: list[Piece] = []
    at = 0
    while at < len(texts):
        here = texts[at]
        piece = pieces.get(here)
        taken = 1
        if piece is None:
            piece = _carve_piece(here, source)
            pieces.put(here, piece, len(here))
        while piece.open and at + taken < len(texts):
            # a declaration goes on past an #include: take twice as much, so that the work stays linear
            taken = min(taken * 2, len(texts) - at)
            here = "".join(texts[at : at + taken])
            piece = pieces.get(here) or _carve_piece(here, source)
            pieces.put(here, piece, len(here))
        if piece.open:
            piece = _carve_piece(here, source, last=True)
        carved.append(piece)
        at += taken
    return carved


def _split(text: str, source: str) -> Iterator[str]:
    """Cut where a line marker names another file than the one before; each part starts with its marker."""
    if not text.startswith("\n"):
        text = "\n" + text
    if not text.endswith("\n"):
        text += "\n"
    start = 0
    current: str | None = None
    for match in _FILE_MARKER.finditer(text):
        if match[2] != current:
            current = match[2]
            if match.start() > start:
                yield text[start : match.start()]
            start = match.start()
    yield text[start:]


class _Lines:
    """Where an offset of a piece stands: file and line by the last marker before it."""

    def __init__(self, text: str, file: str) -> None:
        self.offsets = [0]
        self.places = [(file, 0 if text.startswith("\n") else 1, False)]
        self.text = text
        self.last = (0, self.places[0][1], 0)
        for match in _MARKER_LINE.finditer(text):
            name = marker_file(match[2]) if match[2] is not None else self.places[-1][0]
            system = "3" in match[3].split() if match[3] else False
            # the marker's own line end is counted, so that the next line gets the number it names
            self.offsets.append(match.end())
            self.places.append((name, int(match[1]) - 1, system))

    def at(self, offset: int) -> tuple[str, int, bool]:
        """File, line and system flag of an offset; cheap when asked in rising order."""
        index = bisect_right(self.offsets, offset) - 1
        file, line, system = self.places[index]
        start = self.offsets[index]
        known_index, known_line, known_offset = self.last
        if known_index == index and known_offset <= offset and known_offset >= start:
            line, start = known_line, known_offset
        line += self.text.count("\n", start, offset)
        self.last = (index, line, offset)
        return file, line, system


@dataclass(slots=True)
class _Span:
    """A chunk before it becomes one: offsets into the piece and what was seen inside."""

    kind: ChunkKind
    start: int
    end: int
    body: int
    dirty: bool


def _carve_piece(text: str, source: str, last: bool = False) -> Piece:
    lines = _Lines(text, source)
    spans: list[_Span] = []
    changes: dict[str, list[Change]] = {}
    notices: list[Notice] = []
    rest = _scan(text, 0, _EVENT, spans, changes, notices, lines)
    if rest is not None and last:
        while rest is not None:
            rest = _first(text, rest)
            file, line, _ = lines.at(rest)
            notices.append(Notice("unterminated", "warning", _NOT_CLOSED, file, line))
            fresh = _FRESH_START.search(text, rest)
            if fresh is None:
                rest = None
            else:
                rest = _scan(text, fresh.start() + 1, _STRICT_EVENT, spans, changes, notices, lines)
    chunks = tuple(_chunks(text, spans, lines))
    declares: dict[str, tuple[Chunk, ...]] = {}
    typedefs: set[str] = set()
    for chunk in chunks:
        typedefs.update(chunk.typedefs)
        for name in (*chunk.names, *chunk.tags, *chunk.typedefs):
            declares[name] = (*declares.get(name, ()), chunk)
    fixed = {name: tuple(events) for name, events in changes.items()}
    return Piece(chunks, fixed, tuple(notices), declares, frozenset(typedefs), rest is not None and not last)


_STRICT_EVENT = re.compile(_EVENT_TEXT.replace("|" + _DIRECTIVE, "|" + _DIRECTIVE + "|" + _FRESH_START.pattern))


def _scan(
    text: str,
    start: int,
    pattern: re.Pattern[str],
    spans: list[_Span],
    changes: dict[str, list[Change]],
    notices: list[Notice],
    lines: _Lines,
) -> int | None:
    """Find the chunks from ``start`` on; gives the offset of a declaration left open at the end, or None."""
    depth = 0
    body = -1
    linkage = 0
    dirty = False
    for match in pattern.finditer(text, start):
        at = match.start()
        first = text[at]
        if first == ";":
            if depth:
                continue
            if not _blank(text, start, at):
                spans.append(_Span("other", start, match.end(), -1, dirty))
            start, dirty = match.end(), False
        elif first == "{":
            if depth == 0:
                head = text[start:at]
                if _LINKAGE.search(head):
                    linkage += 1
                    start = match.end()
                    continue
                if not head.strip():
                    start, dirty = _join_old_style(text, spans, start, dirty)
                    head = text[start:at]
                body = at if _opens_body(head) else -1
            depth += 1
        elif first == "}":
            if depth == 0:
                if linkage:
                    linkage -= 1
                else:
                    file, line, _ = lines.at(at)
                    notices.append(Notice("unterminated", "warning", "A closing brace has no opening one.", file, line))
                start, dirty = match.end(), False
                continue
            depth -= 1
            if depth == 0 and body >= 0:
                spans.append(_Span("function", start, match.end(), body, dirty))
                start, dirty, body = match.end(), False, -1
        elif first == "\n":
            if match.end() == at + 1:
                # only the strict pattern matches a bare line end: a declaration starts although braces are open
                if depth:
                    file, line, _ = lines.at(_first(text, start))
                    notices.append(Notice("unterminated", "warning", _NOT_CLOSED, file, line))
                    start, depth, dirty, body = match.end(), 0, False, -1
                continue
            idle = depth == 0 and _blank(text, start, at)
            _directive(match.group(), at, changes, lines)
            if idle:
                pragma = _PRAGMA.match(match.group())
                if pragma and not _IDLE_PRAGMA.match(pragma[1]):
                    spans.append(_Span("pragma", at + 1, match.end(), -1, False))
                start = match.end()
            else:
                dirty = True
        elif first == "/":
            if first == match.group():
                continue
            dirty = True
            if depth == 0 and _blank(text, start, at):
                start, dirty = match.end(), False
            if match.group().startswith("/*") and not match.group().endswith("*/"):
                file, line, _ = lines.at(at)
                notices.append(Notice("unterminated", "warning", "A comment is not closed.", file, line))
    if depth or not _blank(text, start, len(text)):
        return start
    return None


def _first(text: str, start: int) -> int:
    """The offset of the first character from ``start`` on that is no space."""
    while start < len(text) and text[start].isspace():
        start += 1
    return start


def _blank(text: str, start: int, end: int) -> bool:
    return start == end or text[start:end].isspace()


def _join_old_style(text: str, spans: list[_Span], start: int, dirty: bool) -> tuple[int, bool]:
    """A body right after a semicolon: the parameter declarations of an old-style definition were taken for chunks."""
    for back in range(1, min(32, len(spans)) + 1):
        span = spans[-back]
        if span.kind != "other":
            break
        if "(" in text[span.start : span.end]:
            if start - span.start < _LONGEST_HEAD and _OLD_STYLE.match(text[span.start : start].rstrip()):
                dirty = dirty or any(one.dirty for one in spans[-back:])
                start = span.start
                del spans[-back:]
            break
    return start, dirty


def _opens_body(head: str) -> bool:
    """Whether a brace after ``head`` opens a function body (not an initialiser, not a struct, union or enum)."""
    if "#" in head:
        head = re.sub(r"(?m)^[ \t]*#.*$", "", head)
    if '"' in head:
        head = _STRING.sub(" ", head)
    if "=" in head and _ASSIGNS.search(head) and _ASSIGNS.search(re.sub(r"\([^()]*\)", "", head)):
        return False
    if head.count("(") > head.count(")") or head.count("[") > head.count("]"):
        return False
    ends = [keyword.end() for keyword in _AGGREGATE.finditer(head)]
    if not ends:
        return True
    tail = _DECORATION.sub(" ", head[ends[-1] :])
    return any(c in tail for c in "()*,;")


def _directive(line: str, at: int, changes: dict[str, list[Change]], lines: _Lines) -> None:
    define = _DEFINE.match(line)
    if define is not None:
        file, number, _ = lines.at(at + 1)
        parameters = None
        if define[2] is not None:
            inner = define[2][1:-1].strip()
            parameters = tuple(part.strip() for part in inner.split(",")) if inner else ()
        body = define[3].replace("\\\n", " ").strip()
        macro = Macro(define[1], parameters, body, file, number)
        changes.setdefault(define[1], []).append(Change(at, number, macro))
        return
    undef = _UNDEF.match(line)
    if undef is not None:
        changes.setdefault(undef[1], []).append(Change(at, lines.at(at + 1)[1], None))


def _chunks(text: str, spans: list[_Span], lines: _Lines) -> Iterator[Chunk]:
    """Turn spans into chunks: blank what is no C, give every physical line a place of its own."""
    used_place: tuple[str, int] = ("", 0)
    used_column = 0
    for span in sorted(spans, key=lambda one: one.start):
        start = _first(text, span.start)
        file, line, system = lines.at(start)
        column = start - text.rfind("\n", 0, start)
        if (file, line) == used_place and column <= used_column:
            column = used_column + 1
        body = text[start : span.end]
        marks: tuple[tuple[int, int], ...] = ()
        if span.dirty or "\n#" in body:
            body, marks = _plain(body, file, line, column)
        head = body
        if span.kind == "function":
            head = text[start : span.body]
            if span.dirty:
                head, _ = _plain(head, file, line, column)
        names = declared_names(head, span.kind == "function") if span.kind != "pragma" else Declared()
        last_break = body.rfind("\n")
        if last_break < 0:
            end_line, end_column = line, column + len(body) - 1
        else:
            end_line, end_column = _end_place(body, line), len(body) - last_break - 1
        used_place, used_column = (file, end_line), end_column
        yield Chunk(
            span.kind,
            body,
            file,
            line,
            column,
            end_line,
            start,
            span.end,
            system,
            names.names,
            names.tags,
            names.typedefs,
            names.object,
            identifiers(body),
            marks,
        )


def _end_place(body: str, line: int) -> int:
    marker = body.rfind("\n#line ")
    if marker < 0:
        return line + body.count("\n")
    after = body.index("\n", marker + 1)
    return int(body[marker + 7 : body.index(" ", marker + 7)]) + body.count("\n", after + 1)


def _plain(body: str, file: str, line: int, column: int) -> tuple[str, tuple[tuple[int, int], ...]]:
    """Blank comments and directives; join physical lines that a marker gives the same place, columns kept apart.

    A preprocessor may give one line of the source in several physical lines (around a macro of a system header). The
    parts are put on one line, or, where other lines lie between, get columns that were not used before. Also gives
    pairs (offset in the result, offset in ``body``), one for each part.
    """
    if "/" in body:
        body = _COMMENT.sub(lambda m: re.sub(r"[^\n]", " ", m[1]) if m[1] else m[0], body)
    body = body.replace("\\\n", " \n")
    used: dict[tuple[str, int], int] = {}
    out: list[str] = []
    marks: list[tuple[int, int]] = []
    length = taken = 0
    at = shown = (file, line)
    width = column - 1
    directive_goes_on = False
    for number, part in enumerate(body.split("\n")):
        start = taken
        taken += len(part) + 1
        stripped = part.lstrip()
        if number and (stripped.startswith("#") or directive_goes_on):
            marker = _ANY_LINE.match(part)
            if marker is not None:
                at = (marker_file(marker[2]) if marker[2] is not None else at[0], int(marker[1]))
            else:
                directive_goes_on = part.endswith("\\")
                at = (at[0], at[1] + 1)
            continue
        if stripped:
            indent = part[: len(part) - len(stripped)]
            lead = indent
            if number and at == shown:
                lead = " "
            elif number:
                width = 0
                before = used.get(at, 0)
                if before and len(indent) <= before:
                    lead = " " * (before + 1)
                if at[0] == shown[0] and 0 < at[1] - shown[1] <= 8:
                    lead = "\n" * (at[1] - shown[1]) + lead
                else:
                    lead = f'\n#line {at[1]} "{spelled_file(at[0])}"\n' + lead
            out += (lead, stripped)
            length += len(lead)
            marks.append((length, start + len(indent)))
            length += len(stripped)
            width += len(lead) - lead.rfind("\n") - 1 + len(stripped)
            shown = at
            used[at] = max(used.get(at, 0), width)
        at = (at[0], at[1] + 1)
    return "".join(out), tuple(marks)
