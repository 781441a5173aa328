"""One line for each finding, in the form that editors and build logs read: ``file:line:column: message``.

The form is that of the GNU coding standards, "Formatting Error Messages": columns count from 1 in display columns with
tab stops every 8, a message starts in lower case and has no final period.
"""

from collections.abc import Collection
from pathlib import Path

from rich.cells import cell_len

from stepring.report.fingerprints import in_order
from stepring.report.sources import Source, Sources
from stepring.report.text import printable, shown_path
from stepring.report.types import Outcome
from stepring.report.words import VERDICT_WORDS, level_of
from stepring.rule import Obligation

_TAB_STOP = 8


def report_lines(outcome: Outcome, kinds: Collection[str], base: Path | None = None) -> list[str]:
    """The findings of the verdicts in ``kinds``, a line each, ordered by place."""
    sources = Sources(outcome.root)
    chosen = [one for one in in_order(outcome.obligations, sources) if one.kind in kinds]
    return [_line(one, sources.of(one.where.file), base) for one in chosen]


def _line(one: Obligation, source: Source, base: Path | None) -> str:
    column = display_column(source.line(one.where.line) or "", one.where.column)
    place = f"{shown_path(source.file, base)}:{one.where.line}:" + (f"{column}:" if column else "")
    # The verdict comes first: a sentence that begins with an identifier could not begin in lower case.
    verdict = level_of(one) or VERDICT_WORDS[one.kind] + (f" ({one.open_as})" if one.open_as else "")
    text = printable(" ".join(one.what.split())).rstrip(".")
    return f"{place} {verdict}, rule {one.rule}: {text}"


def display_column(line: str, column: int) -> int:
    """The display column (from 1) of the character at ``column`` (from 1) of a line; 0 stays 0, for unknown."""
    if column < 1:
        return 0
    width = 0
    for character in line[: column - 1]:
        width += _TAB_STOP - width % _TAB_STOP if character == "\t" else cell_len(character)
    return width + 1 + max(0, column - 1 - len(line))
