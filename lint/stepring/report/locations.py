"""Places in a log: artifacts, physical locations with their snippets, logical locations.

A run lists each file and each named thing once; a result refers to them by index and repeats their identity, as SARIF
2.1.0 sections 3.4 and 3.33 ask. ``Register`` collects them while results are made.
"""

import base64
from dataclasses import dataclass, field
from typing import Any

import sarif_om as om

from stepring.places import Origin
from stepring.report.sources import Source, Sources
from stepring.report.text import clean, escape_message

CONTEXT_LINES = 2
LONGEST_CONTEXT = 2000


def message(text: str, **more: Any) -> Any:
    """A SARIF message with that plain text; an empty text, which the format forbids, says that there is none."""
    return om.Message(text=escape_message(text) or "No text is given.", **more)


@dataclass(slots=True, eq=False)
class Register:
    """What a run lists once: the files (in the order of ``files``) and the logical locations."""

    sources: Sources
    files: dict[str, Source] = field(default_factory=dict)
    numbers: dict[str, int] = field(default_factory=dict)
    logical: dict[tuple[str, str], Any] = field(default_factory=dict)

    def add_file(self, file: str) -> None:
        """Take a file into the artifacts; to be done for every file before any location is made."""
        source = self.sources.of(file)
        self.files[source.file] = source

    def freeze(self) -> None:
        """Put the files in the order of their URIs."""
        ordered = sorted(self.files.values(), key=lambda source: (source.base, source.uri, source.file))
        self.files = {source.file: source for source in ordered}
        self.numbers = {file: number for number, file in enumerate(self.files)}

    def artifact_location(self, file: str) -> Any:
        """Where a file is, with its index among the artifacts."""
        source = self.sources.of(file)
        return om.ArtifactLocation(uri=source.uri, uri_base_id=source.base, index=self.numbers[source.file])

    def artifacts(self) -> list[Any]:
        """The run's artifacts."""
        return [_artifact(source, index) for index, source in enumerate(self.files.values())]

    def function(self, name: str) -> Any:
        """The logical location of a function."""
        return self._logical(clean(name), "function", clean(name), None)

    def subject(self, name: str, kind: str) -> Any:
        """The logical location of a variable or member; ``struct hopper.state`` stands inside its type."""
        full = clean(name)
        head, dot, last = full.rpartition(".")
        if kind == "member" and dot and last and head.startswith(("struct ", "union ")):
            parent = self._logical(head, "type", head, None)
            return self._logical(full, kind, last, parent.index)
        return self._logical(full, kind, full, None)

    def _logical(self, full: str, kind: str, name: str, parent: int | None) -> Any:
        if (full, kind) not in self.logical:
            made = om.LogicalLocation(name=name, fully_qualified_name=full, kind=kind, index=len(self.logical))
            if parent is not None:
                made.parent_index = parent
            self.logical[full, kind] = made
        return self.logical[full, kind]

    def location(self, where: Origin, text: str = "", logical: list[Any] | None = None) -> Any:
        """A location with its region and context, and a message where ``text`` is not empty."""
        return om.Location(
            physical_location=self.physical(where),
            logical_locations=logical or None,
            message=message(text) if text else None,
        )

    def physical(self, where: Origin) -> Any:
        """The physical location; without a region where the file has no such line."""
        source = self.sources.of(where.file)
        region = _region(where, source)
        context = None if region is None else _context(region, source)
        return om.PhysicalLocation(
            artifact_location=self.artifact_location(where.file), region=region, context_region=context
        )


def _artifact(source: Source, index: int) -> Any:
    made = om.Artifact(location=om.ArtifactLocation(uri=source.uri, uri_base_id=source.base, index=index))
    made.roles = ["analysisTarget"]
    if source.data is not None:
        made.source_language = "c"
        made.encoding = "UTF-8" if source.is_utf8 else None
        made.length = len(source.data)
        made.hashes = {"sha-256": source.sha256}
    return made


def content(text: str) -> Any:
    """Source text as a snippet; text that is not clean UTF-8 as its bytes, with a rendering."""
    shown = clean(text)
    if shown == text:
        return om.ArtifactContent(text=text)
    rendered = om.MultiformatMessageString(text=escape_message(text))
    try:
        raw = text.encode("utf-8", "surrogateescape")
    except UnicodeEncodeError:  # a spelling that came from no file; of a file's text only bytes are undecodable
        return om.ArtifactContent(rendered=rendered)
    return om.ArtifactContent(binary=base64.b64encode(raw).decode("ascii"), rendered=rendered)


def columns_of(where: Origin, source: Source) -> tuple[int, int] | None:
    """The origin's columns inside its line as (start, end one past); None where only the line is known."""
    line = source.line(where.line)
    if where.column < 1:
        return None
    if line is None:
        return (where.column, where.end_column) if where.end_column > where.column else None
    start = min(where.column, len(line) + 1)
    end = min(where.end_column, len(line) + 1)
    return (start, end) if end > start else None


def _region(where: Origin, source: Source) -> Any:
    if where.line < 1 or (source.data is not None and source.line(where.line) is None):
        return None
    columns = columns_of(where, source)
    line = source.line(where.line)
    region = om.Region(start_line=where.line)
    if columns is not None:
        region.start_column, region.end_column = columns
    if line is None:
        region.snippet = content(where.spelling) if where.spelling else None
    elif columns is not None:
        region.snippet = content(line[columns[0] - 1 : columns[1] - 1])
    elif len(line) <= LONGEST_CONTEXT:
        region.snippet = content(line)
    return region


def _context(region: Any, source: Source) -> Any:
    """Some lines around a region, or some columns of a very long line; None where that is no more than the region."""
    if not source.lines:
        return None
    number = region.start_line
    first, last = max(1, number - CONTEXT_LINES), min(len(source.lines), number + CONTEXT_LINES)
    text = source.text(first, last)
    if len(text) > LONGEST_CONTEXT:
        return _context_in_line(region, source.lines[number - 1])
    whole_line = region.start_column is None or (
        region.start_column == 1 and region.end_column == len(source.lines[number - 1]) + 1
    )
    if first == last and whole_line:
        return None
    return om.Region(start_line=first, end_line=last, snippet=content(text))


def _context_in_line(region: Any, line: str) -> Any:
    if region.start_column is None or region.end_column - region.start_column > LONGEST_CONTEXT:
        return None
    start = max(1, region.start_column - LONGEST_CONTEXT // 20)
    end = min(len(line) + 1, region.end_column + LONGEST_CONTEXT // 20)
    if (start, end) == (region.start_column, region.end_column):
        return None
    return om.Region(
        start_line=region.start_line, start_column=start, end_column=end, snippet=content(line[start - 1 : end - 1])
    )
