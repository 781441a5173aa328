"""Where things stand, and what a stage has to say about its work.

Two kinds of place are kept apart. A ``Position`` is where a token stands in the text that was parsed (after
preprocessing and dialect rewriting); an ``Origin`` is where the person wrote it: the original file, line, column and
spelling. Only origins reach a report. A ``Notice`` is one clear sentence about the work itself (a file that could not
be read, a declaration that was skipped), never about the C being right or wrong.
"""

from dataclasses import dataclass
from typing import Literal


@dataclass(frozen=True, slots=True, order=True)
class Position:
    """A token's place in parsed text: absolute file of the line marker, line of that file, column in the parsed line.

    Lines and columns count from 1; column 0 means that only the line is known.
    """

    file: str
    line: int
    column: int = 0


@dataclass(frozen=True, slots=True, order=True)
class Origin:
    """A range in a source file as a person sees it in an editor.

    Lines and columns count from 1, in characters (a tab is one); ``end_column`` is one past the last character, as in
    SARIF 2.1.0 section 3.30. ``spelling`` is the source text of the range (the macro's name where a macro was used).
    """

    file: str
    line: int
    column: int
    end_column: int
    spelling: str = ""


NoticeLevel = Literal["error", "warning", "note"]


@dataclass(frozen=True, slots=True)
class Notice:
    """One sentence about the work: what could not be done, where, and what was done instead.

    ``kind`` is a stable word from ``NOTICE_KINDS``; ``level`` ``error`` means that the run could not do its work.
    """

    kind: str
    level: NoticeLevel
    text: str
    file: str | None = None
    line: int | None = None
    column: int | None = None


NOTICE_KINDS: dict[str, str] = {
    "unreadable-file": "A file could not be read.",
    "not-text": "A file is not text in an ASCII-compatible encoding.",
    "bad-database": "A compile database, or an entry of it, is malformed.",
    "missing-compiler": "A compiler that the compile database names is not on PATH.",
    "refused-compiler": "A compiler inside the inspected tree was refused.",
    "dropped-option": "A compiler option that loads, runs or writes something was dropped.",
    "preprocessor": "The preprocessor rejected a unit or part of it.",
    "missing-header": "An included header was not found.",
    "skipped-declaration": "A declaration could not be parsed and was left out.",
    "skipped-function": "A function was parsed but could not be given a meaning.",
    "unterminated": "A string, comment or brace is not closed.",
    "bad-settings": "The settings file has a mistake.",
    "unknown-rule": "A rule id is not known.",
    "unwritable": "An output could not be written.",
    "nothing-to-read": "No C was found.",
    "internal": "A stage failed on one input; the rest went on.",
}
