"""The inspected files as a report sees them: their URI, their lines, their hash.

Reported locations are checked against the file's own text, so that a log never names a line or column that the file
does not have. Columns count characters (SARIF 2.1.0 section 3.14.27, ``unicodeCodePoints``); a byte that is not UTF-8
counts as one.
"""

import hashlib
import os
from dataclasses import dataclass, field
from pathlib import Path
from urllib.parse import quote

ROOT_BASE = "SRCROOT"
OUTSIDE_BASE = "FILESYSTEM"
CHECKOUT_BASE = "REPOROOT"
BASES = {
    ROOT_BASE: "The root folder of the inspected tree.",
    CHECKOUT_BASE: "The top folder of the checkout that the inspected tree is a part of.",
    OUTSIDE_BASE: "The root of the file system, for files outside the inspected tree.",
}

_BYTE_ORDER_MARK = "\ufeff"


@dataclass(frozen=True, slots=True, eq=False)
class Source:
    """A file that a report names.

    ``uri`` is relative to the base that ``base`` names. ``lines`` are without line ends, undecodable bytes as lone
    surrogates; ``ends`` are the line ends. ``data`` is None where the file could not be read. ``is_utf8`` says whether
    all of it decodes.
    """

    file: str
    uri: str
    base: str
    data: bytes | None
    lines: tuple[str, ...]
    ends: tuple[str, ...]
    is_utf8: bool

    @property
    def sha256(self) -> str | None:
        """The hash of the bytes, as hexadecimal digits."""
        return None if self.data is None else hashlib.sha256(self.data).hexdigest()

    def line(self, number: int) -> str | None:
        """The text of a line (from 1) without its end; None if the file has no such line or could not be read."""
        return self.lines[number - 1] if 1 <= number <= len(self.lines) else None

    def text(self, first: int, last: int) -> str:
        """The lines from ``first`` to ``last`` with the ends between them, but without the last one's end."""
        chosen = slice(first - 1, last)
        parts = [line + end for line, end in zip(self.lines[chosen], self.ends[chosen], strict=True)]
        return "".join(parts)[: -len(self.ends[last - 1]) or None]


@dataclass(slots=True, eq=False)
class Sources:
    """The files of one report, each read once; ``root`` is what URIs are relative to."""

    root: Path
    known: dict[str, Source] = field(default_factory=dict)

    def of(self, file: str) -> Source:
        """The source of that name (absolute, or relative to the root)."""
        path = os.path.normpath(os.path.join(self.root, file))  # noqa: PTH118 (resolved by name alone)
        if path not in self.known:
            self.known[path] = _read(self.root, path)
        return self.known[path]


def uri_of(root: Path, path: str) -> tuple[str, str]:
    """A file's URI reference and the base it is relative to: RFC 3986, the bytes of the name percent-encoded."""
    root_bytes, path_bytes = _name_bytes(os.path.normpath(root)), _name_bytes(path)
    inside = root_bytes.rstrip(b"/") + b"/"
    if path_bytes.startswith(inside) and len(path_bytes) > len(inside):
        return quote(path_bytes[len(inside) :], safe="/"), ROOT_BASE
    return quote(path_bytes.lstrip(b"/"), safe="/") or ".", OUTSIDE_BASE


def _name_bytes(name: str | os.PathLike[str]) -> bytes:
    """A file name's bytes; characters that no file system can give (other lone surrogates) become a question mark."""
    text = os.fspath(name)
    try:
        return text.encode("utf-8", "surrogateescape")
    except UnicodeEncodeError:
        return text.encode("utf-8", "replace")


def _read(root: Path, path: str) -> Source:
    uri, base = uri_of(root, path)
    try:
        data = Path(path).read_bytes()
    except (OSError, ValueError):  # ValueError: a name with a null character, or one that cannot be encoded
        return Source(path, uri, base, None, (), (), True)
    text = data.decode("utf-8", "surrogateescape").removeprefix(_BYTE_ORDER_MARK)
    pieces = text.split("\n")
    ends = ["\n"] * (len(pieces) - 1) + [""]
    if not pieces[-1]:
        pieces.pop()
        ends.pop()
    lines = tuple(piece.removesuffix("\r") if end else piece for piece, end in zip(pieces, ends, strict=True))
    full_ends = tuple(piece[len(line) :] + end for piece, line, end in zip(pieces, lines, ends, strict=True))
    return Source(path, uri, base, data, lines, full_ends, _decodes(data))


def _decodes(data: bytes) -> bool:
    try:
        data.decode("utf-8")
    except UnicodeDecodeError:
        return False
    return True
