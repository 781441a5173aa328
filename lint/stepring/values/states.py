"""The abstract state at one point of a run: what each spot holds, and which spots still equal an expression.

A state is a dictionary from spots to intervals; a spot that is not in it holds what its summary (or type) allows, or
what was stored into a spot that may be the same object. Copying a state copies two small dictionaries; the
intervals are shared.

Besides values a state remembers *definitions*: after ``next = head + 1`` the spot ``next`` equals that expression
until one of the two is changed. A branch on ``next`` then also limits ``head``, and a branch on ``head`` limits
``next``; this replaces a relational domain for the tests that ring code makes on a copy of its index.
"""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Final, TypeAlias

from stepring.meaning.types import Expr, Load, PlaceExpr
from stepring.values.evaluate import compute
from stepring.values.frames import Frame
from stepring.values.intervals import UNBOUNDED, convert, fits, is_subset, meet, number_type, union, whole
from stepring.values.refine import constrain
from stepring.values.scan import walk_deep
from stepring.values.spots import Places, Spot
from stepring.values.types import Cell, Interval

DEPTH: Final = 4
"""How many definitions are followed when a limit on one spot limits others."""

Values: TypeAlias = dict[Spot, Interval]


@dataclass(frozen=True, slots=True)
class Definition:
    """An expression that a spot equals, the frame that its places belong to, and the spots that it reads."""

    value: Expr
    frame: Frame
    reads: frozenset[Spot]


@dataclass(slots=True)
class State:
    """Values and definitions at one point."""

    values: Values = field(default_factory=dict)
    definitions: dict[Spot, Definition] = field(default_factory=dict)

    def copy(self) -> "State":
        """A state that can be changed on its own."""
        return State(dict(self.values), dict(self.definitions))


StoreObserver: TypeAlias = Callable[[Spot, Interval], None]


def read_spot(places: Places, state: State, spot: Spot) -> Interval:
    """What a spot may hold."""
    if not spot.tracked:
        return spot.default
    known = state.values.get(spot)
    if known is not None and spot.definite:
        return known
    base = spot.default if known is None or spot.pointee else union(known, spot.default)
    return _with_aliases(places, state, spot, base)


def _with_aliases(places: Places, state: State, spot: Spot, base: Interval) -> Interval:
    values = state.values
    for other in places.aliases(spot):
        value = values.get(other)
        if value is not None:
            base = union(base, adapt(value, spot))
    return base


def adapt(value: Interval, spot: Spot) -> Interval:
    """A value stored through one type as it may be seen in a spot of another."""
    kind = number_type(spot.type)
    if kind is not None and fits(value, kind):
        return value
    return (convert(value, kind) if kind is not None else None) or whole(spot.type)


def holds_type(spot: Spot, place: PlaceExpr) -> bool:
    """Whether a place sees its spot as an object of the spot's own type, not of another sign (6.5p7)."""
    return spot.type is place.type or number_type(spot.type) == number_type(place.type)


def read_place(frame: Frame, state: State, place: PlaceExpr) -> Interval:
    """What a place may hold, seen as its own type."""
    spot = frame.spot(place)
    value = read_spot(frame.places, state, spot)
    if holds_type(spot, place):
        return value
    kind = number_type(place.type)
    if kind is None or value is UNBOUNDED:
        return whole(place.type)
    return value if fits(value, kind) else convert(value, kind) or whole(kind)


def limit_place(frame: Frame, state: State, place: PlaceExpr, allowed: Interval, depth: int) -> bool:
    """Keep only ``allowed`` values of a place; nothing is learned of a spot that it sees as another type."""
    spot = frame.spot(place)
    if not holds_type(spot, place):
        return meet(read_place(frame, state, place), allowed) is not None
    return limit_spot(frame.places, state, spot, allowed, depth)


@dataclass(slots=True)
class View:
    """A state as the places of one frame see it. ``observe`` is told of every store.

    It is a ``Limiter`` and an ``Environment``: ``evaluate(expression, view)`` gives what an expression can be here.
    """

    frame: Frame
    state: State
    observe: StoreObserver | None = None

    def read(self, place: PlaceExpr) -> Interval:
        """The values that the place may hold."""
        return read_place(self.frame, self.state, place)

    def evaluate(self, expression: Expr) -> Interval:
        """The values that the expression may have."""
        return compute(expression, self.read)

    def limit(self, place: PlaceExpr, allowed: Interval) -> bool:
        """Keep only ``allowed`` values of the place; False if none is left."""
        return limit_place(self.frame, self.state, place, allowed, DEPTH)

    def cells(self) -> dict[Cell, Interval]:
        """What the cells that are known here may hold, all spots of one cell together."""
        result: dict[Cell, Interval] = {}
        for spot in self.state.values:
            if spot.cell is not None:
                value = read_spot(self.frame.places, self.state, spot)
                known = result.get(spot.cell)
                result[spot.cell] = value if known is None else union(known, value)
        return result

    # ------------------------------------------------------------------------------------------------------ changing

    def store(self, place: PlaceExpr, value: Interval, source: Expr | None = None) -> Spot:
        """Store a value in a place; ``source`` is the expression that gave it, if it would give the same again."""
        spot = self.frame.spot(place)
        own = holds_type(spot, place)
        value = value if own else adapt(value, spot)
        named = own and spot.definite and spot.tracked
        definition = self._definition(source, spot) if source is not None and named else None
        store_spot(self.frame.places, self.state, spot, value, self.observe)
        if definition is not None:
            self.state.definitions[spot] = definition
        return spot

    def _definition(self, source: Expr, target: Spot) -> Definition | None:
        reads: set[Spot] = set()
        for part in walk_deep(source):
            if isinstance(part, Load):
                spot = self.frame.spot(part.place)
                if not (spot.definite and spot.tracked) or spot is target:
                    return None
                reads.add(spot)
        aliases = self.frame.places.aliases(target)
        if not reads or any(other in reads for other in aliases) or any(target in spot.depends for spot in reads):
            return None
        return Definition(source, self.frame, frozenset(reads))


def limit_spot(places: Places, state: State, spot: Spot, allowed: Interval, depth: int) -> bool:
    """Keep only ``allowed`` values of a spot, and what follows for the spots that it is defined with."""
    own = read_spot(places, state, spot)
    if own is UNBOUNDED:
        return True
    left = meet(own, allowed)
    if left is None:
        return False
    if left == own or not (spot.tracked and spot.definite):
        return True
    state.values[spot] = left
    if depth == 0:
        return True
    definition = state.definitions.get(spot)
    if definition is not None and not constrain(_Deeper(definition.frame, state, depth - 1), definition.value, left):
        return False
    for other, by in list(state.definitions.items()):
        if spot in by.reads:
            again = compute(by.value, _Deeper(by.frame, state, 0).read)
            if not limit_spot(places, state, other, again, depth - 1):
                return False
    return True


@dataclass(slots=True)
class _Deeper:
    """A limiter that follows fewer definitions than the one that led to it."""

    frame: Frame
    state: State
    depth: int

    def read(self, place: PlaceExpr) -> Interval:
        return read_place(self.frame, self.state, place)

    def limit(self, place: PlaceExpr, allowed: Interval) -> bool:
        return limit_place(self.frame, self.state, place, allowed, self.depth)


def forget_definitions(state: State, changed: frozenset[Spot]) -> None:
    """Drop the definitions of changed spots and those that read one."""
    if state.definitions:
        stale = [spot for spot, by in state.definitions.items() if spot in changed or not changed.isdisjoint(by.reads)]
        for spot in stale:
            del state.definitions[spot]


def store_spot(
    places: Places,
    state: State,
    spot: Spot,
    value: Interval,
    observe: StoreObserver | None = None,
    *,
    weak: bool = False,
) -> None:
    """Store a value in a spot (maybe, if it is not definite or ``weak``), and maybe in each that may be the same."""
    for name in spot.dependents:
        end_name(places, state, name)
    aliases = places.aliases(spot)
    values = state.values
    if observe is not None:
        observe(spot, value)
    if state.definitions:
        forget_definitions(state, frozenset((spot, *aliases)))
    if spot.tracked or spot.buckets:
        # The value of a spot that is not tracked is kept for those that may be the same.
        if spot.definite and not weak:
            values[spot] = value
        else:
            _maybe(places, state, spot, value)
    for other in aliases:
        for name in other.dependents:
            end_name(places, state, name)
        known = values.get(other)
        if known is not None:
            values[other] = union(known, adapt(value, other))


def _maybe(places: Places, state: State, spot: Spot, value: Interval) -> None:
    """The spot, or one of the objects that it stands for, may have got the value."""
    known = state.values.get(spot)
    if known is None:
        if spot.definite:
            known = read_spot(places, state, spot)
        elif not spot.pointee:
            known = spot.default
    joined = value if known is None else union(known, adapt(value, spot))
    if joined != spot.default or spot.pointee:
        state.values[spot] = joined


def end_name(places: Places, state: State, spot: Spot) -> None:
    """A definite spot's access path leads elsewhere from now on; what it held stays with the rest of its cell."""
    value = state.values.pop(spot, None)
    if state.definitions:
        forget_definitions(state, frozenset((spot,)))
    if value is None or spot.remainder is None:
        return
    rest = spot.remainder
    if not is_subset(value, rest.default) or rest.pointee:
        known = state.values.get(rest)
        if known is None and not rest.pointee:
            known = rest.default
        state.values[rest] = value if known is None else union(known, value)


def forget(places: Places, state: State, changed: Callable[[Spot], bool]) -> None:
    """The spots that ``changed`` names, and what depends on them, hold what their summaries allow."""
    gone = [spot for spot in state.values if changed(spot) or any(changed(by) for by in spot.depends)]
    for spot in gone:
        del state.values[spot]
    if state.definitions:
        stale = [
            spot
            for spot, by in state.definitions.items()
            if changed(spot) or any(changed(read) or any(map(changed, read.depends)) for read in by.reads)
        ]
        for spot in stale:
            del state.definitions[spot]


def join_states(places: Places, a: State, b: State) -> State:
    """The state of which both are part."""
    if a is b:
        return a
    values: Values = {}
    for spot, x in a.values.items():
        y = b.values.get(spot)
        if y is x:
            values[spot] = x
        elif y is not None:
            values[spot] = union(x, y)
        else:
            _join_one_sided(places, values, b, spot, x)
    for spot, y in b.values.items():
        if spot not in a.values:
            _join_one_sided(places, values, a, spot, y)
    definitions = {}
    if a.definitions and b.definitions:
        for spot, definition in a.definitions.items():
            other = b.definitions.get(spot)
            if other is not None and other.value is definition.value and other.frame is definition.frame:
                definitions[spot] = definition
    return State(values, definitions)


def _join_one_sided(places: Places, values: Values, other: State, spot: Spot, value: Interval) -> None:
    """Enter a spot's joined value where the other state does not name it; not needed where its default says the same.

    What was stored through a pointer to a scalar is kept: the spots that may be the same need it, and their summaries
    do not have it.
    """
    if spot.pointee:
        kept = spot if spot.remainder is None or not spot.tracked else spot.remainder
        known = values.get(kept)
        values[kept] = value if known is None else union(known, value)
        return
    joined = union(value, read_spot(places, other, spot) if spot.definite else spot.default)
    if joined != spot.default:
        values[spot] = joined


def includes(places: Places, large: State, small: State) -> bool:
    """Whether every value of ``small`` is in ``large``, and ``large`` has no definition that ``small`` has not."""
    for spot, value in small.values.items():
        known = large.values.get(spot)
        if known is value:
            continue
        if known is None and not spot.pointee:
            known = read_spot(places, large, spot) if spot.definite else spot.default
        if known is None or not is_subset(value, known):
            return False
    for spot, value in large.values.items():
        if spot not in small.values:
            if spot.pointee and spot.definite:
                if spot.tracked:
                    return False
            elif spot.definite and not is_subset(read_spot(places, small, spot), value):
                return False
    return all(
        (other := small.definitions.get(spot)) is not None and other.value is by.value
        for spot, by in large.definitions.items()
    )


def join_optional(places: Places, a: State | None, b: State | None) -> State | None:
    """``join_states`` where either may be missing (control does not come from there)."""
    if a is None or b is None:
        return b if a is None else a
    return join_states(places, a, b)


def same_state(a: State, b: State) -> bool:
    """Whether two states say the same."""
    return a is b or (
        a.values == b.values
        and a.definitions.keys() == b.definitions.keys()
        and all(by.value is b.definitions[spot].value for spot, by in a.definitions.items())
    )
