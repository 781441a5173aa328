"""A unit on its way through the built-in preprocessor: what is known, which files are open, what is put out."""

from dataclasses import dataclass, field

from stepring.gather.types import Unit
from stepring.places import Notice, NoticeLevel
from stepring.read.macros import Engine, Table
from stepring.read.markers import marker
from stepring.read.segments import SourceFile

_NOTICE_LIMIT = 200
# More empty lines than this are told by a marker.
_GAP = 8


@dataclass(slots=True)
class Frame:
    """A file being read: where in it, and where it was found among the include folders (-1: beside the includer)."""

    file: SourceFile
    shown: str
    system: bool
    found_at: int
    index: int = 0
    line: int = 1
    offset: int = 0
    carried: str = ""
    carried_line: int = 0


@dataclass(slots=True)
class State:
    """A unit being preprocessed."""

    unit: Unit
    engine: Engine
    table: Table
    folders: tuple[str, ...]
    deadline: float
    out: list[str] = field(default_factory=list)
    size: int = 0
    frames: list[Frame] = field(default_factory=list)
    once: set[str] = field(default_factory=set)
    includes: int = 0
    complete: bool = True
    notices: list[Notice] = field(default_factory=list)
    said: set[tuple[str, str]] = field(default_factory=set)
    plain: dict[str, tuple[str, bool, int]] = field(default_factory=dict)
    not_found: set[str] = field(default_factory=set)
    found: dict[tuple[str, str | None, int], tuple[str, int] | None] = field(default_factory=dict)

    def say(self, kind: str, level: NoticeLevel, text: str, file: str | None = None, line: int | None = None) -> None:
        """Add a notice, once."""
        if (kind, text) in self.said or len(self.notices) >= _NOTICE_LIMIT:
            return
        self.said.add((kind, text))
        self.notices.append(Notice(kind, level, text, file, line))

    def put(self, text: str) -> None:
        """Add to the output."""
        self.out.append(text)
        self.size += len(text)


def sync(state: State, frame: Frame, line: int) -> None:
    """Bring the output to a line of the file."""
    gap = line - frame.line
    if 0 <= gap <= _GAP:
        if gap:
            state.put("\n" * gap)
    else:
        state.put(marker(line + frame.offset, frame.shown, "3" if frame.system else ""))
    frame.line = line
