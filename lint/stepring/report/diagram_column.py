"""Many states in one column: forward transitions bow out to the right, backward ones to the left.

Each transition has a lane of its own as far as it runs beside others, short ones inside, so that lines cross but never
lie on each other. Arrows that lead to one state end together; those that leave it start one below the other.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

Point = tuple[float, float]
_LANE, _PORT, _GAP, _FIRST_LANE = 9.0, 12.0, 7.0, 46.0


@dataclass(frozen=True, slots=True)
class Box:
    """A state's rectangle: its centre, its size."""

    x: float
    y: float
    width: float
    height: float


def column_layout(
    names: Sequence[str], arrows: Sequence[tuple[str, str]], sizes: Mapping[str, tuple[float, float]]
) -> tuple[dict[str, Box], dict[tuple[str, str], list[Point]]]:
    """The boxes one below the other in the given order, and each arrow's four points (its loop's for a self-loop)."""
    row = {name: number for number, name in enumerate(names)}
    width = max(sizes[name][0] for name in names)
    leaving = {
        name: (
            [target for source, target in arrows if source == name and row[target] > row[name]],
            [target for source, target in arrows if source == name and row[target] < row[name]],
        )
        for name in names
    }
    loops = {source for source, target in arrows if source == target}
    boxes: dict[str, Box] = {}
    top = 0.0
    for name in names:
        ports = max(len(side) for side in leaving[name]) + 1 + (name in loops)
        height = max(sizes[name][1], ports * _PORT + 4)
        boxes[name] = Box(0.0, top + height / 2, width, height)
        top += height + _GAP
    paths: dict[tuple[str, str], list[Point]] = {}
    for forward in (True, False):
        mine = [(a, b) for a, b in arrows if a != b and (row[b] > row[a]) == forward]
        lanes = _lanes([(min(row[a], row[b]), max(row[a], row[b])) for a, b in mine])
        side = 1.0 if forward else -1.0
        for (source, target), lane in zip(mine, lanes, strict=True):
            targets = sorted(leaving[source][0 if forward else 1], key=row.__getitem__, reverse=forward)
            port = targets.index(target) + (forward and source in loops)
            box, end = boxes[source], boxes[target]
            start_y = box.y - box.height / 2 + _PORT * (port + 1.5)
            end_y = end.y - end.height / 2 + _PORT * 0.6
            x = side * (width / 2 + _FIRST_LANE + lane * _LANE)
            paths[source, target] = [(side * width / 2, start_y), (x, start_y), (x, end_y), (side * width / 2, end_y)]
    for name in names:
        if name in loops:
            box = boxes[name]
            right, y = box.x + box.width / 2, box.y - box.height / 2 + 8
            paths[name, name] = [(right, y - 5), (right + 18, y - 8), (right + 18, y + 10), (right, y + 7)]
    return boxes, paths


def _lanes(spans: Sequence[tuple[int, int]]) -> list[int]:
    """A lane for each span of rows; spans that overlap have different ones, short ones come first."""
    taken: list[list[tuple[int, int]]] = []
    found = [0] * len(spans)
    for number in sorted(range(len(spans)), key=lambda one: (spans[one][1] - spans[one][0], spans[one])):
        low, high = spans[number]
        lane = 0
        while lane < len(taken) and any(
            low <= other_high and other_low <= high for other_low, other_high in taken[lane]
        ):
            lane += 1
        if lane == len(taken):
            taken.append([])
        taken[lane].append((low, high))
        found[number] = lane
    return found
