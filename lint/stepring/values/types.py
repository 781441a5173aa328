"""What the values engine speaks of: strided intervals, and the memory cells whose values it tracks."""

from dataclasses import dataclass
from typing import TypeAlias


@dataclass(frozen=True, slots=True)
class Interval:
    """The integers ``low``, ``low + stride``, …, ``high``; a single value has stride 0. Never empty (None stands for
    that)."""

    low: int
    high: int
    stride: int = 1


@dataclass(frozen=True, slots=True, order=True)
class VariableCell:
    """A variable, or a part of one reached by constant members and elements: ``path`` is ``(".head",)``, ``("[]",
    ".state")``.

    All elements of an array share one cell (``[]``).
    """

    variable: str
    path: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, order=True)
class FieldCell:
    """A member of every object of a structure type that is reached through pointers: (struct identity, path)."""

    struct: str
    path: tuple[str, ...]


Cell: TypeAlias = VariableCell | FieldCell
