"""What a walk tells: its events in order, and how it ended."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final, Literal

from stepring.meaning.types import PlaceExpr
from stepring.places import Position
from stepring.values.types import Cell, Interval

EventKind = Literal["store", "access", "branch", "call", "return"]
Ending = Literal["returned", "stopped", "bounded", "cut"]
NOTHING: Final[frozenset[Cell]] = frozenset()


@dataclass(frozen=True, slots=True)
class Event:
    """One thing that happened on a walk.

    - ``store``: ``value`` was stored in ``place``.
    - ``access``: an element was read, written or had its address taken (``use``); ``value`` is the subscript's,
    ``place`` the   element's, ``cell`` the array's elements or, through a pointer, the cell that holds the pointer.
    - ``branch``: ``value`` is the condition's or the control's; ``taken`` is the block that the walk went on at and
    ``decided`` whether   the values left only that one.
    - ``call``: of ``name``, which was not walked through; ``value`` is its result's.
    - ``return``: from ``function`` with ``value``.

    ``depends`` are the tracked cells that the value was computed from. ``depth`` counts the callees around it.
    """

    kind: EventKind
    function: str
    depth: int
    position: Position | None
    place: PlaceExpr | None = None
    cell: Cell | None = None
    value: Interval | None = None
    depends: frozenset[Cell] = NOTHING
    use: Literal["load", "store", "address"] | None = None
    decided: bool = False
    taken: int | None = None
    name: str | None = None


@dataclass(frozen=True, slots=True)
class Walk:
    """One path: its events in order, and what the cells held at its end.

    ``ended``: ``returned``; ``stopped`` (a function that does not return); ``bounded`` (a block was entered too often);
    ``cut`` (the walk's other paths were given up because there are too many; this one is unfinished).
    """

    events: tuple[Event, ...]
    cells: Mapping[Cell, Interval]
    depends: Mapping[Cell, frozenset[Cell]]
    returned: Interval | None
    ended: Ending
