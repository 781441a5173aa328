"""What the analysis of one function is told of the rest of the program, and what is noted of it for the rest."""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

from stepring.meaning.types import (
    Function,
)
from stepring.values.intervals import number_type, union
from stepring.values.spots import Exposure, Spot
from stepring.values.states import (
    State,
)
from stepring.values.types import Cell, Interval


@dataclass(frozen=True, slots=True)
class Effect:
    """What a call of known code does.

    ``writes``: cells it may store into and what they then hold (None: what the summary says). ``certain``: cells
    among them that are stored on every path. ``through_pointers``: it also stores through pointers that it was
    given. ``returns``: its result, None for the type's range. ``comes_back``: False for a function that never
    returns. ``outward``: it calls unknown
    code. ``callee``: the function's identity.
    """

    writes: Mapping[Cell, Interval | None] = field(default_factory=dict)
    certain: frozenset[Cell] = frozenset()
    through_pointers: bool = False
    returns: Interval | None = None
    comes_back: bool = True
    outward: bool = False
    callee: str = ""


def _nothing(name: str, caller: Function) -> None:
    return None


def _never(cell: Cell) -> bool:
    return False


@dataclass(frozen=True, slots=True, eq=False)
class Surroundings:
    """What a function's analysis may assume of the rest of the program.

    ``summaries``: what each lasting cell can hold whenever code of the program starts; a cell that is missing can
    hold anything. ``exposure``: what the program does with addresses; None where not all of it was read.
    ``effects``: the effect of a callee by its C name and the function that calls it. ``bodies``: the body of a callee
    that is to be run in place. ``steady``: volatile cells that only the analysed code stores into. ``foreign``: cells
    that another context (an interrupt) may store into at any moment. ``depth``: how deep bodies are nested.
    ``track_pointees``: follow what pointers to scalars point to (they must not lead to device registers).
    """

    summaries: Mapping[Cell, Interval] = field(default_factory=dict)
    exposure: Exposure | None = None
    effects: Callable[[str, Function], Effect | None] = _nothing
    bodies: Callable[[str, Function], Function | None] = _nothing
    steady: Callable[[Cell], bool] = _never
    foreign: Callable[[Cell], bool] = _never
    depth: int = 2
    track_pointees: bool = False


@dataclass(slots=True)
class Record:
    """What is noted of a run: for each cell what is stored at all, and what it holds where other code can look.

    ``stored``: the join of all stores. ``left``: the join over returns and calls that are not run in place, of the
    cells that were stored into. ``pointees``: what is stored through pointers to scalars, by width. ``returned``:
    the value returned. ``replaced``: variables and members of them that no longer hold what they held at the start,
    wherever other code can look; None if it never can.
    """

    stored: dict[Cell, Interval] = field(default_factory=dict)
    left: dict[Cell, Interval] = field(default_factory=dict)
    pointees: dict[int, Interval] = field(default_factory=dict)
    arguments: dict[str, list[Interval]] = field(default_factory=dict)
    entered: dict[str, tuple[list[Interval], dict[Cell, Interval]]] = field(default_factory=dict)
    returned: Interval | None = None
    replaced: frozenset[Cell] | None = None
    looks: list[State] = field(default_factory=list)

    def pass_to(self, callee: str, arguments: list[Interval]) -> None:
        """Note the arguments of a call that is not run in place."""
        known = self.arguments.get(callee)
        if known is not None and len(known) == len(arguments):
            arguments = [union(a, b) for a, b in zip(known, arguments, strict=True)]
        self.arguments[callee] = arguments

    def enter(self, callee: str, arguments: list[Interval], cells: dict[Cell, Interval]) -> None:
        """Note a call run in place: its arguments, and lasting cells that hold more than their summaries say."""
        known = self.entered.get(callee)
        if known is not None:
            arguments = [union(a, b) for a, b in zip(known[0], arguments, strict=False)]
            for cell, value in known[1].items():
                cells[cell] = union(cells[cell], value) if cell in cells else value
        self.entered[callee] = (arguments, cells)

    def observe(self, spot: Spot, value: Interval) -> None:
        """Note a store."""
        if spot.private:
            return
        if spot.pointee:
            kind = number_type(spot.type)
            if kind is not None:
                known = self.pointees.get(kind.width)
                self.pointees[kind.width] = value if known is None else union(known, value)
        elif spot.cell is not None and number_type(spot.type) is not None:
            known = self.stored.get(spot.cell)
            self.stored[spot.cell] = value if known is None else union(known, value)
            if not spot.tracked:
                known = self.left.get(spot.cell)
                self.left[spot.cell] = value if known is None else union(known, value)


@dataclass(slots=True)
class Logged(Mapping[Cell, Interval]):
    """The summaries as one analysis reads them, with some cells holding more; what it reads is noted
    (and is all that iterating gives)."""

    own: Callable[[Cell], Interval | None]
    extra: dict[Cell, Interval] = field(default_factory=dict)
    read: set[Cell] = field(default_factory=set)

    def __getitem__(self, cell: Cell) -> Interval:
        value = self.get(cell)
        if value is None:
            raise KeyError(cell)
        return value

    def __iter__(self) -> Iterator[Cell]:
        return iter(self.read)

    def __len__(self) -> int:
        return len(self.read)

    def get(self, cell: Cell, default: object = None) -> Interval | None:  # type: ignore[override]
        self.read.add(cell)
        known = self.own(cell)
        more = self.extra.get(cell)
        return union(known, more) if known is not None and more is not None else known
