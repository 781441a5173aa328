"""Which declarations a unit needs: what its own functions and variables mention, and what those mention in turn.

A unit's text is mostly headers, and most of what they declare is never used. Starting from the definitions in the
project's own files, the closure over mentioned names (type names, tags, enumerators, functions, objects) keeps every
declaration of each name and leaves the rest unparsed. Names are matched without regard to name spaces, so the closure
may keep a declaration too many, never one too few.
"""

import os
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from stepring.read.carve import Chunk, Piece


@dataclass(frozen=True, slots=True, eq=False)
class Scope:
    """The file scope of a unit: every declared name with its chunks, and which of the names are types."""

    declares: dict[str, tuple[Chunk, ...]]
    typedefs: frozenset[str]


def file_scope(pieces: Iterable[Piece]) -> Scope:
    """Merge what the pieces declare; pieces are shared by units, so the work per unit is a few dictionary updates."""
    declares: dict[str, tuple[Chunk, ...]] = {}
    typedefs: set[str] = set()
    for piece in pieces:
        names = piece.declares
        if not names:
            continue
        again = declares.keys() & names.keys()
        kept = [(name, declares[name]) for name in again]
        declares.update(names)
        for name, before in kept:
            declares[name] = before + names[name]
        typedefs |= piece.typedefs
    return Scope(declares, frozenset(typedefs))


class Ownership:
    """Which files are the project's own: those under the inspected root."""

    def __init__(self, root: Path) -> None:
        self.prefix = os.path.normpath(root).rstrip("/") + "/"
        self.known: dict[str, bool] = {}

    def own(self, file: str) -> bool:
        answer = self.known.get(file)
        if answer is None:
            answer = self.known[file] = file.startswith(self.prefix)
        return answer


def own_chunks(pieces: Iterable[Piece], ownership: Ownership, foreign: bool) -> set[Chunk]:
    """The chunks in the project's own files.

    ``foreign`` is for preprocessed text that was made elsewhere: where no file lies under the root, every file is own
    that no line marker calls a system header and that does not look like one.
    """
    own = {chunk for piece in pieces for chunk in piece.chunks if ownership.own(chunk.file)}
    if own or not foreign:
        return own
    return {
        chunk
        for piece in pieces
        for chunk in piece.chunks
        if not chunk.system and not chunk.file.startswith(("<", "/usr/", "/opt/")) and "/include/" not in chunk.file
    }


def needed_chunks(pieces: Iterable[Piece], scope: Scope, own: set[Chunk]) -> list[Chunk]:
    """All chunks that the own definitions need, in source order, the definitions included."""
    wanted: set[Chunk] = set()
    stack: list[Chunk] = []
    for piece in pieces:
        for chunk in piece.chunks:
            if chunk.kind == "pragma":
                if chunk in own or "pack" in chunk.uses:
                    wanted.add(chunk)
            elif chunk in own and (chunk.kind == "function" or chunk.variable):
                wanted.add(chunk)
                stack.append(chunk)
    seen: set[str] = set()
    declares = scope.declares
    known = declares.keys()
    while stack:
        names = (stack.pop().uses & known) - seen
        seen |= names
        for name in names:
            for chunk in declares[name]:
                if chunk not in wanted:
                    wanted.add(chunk)
                    stack.append(chunk)
    return [chunk for piece in pieces for chunk in piece.chunks if chunk in wanted]
