"""What the values engine says of the subscripts that running the index's code did not settle.

Each function that makes such an access is analysed by itself: nothing is assumed of what it finds when it starts, so
a range that lies inside the storage holds whoever else stores the index (an index that an interrupt can change is
volatile, and volatile objects are not tracked). What several expressions at one place of the source can be is joined.
"""

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import replace

from stepring.meaning.types import (
    AddressOf,
    ElementPlace,
    Expr,
    Function,
    Load,
    MemberPlace,
    PlaceExpr,
    Statement,
    Terminator,
)
from stepring.places import Origin, Position
from stepring.shapes.ring_types import CheckedAccess
from stepring.shapes.types import Access, Ring
from stepring.values.engine import analyse
from stepring.values.intervals import union
from stepring.values.scan import expressions_of, inside_place, places_of, walk_deep
from stepring.values.types import Interval

MOST_BLOCKS = 400  # larger functions are left to what is known of them already


def with_ranges(
    rings: Iterable[Ring], functions: Sequence[Function], origin: Callable[[Position], Origin]
) -> tuple[Ring, ...]:
    """The rings, their unsettled accesses with the subscript's range; one inside the storage is settled."""
    rings = tuple(rings)
    wanted = {
        access.where
        for ring in rings
        if ring.capacity is not None
        for access in ring.accesses
        if isinstance(access, CheckedAccess) and not access.settled and access.bad is None
    }
    if not wanted:
        return rings
    ranges = _ranges(functions, origin, wanted)
    return tuple(
        replace(ring, accesses=tuple(_settled(access, ring.capacity, ranges) for access in ring.accesses))
        if ring.capacity is not None
        else ring
        for ring in rings
    )


def _settled(access: Access, capacity: int, ranges: dict[Origin, Interval]) -> Access:
    if not isinstance(access, CheckedAccess) or access.settled or access.bad is not None:
        return access
    found = ranges.get(access.where)
    if found is None:
        return access
    return replace(access, range=found, settled=found.low >= 0 and found.high < capacity)


def _ranges(
    functions: Sequence[Function], origin: Callable[[Position], Origin], wanted: set[Origin]
) -> dict[Origin, Interval]:
    """The joined ranges of all subscripts that stand at the wanted places."""
    found: dict[Origin, Interval] = {}
    for function in functions:
        here = [item for item in _subscripts(function) if origin(item[2]) in wanted]
        if not here or len(function.blocks) > MOST_BLOCKS:
            continue
        values = analyse(function)
        for block, statement, position, index in here:
            view = values.before(block, statement)
            if view is None:
                continue  # control never comes here
            where = origin(position)
            range_ = view.evaluate(index)
            found[where] = range_ if where not in found else union(found[where], range_)
    return found


def _subscripts(function: Function) -> Iterator[tuple[int, int, Position, Expr]]:
    """Every subscript of an array object, with the block and the number of its statement."""
    for number, block in enumerate(function.blocks):
        steps: tuple[Statement | Terminator, ...] = (*block.statements, block.terminator)
        for at, step in enumerate(steps):
            places = list(places_of(block.statements[at])) if at < len(block.statements) else []
            expressions = [*expressions_of(step), *(inner for place in places for inner in inside_place(place))]
            for expression in expressions:
                for part in walk_deep(expression):
                    if isinstance(part, Load | AddressOf):
                        places.append(part.place)
            for place in places:
                for element in _elements(place):
                    if element.position is not None:
                        yield number, at, element.position, element.index


def _elements(place: PlaceExpr) -> Iterator[ElementPlace]:
    while isinstance(place, ElementPlace | MemberPlace):
        if isinstance(place, ElementPlace):
            yield place
        place = place.base
