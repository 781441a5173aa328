"""Reading: from preprocessed units to parsed declarations, each parsed once for the whole run.

The reader holds what units share: carved pieces of headers, cleaned and parsed declarations, the original files. A
unit costs carving its text (only what no unit before had), the closure over the names its own code needs, and parsing
what is new in that closure.
"""

import hashlib
import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from pycparser import CParser, c_ast

from stepring.places import Notice, Position
from stepring.read.assembler import lift_assembler
from stepring.read.carve import Chunk, Piece, carve, spelled_file
from stepring.read.dialect import clean
from stepring.read.infer import Guess, Votes, infer
from stepring.read.kept import Kept
from stepring.read.needed import Ownership, Scope, file_scope, needed_chunks, own_chunks
from stepring.read.origin import OriginFinder
from stepring.read.parse import Job, Parsed, parse_all, place_of_offset
from stepring.read.rewrite import Cleaned
from stepring.read.source import SourceFiles
from stepring.read.types import Declaration, FunctionPlace, Macro, Preprocessed, ReadUnit
from stepring.read.words import SPECIAL

_PIECE_BYTES = 48_000_000
_TREE_BYTES = 12_000_000
"""Bytes of text whose pieces, and whose trees (some fifty times as large), are held for units to come."""
_ALWAYS_TYPES = frozenset({"__builtin_va_list"})


@dataclass(slots=True, eq=False)
class _Done:
    """A chunk as it was read under one reading of its names."""

    cleaned: Cleaned
    parsed: Parsed
    declaration: Declaration | None
    inferred: frozenset[str] = frozenset()


@dataclass(slots=True, eq=False)
class _Context:
    """What decides how a chunk of this unit reads."""

    scope: Scope
    types: frozenset[str]
    int_bytes: int
    own: set[Chunk]
    guess: Guess = field(default_factory=Guess)

    def declared_words(self, chunk: Chunk) -> frozenset[str]:
        """Dialect words that this unit declares as names of its own."""
        return frozenset(word for word in chunk.uses & SPECIAL if word in self.scope.declares)

    def key(self, chunk: Chunk) -> tuple[object, ...]:
        uses = chunk.uses
        return (
            chunk.text,
            chunk.file,
            chunk.line,
            chunk.column,
            chunk in self.own,
            uses & self.types,
            self.declared_words(chunk),
            self.int_bytes,
            uses & self.guess.types,
            uses & self.guess.words(),
        )


class Macros(Mapping[str, Macro]):
    """A unit's macros as they stand at its end, merged from its pieces when first asked for."""

    def __init__(self, pieces: Iterable[Piece]) -> None:
        self._layers = [piece.changes for piece in pieces if piece.changes]
        self._merged: dict[str, Macro] | None = None

    def _table(self) -> dict[str, Macro]:
        if self._merged is None:
            table: dict[str, Macro] = {}
            for layer in self._layers:
                for name, changes in layer.items():
                    macro = changes[-1].macro
                    if macro is None:
                        table.pop(name, None)
                    else:
                        table[name] = macro
            self._merged = table
        return self._merged

    def __getitem__(self, name: str) -> Macro:
        return self._table()[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self._table())

    def __len__(self) -> int:
        return len(self._table())


class Reader:
    """Reads the units of one run. ``root`` is the inspected folder: what lies in it is the project's own.

    Not safe for use by several threads; each process of a parallel run has its own.
    """

    def __init__(self, root: Path) -> None:
        self.root = root
        self._ownership = Ownership(root)
        self._pieces: Kept[str, Piece] = Kept(_PIECE_BYTES)
        self._done: Kept[tuple[object, ...], _Done] = Kept(_TREE_BYTES)
        self._sources = SourceFiles()
        self._parser = CParser()

    def __getstate__(self) -> dict[str, object]:
        return {"root": self.root}

    def __setstate__(self, state: dict[str, Path]) -> None:
        self.__init__(state["root"])  # type: ignore[misc]

    def read(self, pre: Preprocessed) -> ReadUnit:
        """Read one preprocessed unit. Bad declarations become notices; nothing is raised for bad C."""
        source = str(pre.unit.source)
        pieces = carve(lift_assembler(pre.text), source, self._pieces)
        scope = file_scope(pieces)
        own = own_chunks(pieces, self._ownership, pre.unit.kind == "preprocessed")
        chunks = needed_chunks(pieces, scope, own)
        context = _Context(scope, scope.typedefs | _ALWAYS_TYPES, _int_bytes(pre.predefined), own)
        mine = [chunk for chunk in chunks if chunk in own]
        if not pre.complete:
            context.guess = self._guess(mine, context)
        done = self._read_chunks(chunks, context)
        failed = [chunk for chunk in chunks if done[chunk].parsed.error]
        if failed:
            context.guess = self._guess(dict.fromkeys((*mine, *failed)), context)
            words = context.guess.words()
            done.update(self._read_chunks([chunk for chunk in mine if chunk.uses & words], context))
            done.update(self._read_chunks(failed, context, force=True))
            together = context.guess
            for chunk in [one for one in failed if done[one].parsed.error]:
                # what the others made of a name may be wrong here
                context.guess = self._guess([chunk], context)
                done.update(self._read_chunks([chunk], context, force=True))
            context.guess = together
        return self._unit(pre, pieces, chunks, own, done, context)

    def _guess(self, chunks: Iterable[Chunk], context: _Context) -> Guess:
        votes = Votes()
        for chunk in chunks:
            if chunk.kind != "pragma":
                text = clean(chunk.text, context.declared_words(chunk), context.int_bytes).text
                infer(text, context.types, context.scope.declares, votes)
        return votes.decide()

    def _read_chunks(self, chunks: Iterable[Chunk], context: _Context, force: bool = False) -> dict[Chunk, _Done]:
        answers: dict[Chunk, _Done] = {}
        jobs: list[Job] = []
        keys: list[tuple[object, ...]] = []
        for chunk in chunks:
            key = (*context.key(chunk), force)
            known = self._done.get(key)
            if known is not None:
                answers[chunk] = known
                continue
            declared = context.declared_words(chunk)
            if chunk.kind == "pragma":
                cleaned = Cleaned(chunk.text)
            else:
                types = chunk.uses & (context.types | context.guess.types)
                cleaned = clean(chunk.text, declared, context.int_bytes, context.guess, force, types)
            jobs.append(Job(chunk, cleaned, chunk.uses & (context.types | context.guess.types)))
            keys.append(key)
        for job, key, parsed in zip(jobs, keys, parse_all(jobs, self._parser), strict=True):
            declaration = None if parsed.error else _declaration(job, parsed, job.chunk in context.own)
            done = _Done(job.cleaned, parsed, declaration, job.chunk.uses & context.guess.types)
            self._done.put(key, done, len(job.chunk.text))
            answers[job.chunk] = done
        return answers

    def _unit(
        self,
        pre: Preprocessed,
        pieces: list[Piece],
        chunks: list[Chunk],
        own: set[Chunk],
        done: dict[Chunk, _Done],
        context: _Context,
    ) -> ReadUnit:
        aliases = {spelled_file(chunk.file): chunk.file for chunk in chunks if spelled_file(chunk.file) != chunk.file}
        find = OriginFinder(pieces, [(chunk, done[chunk].cleaned) for chunk in chunks], self._sources, aliases)
        declarations = tuple(one for chunk in chunks if (one := done[chunk].declaration) is not None and one.nodes)
        notices = [*pre.notices, *(notice for piece in pieces for notice in piece.notices)]
        functions: dict[tuple[str, int, str], FunctionPlace] = {}
        falls: set[tuple[str, int]] = set()
        inferred: set[str] = set()
        for chunk in chunks:
            here = done[chunk]
            inferred |= here.inferred
            if chunk.kind == "function" and chunk in own:
                name = next(iter(_node_names(here.parsed.nodes) or chunk.names), "")
                line = _name_line(chunk, name)
                place = FunctionPlace(name, chunk.file, line, not here.parsed.error)
                functions.setdefault((place.file, place.line, place.name), place)
                if not here.parsed.error and not chunk.uses.isdisjoint(("case", "default")):
                    falls |= self._sources.fall_marks(chunk.file)
                    falls.update(_fall_lines(chunk, here.cleaned))
            if here.parsed.error:
                notices.append(_skipped(chunk, here, find, chunk in own))
        return ReadUnit(
            unit=pre.unit,
            declarations=declarations,
            macros=Macros(pieces),
            predefined=pre.predefined,
            functions=tuple(functions.values()),
            inferred_types=tuple(sorted(inferred)),
            origin=find,
            marked_falls=frozenset(falls),
            source=self._sources.get,
            notices=tuple(notices),
        )


def _declaration(job: Job, parsed: Parsed, own: bool) -> Declaration:
    chunk = job.chunk
    digest = hashlib.blake2b(chunk.text.encode("utf-8", "replace"), digest_size=8).hexdigest()
    names = tuple(dict.fromkeys((*_node_names(parsed.nodes), *chunk.tags)))
    return Declaration(
        key=f"{chunk.file}:{chunk.line}:{chunk.column}:{digest}",
        kind="function" if chunk.kind == "function" else "other",
        names=names,
        own=own,
        start=Position(spelled_file(chunk.file), chunk.line, chunk.column),
        nodes=parsed.nodes,
        typeofs=parsed.typeofs,
        attributes=job.cleaned.attributes,
    )


def _node_names(nodes: Iterable[Any]) -> list[str]:
    """The objects, functions and types that top-level nodes declare."""
    names: list[str] = []
    for node in nodes:
        name = node.decl.name if isinstance(node, c_ast.FuncDef) else getattr(node, "name", None)
        if isinstance(name, str):
            names.append(name)
    return names


def _int_bytes(predefined: Mapping[str, str]) -> int:
    text = predefined.get("__SIZEOF_INT__", "").strip()
    return int(text) if text.isdigit() else 4


def _name_line(chunk: Chunk, name: str) -> int:
    """The line of a function's name, as a person sees it."""
    match = re.search(rf"\b{re.escape(name)}\b", chunk.text) if name else None
    if match is None:
        return chunk.line
    return place_of_offset(chunk, chunk.text, match.start())[1]


def _fall_lines(chunk: Chunk, cleaned: Cleaned) -> Iterator[tuple[str, int]]:
    """Original places of fall-through attributes: the line numbers that the physical lines carry."""
    if not cleaned.falls:
        return
    starts = [0]
    for text in cleaned.text.split("\n"):
        starts.append(starts[-1] + len(text) + 1)
    for number in cleaned.falls:
        file, line, _ = place_of_offset(chunk, cleaned.text, starts[number])
        yield (chunk.file if file == spelled_file(chunk.file) else file), line


def _skipped(chunk: Chunk, done: _Done, find: OriginFinder, own: bool) -> Notice:
    """The notice for a declaration that could not be parsed, at the place where parsing stopped."""
    error = done.parsed
    name = next(iter((*chunk.names, *chunk.typedefs, *chunk.tags)), "a declaration without a name")
    if error.line:
        at = find(Position(error.file or spelled_file(chunk.file), error.line, error.column))
        file, line, column = at.file, at.line, at.column
    else:
        file, line, column = chunk.file, chunk.line, chunk.column
    what = "The function" if chunk.kind == "function" else "The declaration of"
    text = f"{what} {name} could not be read and was left out: {error.error}."
    return Notice("skipped-declaration", "warning" if own else "note", text, file, line, column or None)
