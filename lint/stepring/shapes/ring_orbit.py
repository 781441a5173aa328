"""The values that a ring's indices really take, and the slots that are accessed with them.

The one idea: start from the initial values, run every function that moves an index from every value reached so far,
until nothing new comes (explicit-state reachability, as in model checking). First each index is followed alone and all
else counts as unknown; that bounds every subscript from above. Where a subscript then seems to leave the array and the
way there depends on other state (a count, a flag), the indices are followed together with that state, which settles
whether it is real. What is reached along certain paths only is a fact with a witness; what is not reached at all,
although every doubtful path was taken, cannot happen.
"""

from collections.abc import Collection, Mapping, Sequence

from stepring.meaning.fold import fold
from stepring.shapes.ring_arith import Range
from stepring.shapes.ring_facts import FlatFacts
from stepring.shapes.ring_flat import Set, Spoil
from stepring.shapes.ring_keys import Key
from stepring.shapes.ring_search import (
    RUN_WORK,
    Access,
    Orbit,
    Scene,
    Search,
    Spot,
    Study,
    collect,
    out_of_range,
)
from stepring.shapes.steps import Pair, Walk

STATES = 20_000
"""Combinations of values that are looked at when several integers are followed together."""
NEAR = 2_000
"""So many of them are looked at in order of distance, before random sequences of calls are tried."""
ORBIT = 4_200
"""Values of one index that are looked at."""
TOGETHER = 8
"""Up to this many integers are followed together."""
# Work is counted in operations of the code that is run; a thousand take some milliseconds.
ALONE_WORK = 50_000
LOOK_WORK = 30_000
TOGETHER_WORK = 80_000

def study(
    scene: Scene,
    storage: Key,
    capacity: int,
    groups: Sequence[Sequence[Key]],
    counts: Sequence[Key],
    strides: Mapping[Key, int],
) -> Study:
    """Find out which slots of ``storage`` are accessed and which values the indices take.

    ``groups`` are the indices, each with the integers that it is stepped by way of. ``counts`` count occupied slots;
    they are followed to bound them, but they are no indices. ``strides`` are what one advance adds to each index that
    wraps.
    """
    followed = [*groups, *((count,) for count in counts)]
    keys = list(dict.fromkeys(key for group in followed for key in group))
    found, state = _first(scene, storage, capacity, followed, None)
    if _is_clean(found, strides, capacity):
        return found
    if not all(entered for _, entered in scene.homes(frozenset(keys), frozenset((storage,)))):
        suspects = {spot for spot, access in found.accesses.items() if not _fits(access, capacity)}
        better, state = _first(scene, storage, capacity, followed, suspects)
        _merge(found, better, capacity)
    unsettled = [access for access in found.accesses.values() if access.bad is None and not _fits(access, capacity)]
    pairs = {
        pair
        for pair, certain in found.pairs.items()
        if not certain and pair[0] in strides and is_odd(pair, strides[pair[0]], capacity)
    }
    if unsettled or pairs:
        _together(scene, storage, capacity, keys, state - set(keys), found, unsettled, pairs)
    return found


def _merge(found: Study, better: Study, capacity: int) -> None:
    """Add what running the functions that can be entered has shown."""
    for spot, access in better.accesses.items():
        known = found.accesses.get(spot)
        if known is None or access.bad is not None or _fits(access, capacity):
            found.accesses[spot] = access
    for pair, certain in better.pairs.items():
        found.pairs[pair] = found.pairs.get(pair, False) or certain
    for key, orbit in better.orbits.items():
        orbit.certain |= found.orbits[key].certain
        if orbit.complete or not found.orbits[key].complete:
            found.orbits[key] = orbit
        else:
            found.orbits[key].certain |= orbit.certain


def _first(
    scene: Scene, storage: Key, capacity: int, followed: Sequence[Sequence[Key]], suspects: set[Spot] | None
) -> tuple[Study, set[Key]]:
    """Each index followed alone, then each access; and the state that matters besides.

    By the functions in whose text things stand; or, for some ``suspects`` only, by those that can be entered.
    """
    home = suspects is None
    searches = _orbits(scene, capacity, followed, home)
    found = Study()
    for search in searches:
        for pair, certain in search.pairs_seen.items():
            found.pairs[pair] = found.pairs.get(pair, False) or certain
        for key in search.tracked:
            if key not in found.orbits:
                found.orbits[key] = search.orbit(key)
    ranges = _bounds(found.orbits)
    state = {key for search in searches for walk in search.movers for key in walk.state}
    for facts, entered in _sources(scene, frozenset(), frozenset((storage,)), home):
        state |= _look(scene, facts, entered, storage, suspects, searches, ranges, found)
    return found, state


def _sources(
    scene: Scene, keys: frozenset[Key], arrays: frozenset[Key], home: bool
) -> Sequence[tuple[FlatFacts, bool]]:
    return scene.homes(keys, arrays) if home else [(facts, True) for facts in scene.events(keys, arrays)]


def _is_clean(found: Study, strides: Mapping[Key, int], capacity: int) -> bool:
    """Whether every subscript fits and every advance leads to the next slot, even along doubtful paths."""
    return all(_fits(access, capacity) for access in found.accesses.values()) and not any(
        pair[0] in strides and is_odd(pair, strides[pair[0]], capacity) for pair in found.pairs
    )


def is_odd(pair: Pair, stride: int, capacity: int) -> bool:
    """Whether an advance does not lead to the slot that follows."""
    _, _, before, after, by = pair
    return (before + (by or stride) - after) % capacity != 0


def _fits(access: Access, capacity: int) -> bool:
    return not access.cut and not any(
        out_of_range(value, capacity, access.touch) for value in access.certain | access.doubtful
    )


# ---------------------------------------------------------------------------------------------------------- orbits


def _orbits(scene: Scene, capacity: int, groups: Sequence[Sequence[Key]], home: bool) -> list[Search]:
    """The values of each index, followed alone; twice where the bounds of the others may help."""
    searches = [_alone(scene, capacity, tuple(group), {}, home) for group in groups]
    for _ in range(2):
        ranges = _bounds({key: search.orbit(key) for search in searches for key in search.tracked})
        loose = [number for number, search in enumerate(searches) if search.loose or not search.complete]
        if not ranges or not loose:
            break
        for number in loose:
            others = {key: known for key, known in ranges.items() if key not in searches[number].tracked}
            searches[number] = _alone(scene, capacity, searches[number].tracked, others, home)
    return searches


def _bounds(orbits: Mapping[Key, Orbit]) -> dict[Key, Range]:
    """Bounds of all orbits that were searched to the end."""
    found = {}
    for key, orbit in orbits.items():
        if orbit.complete and orbit.possible:
            lows = [value.low if isinstance(value, Range) else int(value) for value in orbit.possible]
            highs = [value.high if isinstance(value, Range) else int(value) for value in orbit.possible]
            found[key] = Range(min(lows), max(highs), False)
    return found


def _alone(
    scene: Scene, capacity: int, tracked: tuple[Key, ...], ranges: Mapping[Key, Range], home: bool
) -> Search:
    mark = (tracked, capacity, frozenset(ranges.items()), home)
    known = scene.searches.get(mark)
    if known is not None:
        return known
    search = scene.searches[mark] = Search(scene, tracked, capacity, ALONE_WORK)
    search.movers = _movers(scene, tracked, capacity, ranges, home)
    if home:
        for facts, _ in scene.homes(frozenset(tracked), frozenset()):
            for key, values in (_resets(scene, facts, tracked) or {}).items():
                search.resets.update((tracked.index(key), value) for value in values)
    advances = [walk.facts.cells[tracked[0]] for walk in search.movers if tracked[0] in walk.facts.cells]
    whole = scene.whole(tracked[0])
    if len(tracked) == 1 and whole.high > ORBIT and advances and not any(facts.wraps for facts in advances):
        # A counter that runs through its whole type: every value counts.
        search.states[whole,] = False
        search.parents[whole,] = (None, None)
        return search
    search.start()
    search.go(ORBIT)
    return search


def _movers(
    scene: Scene, tracked: tuple[Key, ...], capacity: int, ranges: Mapping[Key, Range], home: bool
) -> list[Walk]:
    """The functions that store into the followed integers, ready to run."""
    wholes = {key: scene.whole(key) for key in tracked}
    found = []
    for facts, entered in _sources(scene, frozenset(tracked), frozenset(), home):
        if home and _resets(scene, facts, tracked) is not None:
            continue
        walk = Walk(facts, tracked, frozenset(), True, capacity, wholes, ranges, scene.writes, scene.types)
        walk.sure = entered
        if not walk.idle:
            found.append(walk)
    return found


def _resets(scene: Scene, facts: FlatFacts, tracked: tuple[Key, ...]) -> dict[Key, set[int]] | None:
    """The constants that a function's own text stores into the followed integers, if it does nothing else to them.

    It need not be run then: it can lead from every state to those constants.
    """
    found: dict[Key, set[int]] = {}
    table = facts.table()
    for key in tracked:
        for number, op in (*table.stores.get(key, ()), *table.spoils):
            filled = isinstance(op, Spoil) and (key in op.keys or (key[0] == "member" and key[1] in op.structs))
            if isinstance(op, Spoil) and not filled:
                continue
            deep = len(facts.flat.blocks[number].inside)
            place: Key = key if not isinstance(op, Spoil) or key in op.keys else ("struct", key[1])
            if deep > scene.depths.get((place, op.position), deep):
                continue
            value = op.value if isinstance(op, Spoil) else fold(op.value) if isinstance(op, Set) else None
            if value is None:
                return None
            found.setdefault(key, set()).add(value)
    return found


# ---------------------------------------------------------------------------------------------------------- accesses


def _look(
    scene: Scene,
    facts: FlatFacts,
    entered: bool,
    storage: Key,
    suspects: set[Spot] | None,
    searches: Sequence[Search],
    ranges: Mapping[Key, Range],
    found: Study,
) -> set[Key]:
    """Look at the accesses of one function, block by block, while the index that each is made of is followed.

    Gives the state that the accesses depend on besides.
    """
    cells = {id(use.touch): use.cells for use in facts.uses}
    parts: dict[tuple[int, int], list[int]] = {}
    for block, touch in facts.table().touches:
        if touch.storage != storage:
            continue
        if suspects is None:
            deep = len(facts.flat.blocks[block].inside)
            looked = deep <= scene.depths.get((("array", *storage), touch.position), deep)
        else:
            looked = (touch.position, touch.kind, touch.function, touch.storage) in suspects
        if looked:
            mine = [
                number
                for number, search in enumerate(searches)
                if any(key in cells.get(id(touch), ()) for key in search.tracked)
            ]
            parts.setdefault((block, mine[0] if mine else 0), []).append(id(touch))
    state: set[Key] = set()
    for (_, number), touches in parts.items():
        search = searches[number]
        wholes = {key: scene.whole(key) for key in search.tracked}
        others = {key: known for key, known in ranges.items() if key not in search.tracked}
        walk = Walk(
            facts, search.tracked, frozenset(touches), False, search.capacity, wholes, others, scene.writes, scene.types
        )
        walk.sure = entered
        state |= walk.state
        _see(walk, search, found)
    return state


def _see(walk: Walk, search: Search, found: Study) -> None:
    """Run the accesses of a walk from every state that a search has found, certain ones first."""
    left = min(LOOK_WORK + 8 * search.capacity, found.work)
    found.work -= left
    cut = not search.complete
    for state, certain in sorted(search.states.items(), key=lambda item: not item[1]):
        run = walk.run(state, min(RUN_WORK + 24 * search.capacity, left))
        left -= run.work or 1
        run.work = 0  # a remembered run costs nothing more
        collect(walk, run, search, state, certain and walk.sure, found)
        if run.cut or left <= 0:
            cut = True
            break
    found.work += max(0, left)
    if cut:
        for touch in walk.touched:
            access = found.accesses.get((touch.position, touch.kind, touch.function, touch.storage))
            if access is not None:
                access.cut = True


# ---------------------------------------------------------------------------------------------------------- together


def _together(
    scene: Scene,
    storage: Key,
    capacity: int,
    indices: list[Key],
    state: set[Key],
    found: Study,
    suspects: list[Access],
    pairs: set[Pair],
) -> None:
    """Follow the indices with the state that they depend on, and settle the suspects if that comes to an end."""
    spots = {
        (access.touch.position, access.touch.kind, access.touch.function, access.touch.storage): access
        for access in suspects
    }
    tracked = list(dict.fromkeys([*indices, *sorted(key for key in state if scene.initial(key) is not None)]))
    search = Search(scene, (), capacity, TOGETHER_WORK)
    for _ in range(3):
        tracked = [key for key in tracked if scene.types.get(key) is not None]
        if len(tracked) > TOGETHER:
            return
        search = Search(scene, tuple(tracked), capacity, TOGETHER_WORK)
        search.movers = _movers(scene, search.tracked, capacity, {}, False)
        search.lookers = _lookers(scene, search.tracked, storage, capacity, set(spots))
        more = {
            key
            for walk in (*search.movers, *search.lookers)
            for key in walk.state
            if scene.initial(key) is not None and key not in tracked
        }
        if not more:
            break
        tracked = [*tracked, *sorted(more)]
    search.wanted_spots = set(spots)
    search.wanted_pairs = pairs
    search.start()
    search.go(NEAR)
    if not search.complete and not search.settled():
        search.wander(12, 4 * capacity + 60)
    if not search.settled():
        search.go(STATES)
    for pair, certain in search.pairs_seen.items():
        if certain:
            found.pairs[pair] = True
    for key in indices:
        if key in search.tracked and key in found.orbits:
            found.orbits[key].certain |= search.orbit(key).certain
    for spot, access in spots.items():
        other = search.seen.accesses.get(spot)
        if other is not None and other.bad is not None:
            access.bad = other.bad
            access.certain |= other.certain
        elif search.complete:
            access.certain = other.certain if other is not None else set()
            access.doubtful = other.doubtful if other is not None else set()
            access.maybe = other.maybe if other is not None else None
            access.settled = True
            found.joined |= set(search.tracked)


def _lookers(
    scene: Scene, tracked: tuple[Key, ...], storage: Key, capacity: int, spots: Collection[Spot]
) -> list[Walk]:
    """The functions that make the suspect accesses, ready to run."""
    wholes = {key: scene.whole(key) for key in tracked}
    found = []
    for facts in scene.events(frozenset(), frozenset((storage,))):
        touches = frozenset(
            id(touch)
            for _, touch in facts.table().touches
            if (touch.position, touch.kind, touch.function, touch.storage) in spots
        )
        if touches:
            found.append(
                Walk(facts, tracked, touches, False, capacity, wholes, {}, scene.writes, scene.types)
            )
    return found
