"""A machine drawn as an SVG: states in layers from the initial ones down, transitions as numbered arrows.

The layout is the layered one of Sugiyama, Tagawa and Toda (1981), done by grandalf; this module makes the drawing. A
machine for which that comes out wider than a page is drawn as a column of states instead (``diagram_column``), which
stays legible at any size.
Between two states there is one arrow for each direction, whatever number of transitions it stands for; its label are
their numbers in the table of transitions that goes with the drawing. What is marked is marked by outline and words, so
that it reads on black-and-white paper.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape
from itertools import pairwise
from math import hypot

import networkx
from grandalf.graphs import Edge, Graph, Vertex
from grandalf.layouts import SugiyamaLayout
from grandalf.routing import EdgeViewer

from stepring.report.diagram_column import Box, Point, column_layout
from stepring.shapes.types import Machine

_CHARACTER, _LINE = 7.3, 16.0  # of the drawing's font, in the drawing's unit
_PADDING, _GAP_ACROSS, _GAP_DOWN, _MARGIN = 12.0, 34.0, 58.0, 26.0
_APART, _ROOM_FOR_ARROW = 11.0, 10.0
_LONGEST_LABEL = 26
_WIDEST = 1150.0


@dataclass(frozen=True, slots=True)
class Arrow:
    """All transitions from one state to another: their numbers, and whether one of them is marked."""

    source: str
    target: str
    numbers: tuple[int, ...]
    marked: bool = False

    @property
    def label(self) -> str:
        """The numbers, runs of them joined."""
        runs: list[list[int]] = []
        for number in self.numbers:
            if runs and number == runs[-1][-1] + 1:
                runs[-1].append(number)
            else:
                runs.append([number])
        text = ", ".join(f"{run[0]}–{run[-1]}" if len(run) > 2 else ", ".join(map(str, run)) for run in runs)
        return text if len(text) <= _LONGEST_LABEL else text[: _LONGEST_LABEL - 1] + "…"


class _View:
    """What grandalf wants to know of a vertex."""

    def __init__(self, width: float, height: float) -> None:
        self.w, self.h = width, height
        self.xy: Point = (0.0, 0.0)


def machine_svg(
    machine: Machine,
    notes: Mapping[str, Sequence[str]] = {},
    marked: frozenset[int] = frozenset(),
    links: Mapping[str, str] = {},
) -> str:
    """The machine as an ``svg`` element. ``notes`` are words to stand in a state's box (``never entered``), which marks
    it; ``marked`` are the numbers of marked transitions, counted from 1 in the machine's order; ``links`` lead from a
    state to a place in the page."""
    names = [state.name for state in machine.states]
    arrows = _arrows(machine, marked)
    sizes = {name: _size(name, notes.get(name, ())) for name in names}
    order = _order(names, machine.initial, arrows)
    boxes, paths = _layout(names, order, arrows, sizes)
    if max((box.x + box.width / 2 for box in boxes.values()), default=0.0) > _WIDEST:
        pairs = [(arrow.source, arrow.target) for arrow in arrows]
        boxes, paths = column_layout(_shorter(names, sorted(names, key=order.__getitem__), pairs), pairs, sizes)
    right = max((box.x + box.width / 2 for box in boxes.values()), default=0) + _MARGIN + 40
    left = min((box.x - box.width / 2 for box in boxes.values()), default=0) - _MARGIN
    top = min((box.y - box.height / 2 for box in boxes.values()), default=0) - _MARGIN - 14
    bottom = max((box.y + box.height / 2 for box in boxes.values()), default=0) + _MARGIN
    for path in paths.values():
        left = min(left, *(x - _MARGIN for x, _ in path))
        right = max(right, *(x + _MARGIN for x, _ in path))
    width, height = right - left, bottom - top
    title = escape(f"States and transitions of {machine.variable}")
    parts = [
        f'<svg class="diagram" viewBox="{left:.0f} {top:.0f} {width:.0f} {height:.0f}" width="{width:.0f}" '
        f'height="{height:.0f}" role="img" aria-label="{title}" xmlns="http://www.w3.org/2000/svg">',
        f"<title>{title}</title>",
    ]
    parts += [_arrow_svg(arrow, paths[arrow.source, arrow.target], boxes) for arrow in arrows]
    parts += [
        _box_svg(name, boxes[name], notes.get(name, ()), name in machine.initial, links.get(name)) for name in names
    ]
    parts += [_label_svg(arrow, paths[arrow.source, arrow.target]) for arrow in arrows]
    return "\n".join((*parts, "</svg>"))


def _arrows(machine: Machine, marked: frozenset[int]) -> list[Arrow]:
    numbers: dict[tuple[str, str], list[int]] = {}
    for number, step in enumerate(machine.transitions, 1):
        numbers.setdefault((step.source, step.target), []).append(number)
    return [
        Arrow(source, target, tuple(found), not marked.isdisjoint(found)) for (source, target), found in numbers.items()
    ]


def _size(name: str, notes: Sequence[str]) -> tuple[float, float]:
    longest = max(len(text) for text in (name, *notes))
    return longest * _CHARACTER + 2 * _PADDING, (1 + len(notes)) * _LINE + _PADDING


def _layout(
    names: Sequence[str], order: Mapping[str, int], arrows: Sequence[Arrow], sizes: Mapping[str, tuple[float, float]]
) -> tuple[dict[str, Box], dict[tuple[str, str], list[Point]]]:
    """Where each state stands, and the points that each arrow goes through, self-loops included."""
    # Each pair of states once, in the direction in which a walk from the initial states meets it first.
    pairs: dict[tuple[str, str], tuple[str, str]] = {}
    for arrow in arrows:
        if arrow.source != arrow.target:
            first, second = sorted((arrow.source, arrow.target), key=order.__getitem__)
            pairs[first, second] = (first, second)
    vertices = {name: Vertex(name) for name in names}
    for name, vertex in vertices.items():
        vertex.view = _View(*sizes[name])
    edges = {pair: Edge(vertices[pair[0]], vertices[pair[1]]) for pair in pairs}
    for edge in edges.values():
        edge.view = EdgeViewer()
    graph = Graph(list(vertices.values()), list(edges.values()))
    boxes: dict[str, Box] = {}
    across = 0.0
    for component in graph.C:
        members = [vertex.data for vertex in component.sV]
        if len(members) == 1:
            width, height = sizes[members[0]]
            boxes[members[0]] = Box(across + width / 2, height / 2, width, height)
            across += width + _GAP_ACROSS
            continue
        layout = SugiyamaLayout(component)
        layout.xspace, layout.yspace = _GAP_ACROSS, _GAP_DOWN
        layout.dw, layout.dh = _ROOM_FOR_ARROW, _ROOM_FOR_ARROW
        layout.init_all(inverted_edges=[])
        layout.draw(3)
        least = min(vertex.view.xy[0] - vertex.view.w / 2 for vertex in component.sV)
        points = [point for edge in component.sE for point in getattr(edge.view, "_pts", ())]
        least = min([least, *(x for x, _ in points)])
        highest = min(vertex.view.xy[1] - vertex.view.h / 2 for vertex in component.sV)
        farthest = across
        for vertex in component.sV:
            x, y = vertex.view.xy[0] - least + across, vertex.view.xy[1] - highest
            boxes[vertex.data] = Box(x, y, vertex.view.w, vertex.view.h)
            farthest = max(farthest, x + vertex.view.w / 2)
        for edge in component.sE:
            edge.view._pts = [(x - least + across, y - highest) for x, y in edge.view._pts]
            farthest = max(farthest, *(x for x, _ in edge.view._pts))
        across = farthest + _GAP_ACROSS + 30
    directions = {(arrow.source, arrow.target) for arrow in arrows}
    paths: dict[tuple[str, str], list[Point]] = {}
    for source, target in directions:
        if source == target:
            paths[source, target] = _loop(boxes[source])
            continue
        if (source, target) in edges:
            points = list(edges[source, target].view._pts)
        else:
            points = list(reversed(edges[target, source].view._pts))
        shift = _APART if (target, source) in directions else 0.0
        paths[source, target] = _clipped(_shifted(points, shift), boxes[source], boxes[target])
    return boxes, paths


def _shorter(declared: Sequence[str], walked: Sequence[str], pairs: Sequence[tuple[str, str]]) -> Sequence[str]:
    """Of two orders the one with the shorter way for the arrows; the declared one where they are equal."""

    def length(order: Sequence[str]) -> int:
        row = {name: number for number, name in enumerate(order)}
        return sum(abs(row[source] - row[target]) for source, target in pairs)

    return min((declared, walked), key=length)


def _order(names: Sequence[str], initial: Sequence[str], arrows: Sequence[Arrow]) -> dict[str, int]:
    """The states in the order in which a breadth-first walk meets them, initial ones first."""
    graph: networkx.DiGraph[str] = networkx.DiGraph()
    graph.add_nodes_from(names)
    graph.add_edges_from((arrow.source, arrow.target) for arrow in arrows)
    found: dict[str, int] = {}
    for start in (*(name for name in initial if name in graph), *names):
        if start not in found:
            for name in (start, *(target for _, target in networkx.bfs_edges(graph, start))):
                found.setdefault(name, len(found))
    return found


# ---------------------------------------------------------------------------------------------------------- geometry


def _loop(box: Box) -> list[Point]:
    right = box.x + box.width / 2
    return [(right, box.y - 6), (right + 26, box.y - 12), (right + 26, box.y + 12), (right, box.y + 6)]


def _shifted(points: Sequence[Point], by: float) -> list[Point]:
    """A path moved to its left, so that the two directions between two states do not lie on each other."""
    if not by:
        return list(points)
    found = []
    for number, (x, y) in enumerate(points):
        before, after = points[max(0, number - 1)], points[min(len(points) - 1, number + 1)]
        across, down = after[0] - before[0], after[1] - before[1]
        length = hypot(across, down) or 1.0
        found.append((x + down / length * by, y - across / length * by))
    return found


def _clipped(points: list[Point], source: Box, target: Box) -> list[Point]:
    points[0] = _edge_of(source, points[0], points[1])
    points[-1] = _edge_of(target, points[-1], points[-2])
    return points


def _edge_of(box: Box, inside: Point, outside: Point) -> Point:
    """Where the line from a point in a box to one outside leaves the box."""
    low, high = 0.0, 1.0
    for _ in range(24):
        middle = (low + high) / 2
        x = inside[0] + (outside[0] - inside[0]) * middle
        y = inside[1] + (outside[1] - inside[1]) * middle
        if abs(x - box.x) <= box.width / 2 and abs(y - box.y) <= box.height / 2:
            low = middle
        else:
            high = middle
    return inside[0] + (outside[0] - inside[0]) * high, inside[1] + (outside[1] - inside[1]) * high


def _middle(points: Sequence[Point]) -> Point:
    """A point a little before half-way along a path, so that labels of both directions do not meet."""
    lengths = [hypot(b[0] - a[0], b[1] - a[1]) for a, b in pairwise(points)]
    left = sum(lengths) * 0.42
    for (a, b), length in zip(pairwise(points), lengths, strict=True):
        if left <= length and length:
            part = left / length
            return a[0] + (b[0] - a[0]) * part, a[1] + (b[1] - a[1]) * part
        left -= length
    return points[0]


# ---------------------------------------------------------------------------------------------------------- drawing


def _box_svg(name: str, box: Box, notes: Sequence[str], initial: bool, link: str | None) -> str:
    left, top = box.x - box.width / 2, box.y - box.height / 2
    kind = "state marked" if notes else "state"
    parts = [
        f'<rect class="{kind}" x="{left:.1f}" y="{top:.1f}" width="{box.width:.1f}" height="{box.height:.1f}" rx="7"/>'
    ]
    if initial:
        parts.append(f'<circle class="start" cx="{box.x:.1f}" cy="{top - 20:.1f}" r="5"/>')
        parts.append(f'<path class="arrow" d="M{box.x:.1f},{top - 15:.1f} V{top - 2:.1f}"/>')
        parts.append(_head((box.x, top - 10), (box.x, top)))
    for number, text in enumerate((name, *notes)):
        y = top + _PADDING / 2 + (number + 0.75) * _LINE
        kind = "name" if number == 0 else "note"
        parts.append(f'<text class="{kind}" x="{box.x:.1f}" y="{y:.1f}">{escape(text)}</text>')
    drawn = "".join(parts)
    return f'<a href="{escape(link)}">{drawn}</a>' if link else f"<g>{drawn}</g>"


def _arrow_svg(arrow: Arrow, points: Sequence[Point], boxes: Mapping[str, Box]) -> str:
    kind = "arrow marked" if arrow.marked else "arrow"
    if arrow.source == arrow.target and len(points) == 4 and points[1][0] == points[2][0]:
        line = "M{:.1f},{:.1f} C{:.1f},{:.1f} {:.1f},{:.1f} {:.1f},{:.1f}".format(
            *(n for point in points for n in point)
        )
    else:
        line = "M" + " L".join(f"{x:.1f},{y:.1f}" for x, y in points)
    title = escape(f"{arrow.source} to {arrow.target}: {arrow.label}")
    return f'<g><title>{title}</title><path class="{kind}" d="{line}"/>{_head(points[-2], points[-1])}</g>'


def _head(before: Point, tip: Point) -> str:
    across, down = tip[0] - before[0], tip[1] - before[1]
    length = hypot(across, down) or 1.0
    ux, uy = across / length, down / length
    back = (tip[0] - 8 * ux, tip[1] - 8 * uy)
    wings = f"{back[0] - 3.5 * uy:.1f},{back[1] + 3.5 * ux:.1f} {back[0] + 3.5 * uy:.1f},{back[1] - 3.5 * ux:.1f}"
    return f'<polygon class="head" points="{tip[0]:.1f},{tip[1]:.1f} {wings}"/>'


def _label_svg(arrow: Arrow, points: Sequence[Point]) -> str:
    text = arrow.label
    width = len(text) * 6.2 + 5
    if arrow.source == arrow.target:
        x, y = points[1][0] + 2 + len(text) * 3.2, points[0][1] + 6
    elif len(points) == 4 and points[1][0] == points[2][0]:
        # In a column: beside the state that the arrow leaves.
        outward = 1 if points[1][0] > points[0][0] else -1
        x, y = points[0][0] + outward * (width / 2 + 3), points[0][1]
    else:
        x, y = _middle(points)
    return (
        f'<rect class="under" x="{x - width / 2:.1f}" y="{y - 7.5:.1f}" width="{width:.1f}" height="15"/>'
        f'<text class="number" x="{x:.1f}" y="{y + 4:.1f}">{escape(text)}</text>'
    )
