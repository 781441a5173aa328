"""Parsing: each needed declaration once for the whole run, with the parser's public interface only.

A declaration carved out of its unit is parsed behind two lines of our own: one that makes the type names it uses
known (``typedef int A, B;``: what they stand for does not matter to the grammar, ISO C N1570 section 6.7.8), and a
``#line`` that gives its nodes their coordinates. Many declarations go through the parser in one call, told apart by a
pragma before each; where such a call fails, they are parsed one by one, so that a bad declaration costs only itself.
"""

import gc
import re
import sys
from collections.abc import Collection, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any

from pycparser import CParser, c_ast
from pycparser.c_lexer import CLexer, Token

from stepring.read.carve import Chunk, spelled_file
from stepring.read.rewrite import Cleaned, Operand

try:
    from pycparser.c_parser import ParseError
except ImportError:  # older releases kept it elsewhere
    from pycparser.plyparser import ParseError

_MARK = "stepring_chunk"
_OPERAND = "__stepring_operand"
_BATCH_BYTES = 120_000
_MUCH_TEXT = 20_000
_DEPTH = 24_000


@dataclass(frozen=True, slots=True, eq=False)
class Job:
    """One declaration to parse: its chunk, its text in ISO C, and the type names it uses."""

    chunk: Chunk
    cleaned: Cleaned
    types: frozenset[str]


@dataclass(frozen=True, slots=True, eq=False)
class Parsed:
    """What parsing one job gave: nodes and typeof operands, or the reason why not, with its place where known."""

    nodes: tuple[Any, ...] = ()
    typeofs: dict[str, Any] = field(default_factory=dict)
    error: str = ""
    file: str = ""
    line: int = 0
    column: int = 0


def parse_all(jobs: Sequence[Job], parser: CParser | None = None) -> list[Parsed]:
    """Parse jobs, many in one call of the parser; one answer per job, in order.

    ``parser`` may be used again and again; it starts afresh with every text.
    """
    parser = parser or CParser()
    answers: list[Parsed] = []
    if not jobs:
        return answers
    with _deep_recursion(), _collector_at_rest(sum(len(job.cleaned.text) for job in jobs)):
        for batch in _batches(jobs):
            done = _parse_together(batch, parser) if len(batch) > 1 else None
            answers.extend(done if done is not None else [parse_one(job) for job in batch])
        parser.parse("")  # lets go of the last text's tokens
    return answers


def parse_one(job: Job) -> Parsed:
    """Parse one job on its own."""
    parser = CParser(lexer=_WatchedLexer)
    with _deep_recursion():
        text = _prefix(job.types, job.cleaned.operands) + f"#pragma {_MARK} 0\n" + _body(job)
        try:
            tree = parser.parse(text, spelled_file(job.chunk.file))
        except ParseError as error:
            return _failure(str(error), job.chunk, parser.clex)
        except RecursionError:
            return Parsed(error="it is nested too deeply", file=job.chunk.file, line=job.chunk.line)
        except (AssertionError, AttributeError, ValueError, TypeError, IndexError, KeyError) as error:
            # the parser's own slips on text that is no C
            return Parsed(error=str(error) or "it is no C", file=job.chunk.file, line=job.chunk.line)
        return _groups(tree.ext, [job])[0]


def _batches(jobs: Sequence[Job]) -> Iterator[Sequence[Job]]:
    start = size = 0
    for index, job in enumerate(jobs):
        size += len(job.cleaned.text)
        if size > _BATCH_BYTES:
            yield jobs[start : index + 1]
            start, size = index + 1, 0
    if start < len(jobs):
        yield jobs[start:]


def _parse_together(batch: Sequence[Job], parser: CParser) -> list[Parsed] | None:
    types: set[str] = set()
    operands: list[Operand] = []
    for job in batch:
        types |= job.types
        operands.extend(job.cleaned.operands)
    parts = [_prefix(types, operands)]
    for number, job in enumerate(batch):
        parts.append(f"#pragma {_MARK} {number}\n")
        parts.append(_body(job))
    try:
        tree = parser.parse("".join(parts), "")
    except (ParseError, RecursionError, AssertionError, AttributeError, ValueError, TypeError, IndexError, KeyError):
        return None
    return _groups(tree.ext, batch)


def _groups(nodes: Sequence[Any], batch: Sequence[Job]) -> list[Parsed]:
    """Tell the answers apart by the pragmas; what stands before the first is our own prefix."""
    groups: list[list[Any]] = [[] for _ in batch]
    current: list[Any] = []
    for node in nodes:
        if isinstance(node, c_ast.Pragma) and isinstance(node.string, str) and node.string.startswith(_MARK):
            current = groups[int(node.string[len(_MARK) :])]
        else:
            current.append(node)
    return [_split_answer(group, job) for group, job in zip(groups, batch, strict=True)]


def _prefix(types: Collection[str], operands: Collection[Operand]) -> str:
    names = sorted({*types, *(operand.name for operand in operands)})
    return f"typedef int {', '.join(names)};\n" if names else ""


def _body(job: Job) -> str:
    chunk, cleaned = job.chunk, job.cleaned
    parts = []
    for operand in cleaned.operands:
        file, line, column = place_of_offset(chunk, cleaned.text, operand.offset)
        place = f'#line {line} "{spelled_file(file)}"'
        parts.append(f"int {_OPERAND} = sizeof(\n{place}\n{' ' * (column - 1)}{operand.text}\n);\n")
    parts.append(f'#line {chunk.line} "{spelled_file(chunk.file)}"\n{" " * (chunk.column - 1)}{cleaned.text}\n')
    return "".join(parts)


_LINE = re.compile(r'#line (\d+) "([^"\n]*)"\n')


def place_of_offset(chunk: Chunk, text: str, offset: int) -> tuple[str, int, int]:
    """File, line and column of an offset in a chunk's (cleaned or plain) text."""
    file, line, start = chunk.file, chunk.line, 0
    if "#line" in text:
        for match in _LINE.finditer(text, 0, offset + 1):
            if match.end() <= offset:
                file, line, start = match[2], int(match[1]), match.end()
    line += text.count("\n", start, offset)
    last = text.rfind("\n", 0, offset)
    column = offset - last if last >= 0 else chunk.column + offset
    return file, line, column


def _split_answer(nodes: Sequence[Any], job: Job) -> Parsed:
    kept: list[Any] = []
    values: list[Any] = []
    for node in nodes:
        if isinstance(node, c_ast.Decl) and node.name == _OPERAND:
            values.append(node.init.expr)
        else:
            kept.append(node)
    names = [operand.name for operand in job.cleaned.operands]
    return Parsed(tuple(kept), dict(zip(names, values, strict=False)))


def _failure(message: str, chunk: Chunk, lexer: Any) -> Parsed:
    match = re.match(r"(.*?):(\d+)(?::(\d+))?: (.*)\Z", message, re.DOTALL)
    if match is None:
        reason = message.rsplit(": ", 1)[-1]
        last = lexer.last
        if last is None:
            return Parsed(error=reason, file=chunk.file, line=chunk.line)
        return Parsed(error=f"{reason} near {last.value!r}", file=last.filename, line=last.lineno, column=last.column)
    reason = match[4]
    if reason.startswith("before: "):
        reason = f"the parser stopped before {reason[8:]!r}"
    return Parsed(error=reason, file=match[1], line=int(match[2]), column=int(match[3] or 0))


class _WatchedLexer(CLexer):  # type: ignore[misc]
    """The parser's lexer, which also knows the last token it gave: some of the parser's messages have no place."""

    last: Token | None = None

    def token(self) -> Token | None:
        token = super().token()
        if token is not None:
            self.last = token
        return token


@contextmanager
def _collector_at_rest(size: int) -> Iterator[None]:
    """No garbage collection while parsing: trees hold no cycles, and walking the growing trees doubles the time.

    After much text the trees are moved out of the collector's sight for good; they go by reference counts.
    """
    was_on = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if was_on:
            if size > _MUCH_TEXT:
                gc.freeze()
            gc.enable()


@contextmanager
def _deep_recursion() -> Iterator[None]:
    """A deeper limit while parsing: the parser descends a dozen calls for each level of nesting."""
    before = sys.getrecursionlimit()
    if before < _DEPTH:
        sys.setrecursionlimit(_DEPTH)
    try:
        yield
    finally:
        sys.setrecursionlimit(before)
