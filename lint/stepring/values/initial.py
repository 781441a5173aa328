"""What the cells of objects with static storage hold at start."""

from stepring.meaning.types import (
    ArrayType,
    CType,
    Object,
    StructType,
)
from stepring.values.evaluate import compute
from stepring.values.intervals import FALSE, number_type, union, whole
from stepring.values.spots import Exposure
from stepring.values.types import Cell, FieldCell, Interval, VariableCell

Table = dict[Cell, Interval]


def initial_cells(item: Object, exposure: Exposure) -> Table:
    """What each cell of an object with static storage holds at start (6.7.9p10: zero where nothing is said)."""
    listed: dict[Cell, Interval] = {}
    counts: dict[Cell, int] = {}
    for initial in item.initial:
        path = tuple("[]" if isinstance(step, int) else "." + step for step in initial.path)
        cell: Cell = VariableCell(item.variable.identity, path)
        kind = number_type(initial.value.type)
        if kind is None:
            continue
        value = compute(initial.value, lambda place: whole(place.type))
        known = listed.get(cell)
        listed[cell] = value if known is None else union(known, value)
        counts[cell] = counts.get(cell, 0) + 1
    result: Table = {}
    for path, number in _scalar_paths(item.variable.type, exposure):
        cell = VariableCell(item.variable.identity, path)
        value = listed.get(cell, FALSE)
        result[cell] = value if cell in listed and counts[cell] >= number else union(value, FALSE)
    for cell, value in listed.items():
        result.setdefault(cell, union(value, FALSE) if "[]" in getattr(cell, "path", ()) else value)
    return result


def _scalar_paths(kind: CType, exposure: Exposure) -> list[tuple[tuple[str, ...], int]]:
    """The paths to the scalars of a type, and how many objects each stands for."""
    if isinstance(kind, ArrayType):
        inner = _scalar_paths(kind.element, exposure)
        return [(("[]", *path), number * (kind.length or 1 << 30)) for path, number in inner]
    if isinstance(kind, StructType):
        found = []
        for way in exposure.members.get(kind.identity, ()):
            number = 1
            previous: CType | None = None
            for struct, _, step in way:
                if not struct:
                    number *= (previous.length if isinstance(previous, ArrayType) else None) or 1 << 30
                previous = step
            found.append((tuple("." + name if struct else name for struct, name, _ in way), number))
        return found
    return [((), 1)] if number_type(kind) is not None else []


def shared_cells(kind: CType, path: tuple[str, ...], exposure: Exposure) -> list[Cell]:
    """The field cells under which a part of an exposed object is also known."""
    while isinstance(kind, ArrayType):
        kind = kind.element
        path = path[1:]
    if not isinstance(kind, StructType):
        return []
    return [*inner_cells(FieldCell(kind.identity, tuple(step.removeprefix(".") for step in path)), exposure)]


def inner_cells(cell: FieldCell, exposure: Exposure) -> list[FieldCell]:
    """The field cells that stand for a member, seen from each of the structures around it; the outermost first."""
    for way in exposure.members.get(cell.struct, ()):
        if tuple(name for _, name, _ in way) == cell.path:
            return [
                FieldCell(struct, tuple(name for _, name, _ in way[number:]))
                for number, (struct, _, _) in enumerate(way)
                if struct
            ]
    return []


def field_range(cell: Cell, exposure: Exposure) -> Interval | None:
    """The values of a member's type; None for what is no member."""
    if isinstance(cell, FieldCell):
        for way in exposure.members.get(cell.struct, ()):
            if tuple(name for _, name, _ in way) == cell.path:
                return whole(way[-1][2])
    return None
