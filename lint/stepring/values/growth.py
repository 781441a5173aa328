"""How ranges grow in a program's fixpoint: first by what is added, then to the next constant, last to anything."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Final

from stepring.values.initial import Table
from stepring.values.intervals import UNBOUNDED, is_subset, union, widen, within
from stepring.values.types import Cell, Interval

ROUNDS: Final = 3
"""Times that a cell may grow before it is widened."""
PATIENCE: Final = 24
"""Times that a cell may grow before it is taken to hold anything."""


@dataclass(slots=True)
class Growth:
    """Counts how often each cell of each table grew. ``ranges``: what the cells' types can hold, where known."""

    ranges: Table
    times: dict[tuple[str, Cell], int] = field(default_factory=dict)

    def count(self, table: str, cell: Cell) -> int:
        """One more growth of a cell in a table; which one it is."""
        number = self.times[table, cell] = self.times.get((table, cell), 0) + 1
        return number

    def grown(self, cell: Cell, known: Interval, value: Interval, number: int, thresholds: Sequence[int]) -> Interval:
        """A cell's range when it grows for the ``number``-th time."""
        limits = self.ranges.get(cell)
        if number > PATIENCE:
            return limits or UNBOUNDED
        joined = (widen(known, value, thresholds) if number > ROUNDS else None) or union(known, value)
        return (within(joined, limits.low, limits.high) or limits) if limits is not None else joined

    def extend(self, table: Table, added: Table, name: str, thresholds: Sequence[int]) -> bool:
        """Add to a table; whether it grew."""
        grew = False
        for cell, value in added.items():
            known = table.get(cell)
            if known is not None and is_subset(value, known):
                continue
            grew = True
            number = self.count(name, cell)
            table[cell] = value if known is None else self.grown(cell, known, value, number, thresholds)
        return grew
