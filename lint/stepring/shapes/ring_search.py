"""Searching the values that some lasting integers can take together, by running code from each combination.

The one idea: explicit-state reachability. States are looked at in the order of their distance from the start, those
that are certainly reached first, so that a witness is a shortest one; where that does not come deep enough, random
sequences of calls do. A state keeps where it was reached from.
"""

import random
from collections import deque
from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, field

from stepring.meaning.types import IntType
from stepring.places import Position
from stepring.shapes.ring_arith import Range, Value
from stepring.shapes.ring_facts import FlatFacts
from stepring.shapes.ring_flat import Touch
from stepring.shapes.ring_keys import Key
from stepring.shapes.steps import Pair, Run, Trace, Walk

SPREAD = 600
"""A bounded unknown value of an index is taken apart if it has no more values than this."""
# Work is counted in operations of the code that is run; a thousand take some milliseconds.
RUN_WORK = 4_000
STUDY_WORK = 120_000

State = tuple[Value, ...]
Spot = tuple[Position, str, str, Key]
"""An access: its place, its kind, its function, its storage."""


@dataclass(slots=True)
class Witness:
    """How a subscript comes about: stores of the followed integers from the start on, then the access."""

    stores: list[tuple[Position, Key, Value, Value]]
    calls: int


@dataclass(slots=True, eq=False)
class Access:
    """What is known of the subscripts of one access; ``cut``: not all ways to it were looked at."""

    touch: Touch
    certain: set[int] = field(default_factory=set)
    doubtful: set[Value] = field(default_factory=set)
    bad: tuple[int, Witness] | None = None
    maybe: Value = None
    settled: bool = False
    cut: bool = False


@dataclass(slots=True, eq=False)
class Orbit:
    """The values of one index: certain ones, all that cannot be excluded, whether the search came to an end, and the
    value at start, if there is one."""

    certain: set[int] = field(default_factory=set)
    possible: set[Value] = field(default_factory=set)
    complete: bool = True
    start: int | None = None


@dataclass(slots=True, eq=False)
class Study:
    """What was found out about a ring; ``joined`` is the state that some accesses were settled with."""

    accesses: dict[Spot, Access] = field(default_factory=dict)
    orbits: dict[Key, Orbit] = field(default_factory=dict)
    pairs: dict[Pair, bool] = field(default_factory=dict)
    work: int = STUDY_WORK
    joined: set[Key] = field(default_factory=set)


@dataclass(slots=True, eq=False)
class Scene:
    """What all studies share: functions by the integers they store into and the arrays they access, initial values,
    types, who writes what; and the searches that are done.

    ``events`` are the functions that can be entered from outside, with all that they call. ``homes`` are those in
    whose text the stores and accesses stand, and whether they can be entered: less to run, but what a caller checks
    before the call is not known there. ``depths`` tells how many calls deep a store or access (``array`` before the
    key) is seen in its home.
    """

    events: Callable[[frozenset[Key], frozenset[Key]], Sequence[FlatFacts]]
    homes: Callable[[frozenset[Key], frozenset[Key]], Sequence[tuple[FlatFacts, bool]]]
    depths: Mapping[tuple[Key, Position], int]
    initial: Callable[[Key], tuple[int, ...] | None]
    types: dict[Key, IntType]
    writes: Callable[[str], frozenset[Key]]
    searches: dict[tuple[object, ...], "Search"] = field(default_factory=dict)

    def whole(self, key: Key) -> Range:
        """All values of an integer's type."""
        type_ = self.types.get(key)
        return Range(type_.low, type_.high, False) if type_ is not None else Range(-(1 << 31), (1 << 32) - 1, False)


def out_of_range(value: Value, capacity: int, touch: Touch) -> bool:
    """Whether a subscript can leave the array.

    The address one past the end may be formed (6.5.6p8), as the end of a loop; an index that stands there is wrong.
    """
    top = capacity if touch.kind == "address" and not touch.indexed else capacity - 1
    if isinstance(value, int):
        return not 0 <= value <= top
    if isinstance(value, Range):
        return value.low < 0 or value.high > top
    return True


def collect(walk: Walk, run: Run, search: "Search", state: State, certain: bool, found: Study) -> None:
    """Add what a run saw to the accesses."""
    capacity = search.capacity
    for number, seen in run.touches.items():
        touch = walk.touched[number]
        spot = (touch.position, touch.kind, touch.function, touch.storage)
        access = found.accesses.get(spot)
        if access is None:
            access = found.accesses[spot] = Access(touch)
        for value, (trace, subscript) in seen.certain.items():
            known = access.certain if certain else access.doubtful
            if value in known and (access.bad is not None or not certain):
                continue
            known.add(value)
            if not out_of_range(value, capacity, touch):
                continue
            if certain and access.bad is None:
                access.bad = (subscript, search.witness(state, trace))
            elif not certain and access.maybe is None:
                access.maybe = subscript
        for value, (_, subscript) in seen.doubtful.items():
            if value in access.doubtful:
                continue
            access.doubtful.add(value)
            if access.maybe is None and out_of_range(value, capacity, touch):
                access.maybe = subscript if subscript is not None else Range(-(1 << 31), (1 << 31) - 1, False)



@dataclass(slots=True, eq=False)
class Search:
    """Reachability over the values of some integers, and what was seen on the way.

    ``loose``: an integer got a value of which only bounds are known.
    """

    scene: Scene
    tracked: tuple[Key, ...]
    capacity: int
    work: int
    movers: list[Walk] = field(default_factory=list)
    lookers: list[Walk] = field(default_factory=list)
    states: dict[State, bool] = field(default_factory=dict)
    parents: dict[State, tuple[State | None, Trace]] = field(default_factory=dict)
    sure: deque[State] = field(default_factory=deque)
    doubtful: deque[State] = field(default_factory=deque)
    pairs_seen: dict[Pair, bool] = field(default_factory=dict)
    seen: Study = field(default_factory=Study)
    resets: set[tuple[int, int]] = field(default_factory=set)
    wanted_spots: set[Spot] = field(default_factory=set)
    wanted_pairs: Collection[Pair] = ()
    cut: bool = False
    loose: bool = False

    @property
    def complete(self) -> bool:
        """Whether every state was looked at, along every path."""
        return not (self.cut or self.sure or self.doubtful)

    def orbit(self, key: Key) -> Orbit:
        """The values of one of the integers."""
        number = self.tracked.index(key)
        starts = {state[number] for state, (before, _) in self.parents.items() if before is None}
        first = next(iter(starts)) if len(starts) == 1 else None
        orbit = Orbit(complete=self.complete, start=first if isinstance(first, int) else None)
        for state, certain in self.states.items():
            value = state[number]
            orbit.possible.add(value)
            if certain and isinstance(value, int):
                orbit.certain.add(value)
        return orbit

    def start(self) -> None:
        """Put the initial states first in the row."""
        found: list[State] = [()]
        certain = True
        for key in self.tracked:
            values = self.scene.initial(key)
            if values is None:
                values = (0,)
                certain = False
            found = [(*state, value) for state in found for value in values]
        for state in found:
            self.states[state] = certain
            self.parents[state] = (None, None)
            (self.sure if certain else self.doubtful).append(state)

    def go(self, limit: int) -> None:
        """Look at states, certain ones first and in order of their distance from the start, up to ``limit`` states."""
        while self.sure or self.doubtful:
            if self.settled():
                self.cut = True
                return
            if self.work <= 0 or len(self.states) > limit:
                return
            self._expand(self.sure.popleft() if self.sure else self.doubtful.popleft())

    def wander(self, walks: int, length: int) -> None:
        """Random sequences of calls from the start: they come to depths that a search in all directions does not."""
        luck = random.Random(1)
        starts = [state for state, (before, _) in self.parents.items() if before is None and self.states[state]]
        for _ in range(walks if starts else 0):
            state = luck.choice(starts)
            for _ in range(length):
                following = [end for end in self._expand(state) if end != state]
                if not following or self.work <= 0 or self.settled():
                    break
                state = luck.choice(following)

    def settled(self) -> bool:
        """Whether all that was searched for is found."""
        if not self.wanted_spots and not self.wanted_pairs:
            return False
        known = (self.seen.accesses.get(spot) for spot in self.wanted_spots)
        return all(access is not None and access.bad is not None for access in known) and all(
            self.pairs_seen.get(pair) for pair in self.wanted_pairs
        )

    def _expand(self, state: State) -> list[State]:
        """Run all functions from a state; gives the states that are certainly reached in one call."""
        certain = self.states[state]
        found: list[State] = []
        for walk in list(self.lookers):
            run = self._run(walk, state)
            collect(walk, run, self, state, certain, self.seen)
            if run.cut:
                self.lookers = [other for other in self.lookers if other is not walk]
        for number, value in self.resets:
            self._reach((*state[:number], value, *state[number + 1 :]), False, state, None)
        for walk in list(self.movers):
            run = self._run(walk, state)
            if run.cut:
                self.movers = [other for other in self.movers if other is not walk]  # too large to go on with
            for pair, sure_pair in run.pairs.items():
                self.pairs_seen[pair] = self.pairs_seen.get(pair, False) or (sure_pair and certain and walk.sure)
            for values, (sure_end, trace) in run.ends.items():
                end = tuple(
                    new if key in walk.reads else old
                    for key, new, old in zip(self.tracked, values, state, strict=True)
                )
                sure = certain and sure_end and walk.sure and not any(isinstance(value, Range) for value in end)
                for reached in self._spread(end):
                    self._reach(reached, sure, state, trace)
                    if sure:
                        found.append(reached)
        return found

    def _run(self, walk: Walk, state: State) -> Run:
        run = walk.run(state, min(RUN_WORK + 24 * self.capacity, max(1, self.work)))
        self.work -= run.work or 1
        run.work = 0  # a remembered run costs nothing more
        self.cut = self.cut or run.cut
        return run

    def _spread(self, end: State) -> list[State]:
        """A state with an unknown value: one for each value if those are few, else with all values of the type."""
        unknown = [number for number, value in enumerate(end) if isinstance(value, Range)]
        if not unknown:
            return [end]
        self.loose = True
        first = unknown[0]
        value = end[first]
        if len(unknown) == 1 and value.high - value.low <= SPREAD:
            return [(*end[:first], item, *end[first + 1 :]) for item in range(value.low, value.high + 1)]
        return [
            tuple(
                self.scene.whole(key) if isinstance(value, Range) else value
                for key, value in zip(self.tracked, end, strict=True)
            )
        ]

    def _reach(self, end: State, certain: bool, state: State, trace: Trace) -> None:
        known = self.states.get(end)
        if known is None or (certain and not known):
            self.states[end] = certain
            self.parents[end] = (state, trace)
            (self.sure if certain else self.doubtful).append(end)

    def witness(self, state: State, trace: Trace) -> Witness:
        """The stores from the start to a point in a run from ``state``."""
        runs = [trace]
        current: State | None = state
        while current is not None:
            current, came = self.parents[current]
            if current is not None:
                runs.append(came)
        stores: list[tuple[Position, Key, Value, Value]] = []
        for item in runs:
            while item is not None:
                item, position, key, before, after = item
                stores.append((position, key, before, after))
        return Witness(stores[::-1], len(runs) - 1)
