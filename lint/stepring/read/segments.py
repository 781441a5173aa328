"""A source file cut up once for all units that include it: runs of plain text, and directives.

Translation phases 2 and 3 of ISO C (N1570 5.1.1.2) are done here: lines joined at a backslash, comments turned into
white space. Nothing moves: a comment becomes as many blanks, what joining takes away is given back as empty lines, so a
token that no macro touches keeps its line and its column. Each run knows the identifiers in it, which is how a unit
passes over text that none of its macros occurs in without looking at it again.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import lru_cache
from itertools import pairwise
from pathlib import Path

from stepring.gather.text import decode as decode_bytes
from stepring.gather.text import is_text, not_text, read_bytes
from stepring.places import Notice

_COMMENT = re.compile(
    r"//[^\n]*|/\*(?:.*?\*/|.*\Z)"
    r'|"[^"\\\n]*(?:\\.[^"\\\n]*)*(?:"|$)'
    r"|'[^'\\\n]*(?:\\.[^'\\\n]*)*(?:'|$)",
    re.DOTALL | re.MULTILINE,
)
_WORDS = re.compile(
    r'(?:u8|[LuU])?"[^"\\\n]*(?:\\.[^"\\\n]*)*"?'
    r"|[LuU]?'[^'\\\n]*(?:\\.[^'\\\n]*)*'?"
    r"|([A-Za-z_$][\w$]*)"
    r"|\.?\d(?:[eEpP][+\-]|[\w.])*"
)
_DIRECTIVE = re.compile(r"[ \t\f\v]*(?:#|%:)[ \t\f\v]*(\w*)[ \t\f\v]*(.*)", re.DOTALL)
_GUARD = re.compile(r"!\s*defined\s*\(?\s*(\w+)\s*\)?\s*$")
_JOINED = "\x00"
# So many string literals that are not closed are remembered of a file.
_OPEN_STRINGS = 100
CONDITIONALS = frozenset(("if", "ifdef", "ifndef"))


@dataclass(slots=True)
class Run:
    """Lines without a directive. ``line`` is the first one's number; ``text`` ends with a newline.

    ``open_string`` is the line of the first string literal that is not closed on it, or 0.
    """

    line: int
    text: str
    lines: int
    words: frozenset[str]
    open_string: int = 0
    _places: dict[str, list[tuple[int, int]]] | None = None

    def places(self) -> dict[str, list[tuple[int, int]]]:
        """Where each identifier stands: start and end offsets, in order."""
        if self._places is None:
            places: dict[str, list[tuple[int, int]]] = {}
            for found in _WORDS.finditer(self.text):
                if found[1]:
                    places.setdefault(found[1], []).append(found.span())
            self._places = places
        return self._places


@dataclass(slots=True)
class Directive:
    """One directive. ``rest`` is what follows its name; ``lines`` is how many lines of the file it spans.

    For a conditional's part, ``next`` is the index of the part that follows it and ``end`` that of its ``#endif``; for
    an ``#else`` without an ``#if`` both are -1. ``macro`` keeps what a ``#define`` was understood as.
    """

    line: int
    name: str
    rest: str
    lines: int
    next: int = -1
    end: int = -1
    macro: object = None


@dataclass(slots=True)
class SourceFile:
    """A file's segments in order; ``guard`` is the macro that makes a second inclusion empty, if there is one."""

    path: str
    segments: list[Run | Directive]
    lines: int
    guard: str | None = None
    notices: tuple[Notice, ...] = field(default_factory=tuple)


def load(path: str) -> SourceFile:
    """A file's segments; read again only when the file has changed. Raises OSError where there is no such file."""
    status = Path(path).stat()
    return _load(path, status.st_mtime_ns, status.st_size)


@lru_cache(maxsize=8192)
def _load(path: str, _changed: int, _size: int) -> SourceFile:
    data = read_bytes(path)
    if isinstance(data, Notice):
        return SourceFile(path, [], 1, None, (data,))
    if not is_text(data):
        return SourceFile(path, [], 1, None, (not_text(path),))
    return cut(decode_bytes(data), path)


def cut(text: str, path: str) -> SourceFile:
    """A text's segments."""
    notices: list[Notice] = []
    open_strings: list[int] = []
    lines = _physical_lines(_without_comments(_join_lines(text), path, notices, open_strings))
    segments: list[Run | Directive] = []
    waiting: list[str] = []
    first = 1

    def end_run() -> None:
        if waiting:
            segments.extend(_run(first, waiting, open_strings))
            waiting.clear()

    for number, line in enumerate(lines, 1):
        stripped = line.lstrip(" \t\f\v")
        if not stripped.startswith(("#", "%:")):
            if not waiting:
                first = number
            waiting.append(line)
            continue
        end_run()
        found = _DIRECTIVE.fullmatch(line)
        if found is not None and (found[1] or not found[2]):
            spans = 1 + line.count(_JOINED)
            segments.append(Directive(number, found[1], found[2].replace(_JOINED, " ").strip(), spans))
        elif found is not None:
            segments.append(Directive(number, "?", found[2], 1))
    end_run()
    notices.extend(_link(segments, path))
    return SourceFile(path, segments, len(lines), _guard_of(segments), tuple(notices))


def _join_lines(text: str) -> str:
    """Lines that end in a backslash joined with the next, and as many empty lines after them.

    Outside a directive, where no token or comment runs across, it is enough to take the backslash away.
    """
    if "\\\n" not in text and not re.search(r"\\[ \t]+\n", text):
        return text
    joined: list[str] = []
    parts: list[str] = []
    lines = text.split("\n")
    for number, line in enumerate(lines, 1):
        plain = line.rstrip(" \t") if "\\" in line else line
        if plain.endswith("\\"):
            following = lines[number][:1] if number < len(lines) else ""
            if not parts and _ends_between_tokens(plain, following):
                joined.append(plain[:-1])
            else:
                parts.append(plain[:-1])
            continue
        if parts:
            joined.append("".join(parts) + line)
            joined.extend([""] * len(parts))
            parts.clear()
        else:
            joined.append(line)
    if parts:
        joined.append("".join(parts))
    return "\n".join(joined)


def _ends_between_tokens(line: str, following: str) -> bool:
    """Whether a continued line is surely no directive and no token, literal or comment goes on in the next line."""
    return (
        (line[-2:-1] in ("", " ", "\t", ",", ";", "{", "}", "(", ")") or following in ("", " ", "\t"))
        and not line.lstrip().startswith(("#", "%:"))
        and "//" not in line
        and "'" not in line
        and line.count('"') % 2 == 0
        and '\\"' not in line
    )


def _without_comments(text: str, path: str, notices: list[Notice], open_strings: list[int]) -> str:
    """Comments as blanks; one that a directive's line runs into keeps the directive together."""

    def blank(found: re.Match[str]) -> str:
        piece = found[0]
        if piece[0] in "\"'":
            if piece[0] == '"' and (len(piece) == 1 or piece[-1] != '"') and len(open_strings) < _OPEN_STRINGS:
                open_strings.append(text.count("\n", 0, found.start()) + 1)
            return piece
        if piece.startswith("/*") and (len(piece) < 4 or not piece.endswith("*/")):
            line = text.count("\n", 0, found.start()) + 1
            said = f"{path}, line {line}: the comment is not closed; what follows is not read."
            notices.append(Notice("unterminated", "warning", said, path, line))
        if "\n" not in piece:
            return " " * len(piece)
        start = text.rfind("\n", 0, found.start()) + 1
        if re.compile(r"[ \t\f\v]*(?:#|%:)").match(text, start):
            return " " + _JOINED * piece.count("\n") + " "
        last = len(piece) - piece.rfind("\n") - 1
        return "\n" * piece.count("\n") + " " * last

    if _JOINED in text:
        text = text.replace(_JOINED, " ")
    return _COMMENT.sub(blank, text) if "/" in text or '"' in text else text


def _physical_lines(text: str) -> list[str]:
    """The lines, blanks at their ends taken off, with the empty lines that joined comments stood for."""
    lines = [line.rstrip(" \t\f\v\r") for line in text.split("\n")]
    if lines and not lines[-1]:
        lines.pop()
    if _JOINED not in text:
        return lines
    spread: list[str] = []
    for line in lines:
        spread.append(line)
        spread.extend([""] * line.count(_JOINED))
    return spread


def _run(first: int, lines: list[str], open_strings: list[int]) -> Iterator[Run]:
    """A run without the empty lines around it."""
    start, count = 0, len(lines)
    while start < count and not lines[start].strip():
        start += 1
    while count > start and not lines[count - 1].strip():
        count -= 1
    if start < count:
        text = "\n".join(lines[start:count]) + "\n"
        words = frozenset(_WORDS.findall(text)) - {""}
        last = first + count
        open_string = next((line for line in open_strings if first + start <= line < last), 0)
        yield Run(first + start, text, count - start, words, open_string)


def _link(segments: list[Run | Directive], path: str) -> Iterator[Notice]:
    """Give each part of a conditional the index of the next part and of its end."""
    parts: list[list[int]] = []
    for index, segment in enumerate(segments):
        if not isinstance(segment, Directive):
            continue
        if segment.name in CONDITIONALS:
            parts.append([index])
        elif segment.name in ("elif", "elifdef", "elifndef", "else", "endif"):
            if not parts:
                said = f"{path}, line {segment.line}: #{segment.name} has no #if and was passed over."
                yield Notice("preprocessor", "warning", said, path, segment.line)
                continue
            parts[-1].append(index)
            if segment.name == "endif":
                _close(segments, parts.pop())
    if parts:
        line = segments[parts[0][0]].line
        many = f" (and {len(parts) - 1} inside it)" if len(parts) > 1 else ""
        said = f"{path}, line {line}: the conditional{many} is not closed by #endif; it ends with the file."
        yield Notice("unterminated", "warning", said, path, line)
    for open_parts in parts:
        _close(segments, [*open_parts, len(segments)])


def _close(segments: list[Run | Directive], indices: list[int]) -> None:
    for index, following in pairwise(indices):
        segment = segments[index]
        if isinstance(segment, Directive):
            segment.next, segment.end = following, indices[-1]


def _guard_of(segments: list[Run | Directive]) -> str | None:
    """The include guard's macro where the whole file stands in one ``#ifndef`` without ``#else``."""
    if not segments:
        return None
    first = segments[0]
    if not isinstance(first, Directive) or first.next != len(segments) - 1:
        return None
    if first.name == "ifndef":
        found = re.match(r"(\w+)\s*$", first.rest)
    elif first.name == "if":
        found = _GUARD.match(first.rest)
    else:
        return None
    return found[1] if found else None
