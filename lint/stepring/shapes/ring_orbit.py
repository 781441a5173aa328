"""The values that a ring's indices really take, and the slots that are accessed with them.

The one idea: start from the initial values, run every function that uses the ring from every value reached so far,
until nothing new comes (explicit-state reachability, as in model checking). First each index is followed alone and all
else counts as unknown; that bounds every subscript from above. Where a subscript then seems to leave the array and the
way there depends on other state (a count, a flag), the indices are followed together with that state, which settles
whether it is real. What is reached along certain paths only is a fact with a witness; what is not reached at all,
although every doubtful path was taken, cannot happen.
"""

import random
from collections import deque
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from stepring.meaning.types import IntType
from stepring.places import Position
from stepring.shapes.ring_arith import Range, Value
from stepring.shapes.ring_facts import FlatFacts
from stepring.shapes.ring_flat import Touch
from stepring.shapes.ring_keys import Key
from stepring.shapes.steps import Pair, Run, Trace, Walk

STATES = 20_000
"""Combinations of values that are looked at when several integers are followed together."""
NEAR = 2_000
"""So many of them are looked at in order of distance, before random sequences of calls are tried."""
ORBIT = 4_200
"""Values of one index that are looked at."""
RUN_WORK = 30_000
ALONE_WORK = 80_000
LOOK_WORK = 50_000
TOGETHER_WORK = 160_000
TOGETHER = 8
"""Up to this many integers are followed together."""

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
    """The values of one index: certain ones, all that cannot be excluded, and whether the search came to an end."""

    certain: set[int] = field(default_factory=set)
    possible: set[Value] = field(default_factory=set)
    complete: bool = True


@dataclass(slots=True, eq=False)
class Study:
    """What was found out about a ring."""

    accesses: dict[Spot, Access] = field(default_factory=dict)
    orbits: dict[Key, Orbit] = field(default_factory=dict)
    pairs: dict[Pair, bool] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Scene:
    """What all studies share: the functions that can be entered, initial values, types, who writes what."""

    events: Callable[[frozenset[Key], frozenset[Key]], Sequence[FlatFacts]]
    initial: Callable[[Key], tuple[int, ...] | None]
    types: dict[Key, IntType]
    writes: Callable[[str], frozenset[Key]]


def study(
    scene: Scene,
    storage: Key,
    capacity: int,
    indices: Sequence[Key],
    counts: Sequence[Key],
    strides: Mapping[Key, int],
) -> Study:
    """Find out which slots of ``storage`` are accessed and which values the indices take.

    ``counts`` are integers that count occupied slots; they are followed to bound them, but they are no indices.
    ``strides`` are what one advance adds to each index that wraps.
    """
    arrays = frozenset((storage,))
    followed = [*indices, *counts]
    ranges: dict[Key, Range] = {}
    for attempt in range(2):
        found = Study()
        state: set[Key] = set()
        for index in followed:
            others = {key: known for key, known in ranges.items() if key != index}
            state |= _alone(scene, arrays, capacity, index, followed, others, found)
        suspects = [access for access in found.accesses.values() if not _fits(access, capacity)]
        if attempt == 1 or not suspects or len(followed) == 1:
            break
        ranges = {key: known for key in followed for known in (_hull(found.orbits[key]),) if known is not None}
    suspects = [access for access in suspects if access.bad is None]
    pairs = {
        pair
        for pair, certain in found.pairs.items()
        if not certain and pair[0] in strides and is_odd(pair, strides[pair[0]], capacity)
    }
    if suspects or pairs:
        _together(scene, arrays, capacity, followed, state - set(followed), found, suspects, pairs)
    return found


def is_odd(pair: Pair, stride: int, capacity: int) -> bool:
    """Whether an advance does not lead to the slot that follows."""
    _, _, before, after, by = pair
    return (before + (by or stride) - after) % capacity != 0


def _hull(orbit: Orbit) -> Range | None:
    """Bounds of an orbit, None where the search did not come to an end."""
    if not orbit.complete or not orbit.possible:
        return None
    lows = [value.low if isinstance(value, Range) else int(value) for value in orbit.possible]
    highs = [value.high if isinstance(value, Range) else int(value) for value in orbit.possible]
    return Range(min(lows), max(highs), False)


def out_of_range(value: Value, capacity: int, kind: str) -> bool:
    """Whether a subscript can leave the array; the address one past the end may be formed (6.5.6p8)."""
    top = capacity if kind == "address" else capacity - 1
    if isinstance(value, int):
        return not 0 <= value <= top
    if isinstance(value, Range):
        return value.low < 0 or value.high > top
    return True


def _fits(access: Access, capacity: int) -> bool:
    kind = access.touch.kind
    return not any(out_of_range(value, capacity, kind) for value in access.certain | access.doubtful)


@dataclass(frozen=True, slots=True)
class Pace:
    """A function ready to run: ``moves`` for what it does to the followed integers, ``looks`` for its accesses.

    They are apart because an access may depend on more than the integers' new values do, and what a value depends on
    decides how certain it is. None where there is nothing to see.
    """

    moves: Walk | None
    looks: Walk | None

    @property
    def walks(self) -> tuple[Walk, ...]:
        """Both, each once."""
        found = (self.moves, self.looks) if self.moves is not self.looks else (self.looks,)
        return tuple(walk for walk in found if walk is not None)


def _paces(
    scene: Scene, arrays: frozenset[Key], capacity: int, tracked: Sequence[Key], ranges: Mapping[Key, Range]
) -> list[Pace]:
    wholes = {key: _whole(scene, key) for key in tracked}
    found = []
    for facts in scene.events(frozenset(tracked), arrays):

        def walk(storage: frozenset[Key], facts: FlatFacts = facts) -> Walk:
            return Walk(facts, tracked, storage, capacity, wholes, ranges, scene.writes, scene.types)

        looks: Walk | None = walk(arrays)
        moves: Walk | None = looks
        if looks is None or looks.idle:
            continue
        if looks.touched:
            moves = walk(frozenset())
            if moves.idle:
                moves = None
            elif moves.branching == looks.branching:
                moves = looks
        else:
            looks = None
        found.append(Pace(moves, looks))
    return found


def _whole(scene: Scene, key: Key) -> Range:
    type_ = scene.types.get(key)
    return Range(type_.low, type_.high, False) if type_ is not None else Range(-(1 << 31), (1 << 32) - 1, False)


# ---------------------------------------------------------------------------------------------------------- one index


def _alone(
    scene: Scene,
    arrays: frozenset[Key],
    capacity: int,
    index: Key,
    followed: Sequence[Key],
    ranges: Mapping[Key, Range],
    found: Study,
) -> set[Key]:
    """Follow one index; gives the state that its functions depend on besides.

    Each access is looked at while the first of the integers that its subscript is made of is followed.
    """
    paces = _paces(scene, arrays, capacity, (index,), ranges)
    walks = [walk for pace in paces for walk in pace.walks]
    cells = {id(use.touch): use.cells for walk in walks for use in walk.facts.uses}

    def wanted(touch: Touch) -> bool:
        mine = [key for key in followed if key in cells.get(id(touch), ())]
        return (mine[0] if mine else followed[0]) == index

    orbit = found.orbits[index] = Orbit()
    whole = _whole(scene, index)
    advances = [facts.cells[index] for facts in (walk.facts for walk in walks) if index in facts.cells]
    free = whole.high > ORBIT and not any(facts.wraps for facts in advances) and any(f.advances for f in advances)
    if free:
        # A counter that runs through its whole type: every value counts.
        orbit.possible.add(whole)
        for walk in walks:
            run = walk.run((whole,), RUN_WORK)
            _collect(walk, run.touches, (), found, capacity, False, wanted)
            if run.cut:
                _mark_cut(walk, found)
    else:
        search = _Search(scene, paces, (index,), capacity, found, ALONE_WORK, wanted)
        search.start()
        search.go(ORBIT)
        for state, certain in search.states.items():
            if certain and isinstance(state[0], int):
                orbit.certain.add(state[0])
            orbit.possible.add(state[0])
        orbit.complete = search.complete
        search.look()
    return {key for walk in walks for key in walk.state}


@dataclass(slots=True)
class _Search:
    """Reachability over the values of some integers."""

    scene: Scene
    paces: list[Pace]
    tracked: tuple[Key, ...]
    capacity: int
    found: Study
    work: int
    wanted: Callable[[Touch], bool] = lambda touch: True
    states: dict[State, bool] = field(default_factory=dict)
    parents: dict[State, tuple[State | None, Trace]] = field(default_factory=dict)
    sure: deque[State] = field(default_factory=deque)
    doubtful: deque[State] = field(default_factory=deque)
    cut: bool = False
    stop_at: set[Spot] = field(default_factory=set)
    pairs: set[Pair] = field(default_factory=set)

    @property
    def complete(self) -> bool:
        """Whether every state was looked at, along every path."""
        return not (self.cut or self.sure or self.doubtful)

    def start(self) -> None:
        """Put the initial states first in the row."""
        for state, certain in self._starts():
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

    def look(self) -> None:
        """Run the accesses of each function from every state, each function with work of its own to spend."""
        states = sorted(self.states, key=lambda state: not self.states[state])  # certain ones first
        for pace in self.paces:
            if pace.looks is None:
                continue
            left = LOOK_WORK
            for state in states:
                run = pace.looks.run(state, min(RUN_WORK, max(1, left)))
                left -= run.work or 1
                run.work = 0
                _collect(
                    pace.looks, run.touches, (self, state), self.found, self.capacity, self.states[state], self.wanted
                )
                if run.cut or left <= 0:
                    _mark_cut(pace.looks, self.found)
                if left <= 0:
                    break
            if not self.complete:
                _mark_cut(pace.looks, self.found)

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

    def _expand(self, state: State) -> list[State]:
        """Run all functions from a state; gives the states that are certainly reached in one call."""
        certain = self.states[state]
        found: list[State] = []
        for pace in self.paces:
            looks, moves = pace.looks, pace.moves
            if looks is not None and self.stop_at:
                run = self._run(looks, state)
                _collect(looks, run.touches, (self, state), self.found, self.capacity, certain, self.wanted)
            if moves is None:
                continue
            run = self._run(moves, state)
            for pair, sure_pair in run.pairs.items():
                self.found.pairs[pair] = self.found.pairs.get(pair, False) or (sure_pair and certain)
            for values, (sure_end, trace) in run.ends.items():
                end = tuple(
                    new if key in moves.reads else old
                    for key, new, old in zip(self.tracked, values, state, strict=True)
                )
                end = self._reach(end, certain and sure_end, state, trace)
                if self.states[end] and certain and sure_end:
                    found.append(end)
        return found

    def _run(self, walk: Walk, state: State) -> Run:
        run = walk.run(state, min(RUN_WORK, max(1, self.work)))
        self.work -= run.work or 1
        run.work = 0  # a remembered run costs nothing more
        self.cut = self.cut or run.cut
        return run

    def settled(self) -> bool:
        """Whether all that was searched for is found."""
        if not self.stop_at and not self.pairs:
            return False
        known = (self.found.accesses.get(spot) for spot in self.stop_at)
        return all(access is not None and access.bad is not None for access in known) and all(
            self.found.pairs.get(pair) for pair in self.pairs
        )

    def _starts(self) -> list[tuple[State, bool]]:
        found: list[State] = [()]
        certain = True
        for key in self.tracked:
            values = self.scene.initial(key)
            if values is None:
                values = (0,)
                certain = False
            found = [(*state, value) for state in found for value in values]
        return [(state, certain) for state in found]

    def _reach(self, end: State, certain: bool, state: State, trace: Trace) -> State:
        if any(isinstance(value, Range) for value in end):
            end = tuple(
                _whole(self.scene, key) if isinstance(value, Range) else value
                for key, value in zip(self.tracked, end, strict=True)
            )
            certain = False
        known = self.states.get(end)
        if known is None or (certain and not known):
            self.states[end] = certain
            self.parents[end] = (state, trace)
            (self.sure if certain else self.doubtful).append(end)
        return end

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


def _mark_cut(walk: Walk, found: Study) -> None:
    for touch in walk.touched:
        access = found.accesses.get((touch.position, touch.kind, touch.function, touch.storage))
        if access is not None:
            access.cut = True


def _collect(
    walk: Walk,
    touches: Mapping[int, Any],
    at: tuple[Any, ...],
    found: Study,
    capacity: int,
    certain: bool,
    wanted: Callable[[Touch], bool],
) -> None:
    """Add what a run saw to the accesses; ``at`` is the search and the state that the run started from."""
    for number, seen in touches.items():
        touch = walk.touched[number]
        if not wanted(touch):
            continue
        spot = (touch.position, touch.kind, touch.function, touch.storage)
        access = found.accesses.get(spot)
        if access is None:
            access = found.accesses[spot] = Access(touch)
        for value, (trace, subscript) in seen.certain.items():
            known = access.certain if certain else access.doubtful
            if value in known and (access.bad is not None or not certain):
                continue
            known.add(value)
            if not out_of_range(value, capacity, touch.kind):
                continue
            if certain and access.bad is None:
                search, state = at
                access.bad = (subscript, search.witness(state, trace))
            elif not certain and access.maybe is None:
                access.maybe = subscript
        for value, (_, subscript) in seen.doubtful.items():
            if value in access.doubtful:
                continue
            access.doubtful.add(value)
            if access.maybe is None and out_of_range(value, capacity, touch.kind):
                access.maybe = subscript if subscript is not None else Range(-(1 << 31), (1 << 31) - 1, False)


# ---------------------------------------------------------------------------------------------------------- together


def _together(
    scene: Scene,
    arrays: frozenset[Key],
    capacity: int,
    indices: list[Key],
    state: set[Key],
    found: Study,
    suspects: list[Access],
    pairs: set[Pair],
) -> None:
    """Follow the indices with the state that they depend on, and settle the suspects if that comes to an end."""
    tracked = list(dict.fromkeys([*indices, *sorted(key for key in state if scene.initial(key) is not None)]))
    paces: list[Pace] = []
    for _ in range(3):
        tracked = [key for key in tracked if scene.types.get(key) is not None]
        if len(tracked) > TOGETHER:
            return
        paces = _paces(scene, arrays, capacity, tracked, {})
        more = {key for pace in paces for walk in pace.walks for key in walk.state if scene.initial(key) is not None}
        more -= set(tracked)
        if not more:
            break
        tracked = [*tracked, *sorted(more)]
    fresh = Study()
    search = _Search(scene, paces, tuple(tracked), capacity, fresh, TOGETHER_WORK)
    search.stop_at = {
        (access.touch.position, access.touch.kind, access.touch.function, access.touch.storage) for access in suspects
    }
    search.pairs = pairs
    search.start()
    search.go(NEAR)
    if not search.complete and not search.settled():
        search.wander(12, 4 * capacity + 60)
    if not search.settled():
        search.go(STATES)
    for pair, certain in fresh.pairs.items():
        if certain:
            found.pairs[pair] = True
    for number, index in enumerate(search.tracked):
        orbit = found.orbits.get(index)
        if orbit is None:
            continue
        for values, certain in search.states.items():
            if certain and isinstance(values[number], int):
                orbit.certain.add(values[number])
    for access in suspects:
        touch = access.touch
        other = fresh.accesses.get((touch.position, touch.kind, touch.function, touch.storage))
        if other is None:
            if search.complete:
                access.doubtful.clear()
                access.maybe = None
                access.settled = True
            continue
        if other.bad is not None:
            access.bad = other.bad
            access.certain |= other.certain
        elif search.complete:
            access.certain, access.doubtful = other.certain, other.doubtful
            access.maybe = other.maybe
            access.settled = True
