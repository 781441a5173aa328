"""The way back: from a place in parsed text to the place and spelling in the file that a person wrote.

Three steps, each exact where its input allows. From parsed text to preprocessed text by the shifts that dialect
rewriting recorded. From a preprocessed line to the lines of the source it came from: both are cut into tokens, the
source's macros are expanded again with every token remembering its origin, and the two sequences are laid on each
other. Where they differ (a macro the table does not hold as it was then), the longest common runs still match, and a
token between them leads to the nearest one before it.

Nothing is read or expanded until somebody asks, and nothing here ever fails: without the source, the preprocessed text
stands in for it.
"""

from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass, field
from difflib import SequenceMatcher
from itertools import pairwise

from stepring.places import Origin, Position
from stepring.read.carve import Change, Chunk, Piece, spelled_file
from stepring.read.expand import ANY, ANY_STRING, NeedsMore, Place, Token, expand
from stepring.read.rewrite import Cleaned
from stepring.read.source import TOKEN, SourceFile, SourceFiles
from stepring.read.types import Macro

_MAX_MORE_LINES = 400


@dataclass(slots=True)
class _Line:
    """A physical line of a chunk: its place and where it starts in the plain text and in the cleaned text."""

    file: str
    line: int
    start: int
    text: str
    cleaned_start: int = 0
    cleaned_text: str = ""
    column: int = 1


@dataclass(slots=True)
class _Aligned:
    """A chunk laid on its source: for each token of the plain text its start and where it stems from (or None)."""

    lines: list[_Line]
    starts: list[int]
    texts: list[str]
    files: list[str]
    places: list[Place | None]
    by_place: dict[tuple[str, int], list[_Line]] = field(default_factory=dict)


class MacroHistory:
    """Every definition of a unit's macros in the order of its text, to know which one held at a place."""

    def __init__(self, pieces: Sequence[Piece]) -> None:
        self._layers = [piece.changes for piece in pieces]
        self._known: dict[str, list[tuple[int, Change]]] = {}

    def at(self, name: str, layer: int, offset: int) -> Macro | None:
        """The macro of a name as it was at an offset of the piece ``layer``."""
        changes = self._known.get(name)
        if changes is None:
            changes = [
                (index, change) for index, table in enumerate(self._layers) if name in table for change in table[name]
            ]
            self._known[name] = changes
        found: Macro | None = None
        for index, change in changes:
            if index > layer or (index == layer and change.offset >= offset):
                break
            found = change.macro
        return found


class OriginFinder:
    """The way back for one unit. Call it with a ``Position``; it gives an ``Origin`` and never raises."""

    def __init__(
        self,
        pieces: Sequence[Piece],
        chunks: Sequence[tuple[Chunk, Cleaned]],
        sources: SourceFiles,
        aliases: dict[str, str],
    ) -> None:
        self._chunks = chunks
        self._sources = sources
        self._aliases = aliases
        self._pieces = pieces
        self._history: MacroHistory | None = None
        self._layer: dict[Chunk, int] = {}
        self._by_file: dict[str, list[tuple[int, int, int, int]]] | None = None
        self._aligned: dict[int, _Aligned] = {}

    def __call__(self, position: Position) -> Origin:
        """The original place of a token in parsed text; the line's first character where it cannot be refined."""
        return self._find(position, plain=False)

    def plain(self, position: Position) -> Origin:
        """The same for a place in the preprocessed text before dialect rewriting."""
        return self._find(position, plain=True)

    def _find(self, position: Position, plain: bool) -> Origin:
        file = self._aliases.get(position.file, position.file)
        index = self._chunk_at(position.file, position.line, position.column)
        if index is None:
            return self._line_start(file, position.line)
        aligned = self._aligned.get(index)
        if aligned is None:
            aligned = self._aligned[index] = self._align(index)
        offset = self._offset(aligned, position, self._chunks[index][1], plain)
        if offset is None:
            return self._line_start(file, position.line)
        token = bisect_right(aligned.starts, offset) - 1
        if token < 0:
            return self._line_start(file, position.line)
        return self._place_of(aligned, token, position, file)

    def _place_of(self, aligned: _Aligned, token: int, position: Position, file: str) -> Origin:
        name = self._aliases.get(aligned.files[token], aligned.files[token])
        source = self._sources.get(name)
        if source is None:
            line = next((one for one in reversed(aligned.lines) if one.start <= aligned.starts[token]), None)
            column = aligned.starts[token] - line.start + line.column if line is not None else 1
            number = line.line if line is not None else position.line
            text = aligned.texts[token]
            return Origin(name, number, column, column + len(text), text)
        back = token
        while back >= 0 and aligned.places[back] is None and aligned.files[back] == aligned.files[token]:
            back -= 1
        place = aligned.places[back] if back >= 0 else None
        if place is None or (back != token and abs(place[0] - position.line) > 3):
            return self._line_start(file, position.line)
        line_number, column, end = place
        text = source.content[line_number - 1] if line_number <= len(source.content) else ""
        return Origin(name, line_number, column, end, text[column - 1 : end - 1])

    def _line_start(self, file: str, line: int) -> Origin:
        source = self._sources.get(file)
        if source is None or not 1 <= line <= len(source.content):
            return Origin(file, max(1, line), 1, 1, "")
        at = source.first_on(line)
        if at < len(source.lines) and source.lines[at] == line:
            column = source.columns[at]
            text = source.texts[at]
            return Origin(file, line, column, column + len(text), text)
        return Origin(file, line, 1, 1, "")

    # -- chunks --------------------------------------------------------------------------------------------------

    def _chunk_at(self, file: str, line: int, column: int) -> int | None:
        if self._by_file is None:
            self._by_file = {}
            for index, (chunk, _) in enumerate(self._chunks):
                home = spelled_file(chunk.file)
                spans = {home: (chunk.line, chunk.end_line if chunk.end_line >= chunk.line else chunk.line)}
                for one in _physical_lines(chunk, chunk.text) if "\n#line " in chunk.text else ():
                    low, high = spans.get(one.file, (one.line, one.line))
                    spans[one.file] = (min(low, one.line), max(high, one.line))
                for name, (low, high) in spans.items():
                    self._by_file.setdefault(name, []).append(
                        (low, high, chunk.column if low == chunk.line else 0, index)
                    )
            for entries in self._by_file.values():
                entries.sort()
        entries = self._by_file.get(file, [])
        best: int | None = None
        at = bisect_right(entries, (line, 1 << 60, 0, 0))
        for low, high, start, index in reversed(entries[max(0, at - 64) : at]):
            if low <= line <= high and (line > low or not column or start <= column):
                best = index
                break
        return best

    def _offset(self, aligned: _Aligned, position: Position, cleaned: Cleaned, plain: bool) -> int | None:
        rows = aligned.by_place.get((position.file, position.line))
        if not rows:
            return None
        row = rows[0]
        for other in rows[1:]:
            # parts of one line that other lines part keep their columns apart
            text = other.text if plain else other.cleaned_text
            if other.column + len(text) - len(text.lstrip()) <= position.column:
                row = other
        if not position.column:
            return row.start + len(row.text) - len(row.text.lstrip())
        within = position.column - row.column
        if plain:
            return row.start + max(0, within)
        return cleaned.offset_before(row.cleaned_start + max(0, min(within, len(row.cleaned_text))))

    # -- alignment -----------------------------------------------------------------------------------------------

    def _align(self, index: int) -> _Aligned:
        chunk, cleaned = self._chunks[index]
        lines = _physical_lines(chunk, chunk.text)
        for row, other in zip(lines, _physical_lines(chunk, cleaned.text), strict=False):
            row.cleaned_start, row.cleaned_text = other.start, other.text
        aligned = _Aligned(lines, [], [], [], [])
        owners: list[int] = []
        for number, row in enumerate(lines):
            aligned.by_place.setdefault((row.file, row.line), []).append(row)
            for match in TOKEN.finditer(row.text):
                text = match.group()
                if not text.isspace():
                    aligned.starts.append(row.start + match.start())
                    aligned.texts.append(text)
                    aligned.files.append(row.file)
                    owners.append(number)
        aligned.places = [None] * len(aligned.texts)
        if self._history is None:
            self._history = MacroHistory(self._pieces)
            self._layer = {one: layer for layer, piece in enumerate(self._pieces) for one in piece.chunks}
        for first, last, file, low, after in _groups(lines, owners, chunk.end_line):
            source = self._sources.get(self._aliases.get(file, file))
            if source is not None:
                self._align_group(aligned, first, last, source, chunk, low, after)
        return aligned

    def _align_group(
        self, aligned: _Aligned, first: int, last: int, source: SourceFile, chunk: Chunk, low: int, after: int
    ) -> None:
        """Lay the tokens ``first`` to ``last`` (exclusive) on the source from line ``low`` to before ``after``."""
        wanted = aligned.texts[first:last]
        at = source.first_on(low)
        if low == chunk.line and first == 0:
            # other declarations may stand before on the same line; their tokens come first there
            at += self._skip_before(source, at, chunk, wanted)
        history, layer = self._history, self._layer.get(chunk, 0)
        here = chunk.piece_offset(aligned.starts[first])

        def lookup(name: str) -> Macro | None:
            return history.at(name, layer, here) if history is not None else None

        line = low
        best: list[Token] = []
        while line < after + _MAX_MORE_LINES:
            stop = source.first_on(line + 1)
            tokens = [
                Token(source.texts[i], (source.lines[i], source.columns[i], source.columns[i] + len(source.texts[i])))
                for i in range(at, stop)
            ]
            more = line + 1 < after
            try:
                best = _without_pragmas(expand(tokens, lookup))
            except NeedsMore:
                more = True
                if stop >= len(source.texts):
                    best = _without_pragmas(expand(tokens, lookup, complete=True))
                    more = False
            else:
                if _is_prefix(wanted, best):
                    for offset in range(len(wanted)):
                        aligned.places[first + offset] = best[offset].place
                    return
                if not _is_prefix([one.text for one in best], _as_tokens(wanted)):
                    more = False
            if not more:
                break
            line += 1
        self._match_runs(aligned, first, wanted, best)

    def _skip_before(self, source: SourceFile, at: int, chunk: Chunk, wanted: Sequence[str]) -> int:
        """How many tokens of the chunk's first source line belong to what stands before the chunk."""
        if chunk.column <= 1 or not wanted:
            return 0
        stop = source.first_on(chunk.line + 1)
        run = list(wanted[: min(4, len(wanted))])
        matches = [
            i - at for i in range(at, stop) if source.texts[i : i + len(run)] == run and source.lines[i] == chunk.line
        ]
        if not matches:
            return 0
        return min(matches, key=lambda skip: abs(source.columns[at + skip] - chunk.column))

    def _match_runs(self, aligned: _Aligned, first: int, wanted: Sequence[str], found: Sequence[Token]) -> None:
        if len(wanted) * len(found) > 4_000_000:
            return
        matcher = SequenceMatcher(None, [one.text for one in found], list(wanted), autojunk=False)
        for start, other, size in matcher.get_matching_blocks():
            for offset in range(size):
                aligned.places[first + other + offset] = found[start + offset].place


def _as_tokens(texts: Sequence[str]) -> list[Token]:
    return [Token(text, (0, 0, 0)) for text in texts]


def _is_prefix(texts: Sequence[str], tokens: Sequence[Token]) -> bool:
    """Whether the texts are what the tokens begin with."""
    if len(texts) > len(tokens):
        return False
    for text, token in zip(texts, tokens, strict=False):
        if text != token.text and not _alike(text, token.text):
            return False
    return True


def _alike(text: str, made: str) -> bool:
    if ANY in (text, made):
        return True
    if made == ANY_STRING:
        return text.endswith('"')
    return text == ANY_STRING and made.endswith('"')


def _without_pragmas(tokens: list[Token]) -> list[Token]:
    """Leave out ``_Pragma (...)``: the preprocessor makes lines of their own of it."""
    if not any(token.text in ("_Pragma", "__pragma") for token in tokens):
        return tokens
    kept: list[Token] = []
    index = 0
    while index < len(tokens):
        if tokens[index].text in ("_Pragma", "__pragma") and index + 1 < len(tokens) and tokens[index + 1].text == "(":
            depth = 0
            index += 1
            while index < len(tokens):
                depth += {"(": 1, ")": -1}.get(tokens[index].text, 0)
                index += 1
                if depth == 0:
                    break
        else:
            kept.append(tokens[index])
            index += 1
    return kept


def _physical_lines(chunk: Chunk, text: str) -> list[_Line]:
    """The physical lines of a chunk's text with their places; marker lines are none."""
    rows: list[_Line] = []
    file, line = spelled_file(chunk.file), chunk.line
    at = 0
    column = chunk.column
    for part in text.split("\n"):
        if part.startswith("#line "):
            number, _, name = part[6:].partition(" ")
            file, line = name.strip('"'), int(number)
        else:
            rows.append(_Line(file, line, at, part, column=column))
            line += 1
        at += len(part) + 1
        column = 1
    return [row for row in rows if row.text.strip() or row is rows[0]]


def _groups(lines: Sequence[_Line], owners: Sequence[int], end_line: int) -> list[tuple[int, int, str, int, int]]:
    """Cut a chunk's tokens into runs that can be aligned on their own.

    A cut lies between two physical lines of one file where every line before has a smaller number than every line
    after; a change of file cuts as well. Gives (first token, token after the last, file, first line, line after the
    last).
    """
    if not owners:
        return []
    count = len(lines)
    later: list[int] = [0] * (count + 1)
    later[count] = 1 << 60
    for index in range(count - 1, -1, -1):
        after = later[index + 1] if index + 1 < count and lines[index + 1].file == lines[index].file else 1 << 60
        later[index] = min(lines[index].line, after)
    cuts = [0]
    highest = lines[0].line
    for index in range(1, count):
        if lines[index].file != lines[index - 1].file or later[index] > highest:
            cuts.append(index)
            highest = lines[index].line
        highest = max(highest, lines[index].line)
    cuts.append(count)
    first_token: dict[int, int] = {}
    for token, owner in enumerate(owners):
        first_token.setdefault(owner, token)
    groups: list[tuple[int, int, str, int, int]] = []
    token = 0
    for start, stop in pairwise(cuts):
        begin = token
        while token < len(owners) and owners[token] < stop:
            token += 1
        low = min(lines[index].line for index in range(start, stop))
        same_file = stop < count and lines[stop].file == lines[start].file
        after = lines[stop].line if same_file else max(end_line, max(lines[i].line for i in range(start, stop))) + 1
        if token > begin:
            groups.append((begin, token, lines[start].file, low, after))
    return groups


def spelled_constant(find: OriginFinder, position: Position) -> str | None:
    """The identifier that stands at a place in the source (a macro's or an enumerator's name), or None."""
    spelling = find(position).spelling
    return spelling if spelling.isidentifier() else None
