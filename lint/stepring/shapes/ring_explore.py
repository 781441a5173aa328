"""A ring explored by its own operations: short runs from its start, each compared with an ideal queue.

States are searched breadth first, so that the first run that shows a disagreement is a shortest one. A state is what
the ring's functions can see, with elements known by their order instead of their bytes. An operation is only called
where it is due: one that does not look what the ring holds is called only where the ideal has an element, or room; so
is one that only other functions call. What is found is run again from nothing as a ``Witness`` before it is believed.
"""

from collections import deque
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from stepring.meaning.types import IntType, TypedUnit
from stepring.paths.interpreter import run as run_program
from stepring.paths.replay import replay
from stepring.paths.types import Event
from stepring.paths.witness import Ending, OutsideValue, Reference, StartValue, Value, Witness, WitnessCall
from stepring.places import Origin, Position
from stepring.shapes.ring_calls import Effect, Purse, Way, about_storage, below, call
from stepring.shapes.ring_ideal import Content, after_put, is_slice, linear
from stepring.shapes.ring_types import Disagreement, Doubt
from stepring.shapes.ring_uses import (
    SMALL,
    Probe,
    Use,
    designed,
    drained,
    occupancy_tests,
    others,
    perform,
    puts,
    takes,
    ways_taken,
)
from stepring.shapes.ring_world import GIVEN, STORAGE, TAKEN, Group, World, group_of, world_of
from stepring.shapes.types import OrbitStep, Ring

BUDGET = 1_200_000
"""Interpreter steps for one ring."""
SHOWN = 12
TRIES = 2
"""How many witnesses of one kind may turn out not to hold."""
NEAR_END = 3
Placer = Callable[[Position], Origin]
Odd = Mapping[tuple[str, Any, Any], int]
"""Steps of indices that are wrong, as (shown name, before, after), with what should come after."""


@dataclass(frozen=True, slots=True)
class Made:
    """One call of a run, with the indices' values after it."""

    call: WitnessCall
    name: str
    values: tuple[Any, ...]
    result: str = ""


@dataclass(frozen=True, slots=True)
class Suspect:
    """A call that left an index where no plain put or take leaves it: if harm comes of it, this call is to blame."""

    position: Position
    function: str
    what: str


@dataclass(frozen=True, slots=True)
class State:
    """A memory with the run that leads to it, what the ideal queue holds then, and the next element to be given."""

    saved: Any
    held: Content
    run: tuple[Made, ...]
    token: int
    suspect: Suspect | None = None


@dataclass(slots=True, eq=False)
class Search:
    """One exploration under way. ``found`` keeps the first disagreement of each kind and function."""

    probe: Probe
    origin: Placer
    base: Witness
    put: Use | None = None
    take: Use | None = None
    uses: list[Use] = field(default_factory=list)
    room: int = 0
    overflow: bool = False
    ranges: tuple[tuple[int, int] | None, ...] = ()
    odd: Suspect | None = None
    found: dict[tuple[Doubt, str], Disagreement] = field(default_factory=dict)
    failed: dict[tuple[Doubt, str], int] = field(default_factory=dict)

    @property
    def world(self) -> World:
        return self.probe.world

    @property
    def spent(self) -> bool:
        return self.probe.purse.left <= 0


@dataclass(frozen=True, slots=True)
class Exploration:
    """What came of exploring a ring.

    ``compared``: its elements were put in and taken out, so that it means something that nothing was found.
    """

    disagreements: tuple[Disagreement, ...]
    compared: bool


def explore(ring: Ring, group: Group, origin: Placer, *, budget: int = BUDGET) -> Exploration:
    """The disagreements of a ring with the ideal queue, each with a witness that was run again.

    ``group`` is the program (``ring_world.group_of``), ``origin`` gives a position's original place, ``budget`` bounds
    the interpreter steps.
    """
    purse = Purse(budget)
    compared = False
    for slots in _sizes(ring):
        world = world_of(group, ring, slots)
        if world is None:
            continue
        found = _explored(world, purse, origin)
        compared = compared or found.compared
        if found.disagreements or purse.left <= 0:
            return Exploration(found.disagreements, compared)
    return Exploration((), compared)


def with_runs(rings: Sequence[Ring], units: Sequence[TypedUnit], origin: Placer) -> tuple[Ring, ...]:
    """The rings of one program with what running their operations showed."""
    if not rings:
        return ()
    group = group_of(units)
    found: list[Ring] = []
    for ring in rings:
        done = explore(ring, group, origin)
        found.append(replace(ring, disagreements=done.disagreements, explored=done.compared))
    return tuple(found)


def _sizes(ring: Ring) -> tuple[int, ...]:
    """How many slots the ring is tried with."""
    if ring.capacity is not None:
        return (ring.capacity,) if 2 <= ring.capacity <= 1024 else ()
    masked = (ring.bound is not None and ring.bound.plus == 1) or ring.wrap == "mask"
    masked = masked or any(access.reduction == "mask" for access in ring.accesses)
    return (4, 2) if masked or ring.wrap == "free-running" else (4, 3)


def _explored(world: World, purse: Purse, origin: Placer) -> Exploration:
    probe = Probe(world, purse, world.save())
    base = _set_up(probe)
    search = Search(probe, origin, base)
    _classify(search)
    if search.put is not None and search.take is not None:
        _search(search, State(probe.start, (), (), 0))
        _near_overflow(search)
    if not search.found:
        _alone(search)
    compared = search.put is not None and search.take is not None and bool(search.uses)
    return Exploration(tuple(search.found.values()), compared)


def _set_up(probe: Probe) -> Witness:
    """Let the ring's own function for setting up do so, if it has one; the base witness with that call."""
    world = probe.world
    base = world.base
    pointers = [item for item in base.start if item.value == Reference(STORAGE)]
    if not pointers:
        return base
    for operation in world.operations:
        if not operation.has("buffer") or not operation.has("ring"):
            continue
        probe.back()
        for start in pointers:
            world.memory.write(start.object + start.path, 0)
        arguments = tuple(_set_up_argument(world, item.role, item.to, item.path) for item in operation.parameters)
        made = WitnessCall(operation.function.identity, arguments)
        done = _runs(world, made)
        if done is not None and _points(world, pointers):
            probe.start = world.save()
            return replace(base, calls=(done,))
    probe.back()
    return base


def _set_up_argument(world: World, role: str, to: str, path: str) -> Value:
    match role:
        case "ring":
            return Reference(to, 0, path)
        case "buffer":
            return Reference(STORAGE)
        case "thing":
            return Reference(path)
        case "null":
            return None
    return world.slots


def _runs(world: World, made: WitnessCall) -> WitnessCall | None:
    """The call with what it asks from outside (always 0); None if it does not return."""
    asked: list[OutsideValue] = []

    def external(name: str, given: Sequence[Any]) -> int:
        if name in world.group.wanted:
            asked.append(OutsideValue(name, 0))
        return 0

    values = [world.pointer(item) for item in made.arguments]
    outcome = run_program(world.group.program, made.function, values, external, steps=5000, memory=world.memory)
    return replace(made, outside=tuple(asked)) if outcome.kind == "returned" else None


def _points(world: World, pointers: Sequence[Any]) -> bool:
    """Whether the ring is set up as it is to be: its pointer at the storage, its bound the number of slots."""
    for start in world.base.start:
        if start.object in (GIVEN, TAKEN):
            continue
        value = world.memory.read(start.object + start.path)
        if start.value == Reference(STORAGE):
            if not (isinstance(value, tuple) and value[0] is world.storage and value[1] == 0):
                return False
        elif value != start.value:
            return False
    return True


# --------------------------------------------------------------------------------------------------- classification


def _classify(search: Search) -> None:
    """Find out what each operation does; report what a put does on a full ring if that is wrong."""
    probe = search.probe
    found = puts(probe)
    probe.uses.extend(found)
    for put in found:
        for take in takes(probe, put):
            probe.uses.append(take)
        if any(use.kind == "take" for use in probe.uses):
            search.put = put
            break
    search.take = next((use for use in probe.uses if use.kind == "take"), None)
    if search.put is None or search.take is None:
        for put in found:
            _inverted(search, put)
        return
    search.take = _checked_take(search, search.take)
    _ranges(search)
    kept: list[Use] = []
    spoilt: list[Use] = []
    for put in found:
        if put.operation.helper and kept:
            kept.append(replace(put, room=kept[0].room))  # whoever calls it looks for it
            continue
        known = designed(probe, put, search.take)
        if known is None:
            spoilt.append(put)
            continue
        use, held, given = known
        use = _checked_put(search, use, held, given)
        kept.append(use)
    if not kept:
        search.put = None
        return
    search.room = max(use.room for use in kept)
    if search.room < search.world.slots - 1:
        if not search.found:
            search.put = None
        return
    search.put = next((use for use in kept if use.operation == search.put.operation), kept[0])
    for use in spoilt:
        # Not even its first element comes out, though another put's do.
        _put(search, State(probe.start, (), (), 0), use, deep=True)
    more = [use for use in probe.uses if use.kind == "take"]
    more.extend(others(probe, search.put, search.take))
    more = [_checked_take(search, use) if use.kind in ("take", "drop") else use for use in more]
    search.uses = [*kept, *(_told(search, use) for use in more)]


def _inverted(search: Search, put: Use) -> None:
    """Report what does nothing while elements are stored and moves an index that puts leave alone when none is."""
    probe, world = search.probe, search.world
    for operation in world.operations:
        plain = not (operation.helper or operation.has("value") or operation.has("length"))
        if not plain or operation == put.operation or not occupancy_tests(probe, operation):
            continue
        use = Use(operation, "take", Way("zero", operation.has("buffer")))
        probe.back()
        effect = call(world, operation, use.way, probe.purse)
        if not effect.returned or effect.before == effect.after or effect.stored:
            continue
        probe.back()
        moved = False
        quiet = True
        for number in range(min(3, world.slots - 1)):
            given = call(world, put.operation, put.way, probe.purse, token=number)
            pairs = zip(given.before, given.after, effect.before, effect.after, strict=True)
            moved = moved or any(old != new and start != end for old, new, start, end in pairs)
            state = world.save()
            quiet = quiet and call(world, operation, use.way, probe.purse).refused
            world.load(state)
        if quiet and not moved:
            what = f"{use.name} does nothing while elements are stored, and on an empty ring {_moved(search, effect)}"
            _index_report(search, State(probe.start, (), (), 0), use, effect, "data", what)


def _ranges(search: Search) -> None:
    """The range that each index keeps in plain use, twice round the ring. None for free-running ones.

    What an index holds counts only if the next put and take go well.
    """
    world, put, take = search.world, search.put, search.take
    assert put is not None and take is not None
    search.probe.back()
    seen = [world.values()]
    latest: list[tuple[Any, ...]] = []
    turns = 0
    for number in range(2 * world.slots + 1):
        start = world.save()
        given = call(world, put.operation, put.way, search.probe.purse, token=number)
        between = world.save()
        taken = perform(world, take, search.probe.purse)
        _walks(search, put, given, start, number)
        _walks(search, take, taken, between, number)
        value = given.stored[0][1] if given.stored else world.tokens[number % len(world.tokens)]
        if taken.outputs.get(take.channel, ())[:1] != (value,):
            break
        seen.extend(latest)
        latest = [given.after, taken.after]
        turns += 1
    whole_way = turns == 2 * world.slots + 1
    free = [whole_way and _free(old, new, turns - 1) for old, new in zip(seen[0], seen[-1], strict=True)]
    ranges: list[tuple[int, int] | None] = []
    for at, place in enumerate(world.places):
        values = [row[at] for row in seen]
        whole = isinstance(world.readers[at][2], IntType) and all(isinstance(value, int) for value in values)
        if free[at] or not whole:
            ranges.append(None)
        else:
            most = world.slots if place[3] == "count" else world.slots - 1
            ranges.append((min(0, *values), max(most, *values)))
    search.ranges = tuple(ranges)


def _walks(search: Search, use: Use, effect: Effect, before: Any, token: int) -> None:
    """Note the first call that moves an index to another slot than the next one."""
    world = search.world
    for at, (old, new) in enumerate(zip(effect.before, effect.after, strict=True)):
        number = isinstance(world.readers[at][2], IntType) and world.places[at][3] != "count"
        if not number or old == new or not isinstance(old, int) or not isinstance(new, int):
            continue
        if (new - old) % world.slots in (1, world.slots - 1) or search.odd is not None or not 0 <= new < world.slots:
            continue
        after = world.save()
        position, function = _index_store(search, State(before, (), (), token), use, {})
        world.load(after)
        search.odd = Suspect(position, function, f"{use.name} moves {world.places[at][0]} from {old} to {new}")


def _free(old: Any, new: Any, turns: int) -> bool:
    """Whether an index counts on without coming back."""
    return turns > 1 and isinstance(old, int) and isinstance(new, int) and new - old == turns


def _checked_take(search: Search, use: Use) -> Use:
    """Whether a take looks itself if there is something: it says no on the empty ring."""
    probe = search.probe
    probe.back()
    effect = perform(search.world, use, probe.purse, number=1)
    if effect.refused or use.checked:
        return replace(use, checked=True)
    assert search.put is not None
    tests = occupancy_tests(probe, use.operation)
    probe.back()
    events: list[Event] = []
    perform(search.world, use, probe.purse, number=1, watch=events)
    empty = ways_taken(events, tests)
    call(search.world, search.put.operation, search.put.way, probe.purse)
    call(search.world, search.put.operation, search.put.way, probe.purse, token=1)
    events = []
    perform(search.world, use, probe.purse, number=1, watch=events)
    return replace(use, checked=bool(empty - ways_taken(events, tests)) and not use.operation.helper)


def _checked_put(search: Search, put: Use, held: Sequence[Content], given: Content) -> Use:
    """Whether a put looks itself if there is room; if it does and spoils the ring all the same, that is reported."""
    probe, take = search.probe, search.take
    assert take is not None
    if put.design == "overwrites" or (put.design == "refuses" and put.room == len(given)):
        return replace(put, checked=True)
    tests = occupancy_tests(probe, put.operation)
    probe.back()
    before: set[tuple[Position, bool]] = set()
    at: set[tuple[Position, bool]] = set()
    run: list[Made] = []
    state = State(probe.start, (), (), 0)
    for number in range(put.room + 1):
        events: list[Event] = []
        state = State(search.world.save(), given[:number], tuple(run), number)
        effect = call(search.world, put.operation, put.way, probe.purse, token=number, watch=events)
        taken = ways_taken(events, tests)
        if number < put.room:
            before |= taken
            run.extend(_made(search, effect))
        else:
            at = set(taken)
            state = replace(state, suspect=_suspect(search, state, put, effect, {"token": number}))
    notices = bool(at - before) or put.design == "refuses"
    if put.operation.helper or not notices or put.room + 1 >= len(held) or put.room + 1 > search.world.slots + 1:
        return replace(put, checked=False, design="unchecked")
    after = held[put.room + 1]
    if len(after) == 0 or len(after) < put.room:
        lost = put.room + 1 - len(after)
        what = f"{put.name} on a ring that holds {put.room} elements loses {lost} of {put.room + 1}"
        _content(search, state, put, "room", what, given[: put.room + 1], after, token=put.room)
    else:
        due = given[1 : put.room + 1]
        what = f"{put.name} on a ring that holds {put.room} makes it give {_shown(after)} where {_shown(due)} is due"
        doubt: Doubt = "room" if put.room >= search.world.slots - 1 and put.design == "refuses" else "order"
        _content(search, state, put, doubt, what, due, after, token=put.room)
    return replace(put, checked=False, design="unchecked")


def _told(search: Search, use: Use) -> Use:
    """What a result tells, by its values while the ring is filled from its start."""
    probe, put, take = search.probe, search.put, search.take
    assert put is not None and take is not None
    if use.kind == "drop" and use.numbered:
        return _counting(search, use)
    if use.kind != "tell":
        return use
    probe.back()
    results: list[int] = []
    for number in range(search.room + 1):
        state = search.world.save()
        effect = call(search.world, use.operation, use.way, probe.purse)
        search.world.load(state)
        if not effect.returned or not isinstance(effect.outcome.value, int):
            return use
        results.append(effect.outcome.value)
        if number < search.room:
            call(search.world, put.operation, put.way, probe.purse, token=number)
    room = search.room
    levels = range(room + 1)
    shapes: dict[str, list[int]] = {
        "held": list(levels),
        "free": [room - level for level in levels],
        "left": [search.world.slots - level for level in levels],
    }
    for name, values in shapes.items():
        if results == values:
            return replace(use, tells=name)
    flags = [bool(item) for item in results]
    if "empty" in use.name.lower() and flags[0] and not flags[1]:
        return replace(use, tells="empty")
    if "full" in use.name.lower() and not flags[0] and flags[room]:
        return replace(use, tells="full")
    if len(set(results)) <= 2:
        for name, wanted in (
            ("empty", [level == 0 for level in levels]),
            ("some", [level > 0 for level in levels]),
            ("full", [level == room for level in levels]),
            ("not full", [level < room for level in levels]),
        ):
            if flags == wanted:
                return replace(use, tells=name)
    return use


def _counting(search: Search, use: Use) -> Use:
    """Whether a drop's result is the number of elements dropped, as two plain calls show it."""
    put = search.put
    assert put is not None
    for number in (1, 2):
        search.probe.back()
        for token in range(min(3, search.room)):
            call(search.world, put.operation, put.way, search.probe.purse, token=token)
        effect = call(search.world, use.operation, use.way, search.probe.purse, number=number)
        if not effect.returned or effect.outcome.value != number:
            return use
    return replace(use, counts=True)


# ------------------------------------------------------------------------------------------------------------ search


def _search(search: Search, first: State) -> None:
    """Breadth first over the states that the uses lead to; large rings only along plain ways."""
    world = search.world
    if world.slots > SMALL:
        for state in _plain_ways(search, first):
            for after in _look_round(search, state):
                if after.suspect is not None:
                    _look_round(search, after)
            if search.spent:
                return
        return
    seen = {_key(search, first)}
    pending = deque((first,))
    while pending and not search.spent:
        state = pending.popleft()
        for after in _look_round(search, state):
            key = _key(search, after)
            if key not in seen:
                seen.add(key)
                pending.append(after)


def _key(search: Search, state: State) -> Any:
    """What makes two states the same: all the functions can see, with elements as their places in the queue.

    Of an index that counts on for ever only the slot counts: near its overflow a search of its own begins.
    """
    world = search.world
    world.load(state.saved)
    slots = [state.held.index(value) if value in state.held else -1 for value in world.contents()]
    blank: dict[int, list[tuple[int, int]]] = {}
    if world.storage is not None:
        blank[id(world.storage)] = [(world.offset, world.slots * world.element)]
    rest: list[Any] = []
    for (cells, offset, type_), limits, value in zip(world.readers, search.ranges, world.values(), strict=True):
        if limits is None and isinstance(value, int) and isinstance(type_, IntType) and not search.overflow:
            blank.setdefault(id(cells), []).append((offset, type_.width // 8))
            rest.append(value % world.slots)
    for cells in dict.fromkeys((*world.kept, *world.memory.others)):
        if cells.name in (GIVEN, TAKEN):
            continue
        data = bytearray(cells.data)
        for offset, size in blank.get(id(cells), ()):
            data[offset : offset + size] = bytes(size)
        rest.append(bytes(data))
    return tuple(slots), len(state.held), tuple(rest)


def _plain_ways(search: Search, first: State) -> Iterator[State]:
    """States of a large ring: the queue walks round some slots, is filled, emptied in part and filled again."""
    put, take = search.put, search.take
    assert put is not None and take is not None
    slots, room = search.world.slots, search.room
    levels = (0, 1, 2, room - 2, room - 1) if slots <= 64 else (1, room - 1)
    for lead in dict.fromkeys((0, slots - 2) if slots > 100 else (0, slots - 2, slots // 2)):
        state: State | None = first
        for _ in range(lead):
            state = state and _put(search, state, put, deep=False)
            state = state and _take(search, state, take, deep=False)
        for level in range(room):
            if state is not None and level in levels:
                yield state
            state = state and _put(search, state, put, deep=False)
        if state is None:
            continue
        yield state
        for _ in range(room):
            state = state and _take(search, state, take, deep=False)
        if state is not None:
            yield state
    state = first
    for _ in range(2 * slots + 2):
        state = state and _put(search, state, put, deep=False)
        state = state and _take(search, state, take, deep=False)
        if state is None or search.spent:
            return
        if state.suspect is not None:
            yield state


def _look_round(search: Search, state: State) -> list[State]:
    """Try every use from a state; the states that come of it, without those after a disagreement."""
    found: list[State] = []
    for use in search.uses:
        if search.spent or (state.suspect is not None and ("out of range", state.suspect.function) in search.found):
            break
        match use.kind:
            case "put":
                after = _put(search, state, use, deep=True)
                found.extend(() if after is None else (after,))
                if use.bulk:
                    found.extend(_put_many(search, state, use))
            case "take":
                after = _take(search, state, use, deep=True)
                found.extend(() if after is None else (after,))
                if use.bulk:
                    found.extend(_take_many(search, state, use))
            case "drop" | "clear":
                found.extend(_dropped(search, state, use))
            case "look":
                _look(search, state, use)
            case "tell":
                _tell(search, state, use)
    return found


def _call(search: Search, state: State, use: Use, **given: Any) -> Effect:
    search.world.load(state.saved)
    return perform(search.world, use, search.probe.purse, **{"token": state.token, **given})


def _fault(search: Search, state: State, use: Use, effect: Effect, **given: Any) -> bool:
    """Report an access outside the storage; True if the call did not return."""
    if effect.returned:
        return False
    if about_storage(search.world, effect):
        outcome = effect.outcome
        assert outcome.position is not None
        doubt: Doubt = "overflow" if search.overflow else "below zero" if below(effect) else "past end"
        ending = Ending("undefined", search.origin(outcome.position), outcome.fault)
        what = f"{use.name} leaves the storage: {outcome.reason}"
        _report(search, state, effect, doubt, what, outcome.position, outcome.function, ending)
    return True


def _put(search: Search, state: State, use: Use, *, deep: bool) -> State | None:
    if len(state.held) >= search.room and not (use.checked and not use.operation.helper):
        return None
    effect = _call(search, state, use)
    if _fault(search, state, use, effect) or effect.refused or len(effect.stored) > 1:
        return None
    value = effect.stored[0][1] if effect.stored else search.world.tokens[state.token % len(search.world.tokens)]
    whole = (*state.held, value)
    saved = search.world.save()
    if not deep and (use.design != "overwrites" or len(whole) <= search.room):
        return _after(search, state, use, effect, saved, whole, 1)
    assert search.take is not None
    now, _ = drained(search.probe, search.take, _most(search, state, 1))
    if not after_put(now, state.held, (value,), use.design, search.room) or (
        use.design == "refuses" and len(whole) > search.room
    ):
        full = len(state.held) >= search.room
        what = f"after {use.name} the ring gives {_shown(now)} where {_shown(whole)} is due"
        _content(search, state, use, "room" if full else "order", what, whole, now, token=state.token)
        return None
    return _after(search, state, use, effect, saved, now, 1)


def _after(
    search: Search, state: State, use: Use, effect: Effect, saved: Any, held: Content, given: int, **more: Any
) -> State:
    """The state after a call that went well; it is suspect if an index is out of the range that plain use keeps."""
    suspect = state.suspect or _suspect(search, state, use, effect, more)
    return State(saved, held, (*state.run, *_made(search, effect)), state.token + given, suspect)


def _suspect(search: Search, state: State, use: Use, effect: Effect, given: dict[str, Any]) -> Suspect | None:
    """Whether a call leaves an index out of the range that plain use keeps."""
    for at, (limits, value) in enumerate(zip(search.ranges, effect.after, strict=False)):
        if search.world.places[at][3] == "count":
            continue  # too many are counted where there was no room: that is said of the room
        if limits is not None and isinstance(value, int) and not limits[0] <= value <= limits[1]:
            position, function = _index_store(search, state, use, given)
            what = f"{use.name} leaves {search.world.places[at][0]} at {value}"
            return Suspect(position, function, f"{what}; its range is {limits[0]} to {limits[1]}")
    return None


def _most(search: Search, state: State, more: int) -> int:
    """How many elements are drained: all there may be, or as many as there should be if the take does not look."""
    assert search.take is not None
    due = len(state.held) + more
    return due + search.world.slots + 2 if search.take.checked else max(0, due)


def _take(search: Search, state: State, use: Use, *, deep: bool) -> State | None:
    if not state.held:
        if not use.checked or use.operation.helper:
            return None
        effect = _call(search, state, use)
        if _fault(search, state, use, effect) or effect.refused:
            return None
        what = f"{use.name} on an empty ring moves an index: {_moved(search, effect)}"
        _index_report(search, state, use, effect, "data", what)
        return None
    effect = _call(search, state, use)
    if _fault(search, state, use, effect):
        return None
    out = effect.outputs.get(use.channel, ())
    if effect.refused or out[:1] != state.held[:1]:
        due = state.held[0]
        got = "nothing" if effect.refused else str(out[0]) if out else "nothing"
        what = f"{use.name} gives {got} where {due} is due: {len(state.held)} elements are stored"
        doubt: Doubt = "overflow" if search.overflow else "order"
        _output_report(search, state, use, effect, doubt, what, (due,))
        return None
    saved = search.world.save()
    rest = state.held[1:]
    if deep:
        assert search.take is not None
        now, _ = drained(search.probe, search.take, _most(search, state, -1))
        if now != rest:
            what = f"after {use.name} the ring gives {_shown(now)} where {_shown(rest)} is due"
            _content(search, state, use, "order", what, rest, now)
            return None
    return _after(search, state, use, effect, saved, rest, 0)


def _put_many(search: Search, state: State, use: Use) -> Iterator[State]:
    """The states after a put of several elements at once: two, as many as there is room for, one more."""
    free = search.room - len(state.held)
    guarded = not use.checked or use.operation.helper
    for length in dict.fromkeys((2, free, free + 1)):
        if length < 2 or (length > free and guarded):
            continue
        effect = _call(search, state, use, length=length)
        if _fault(search, state, use, effect, length=length) or effect.refused:
            continue
        tokens = [search.world.tokens[(state.token + at) % len(search.world.tokens)] for at in range(length)]
        new = {value for _, value in effect.stored}
        if search.world.parts == 1 and search.world.element <= 4 and not new <= set(tokens):
            continue  # structures' elements are known by one member only
        if search.world.element > 4 or not new <= set(tokens):
            continue
        saved = search.world.save()
        assert search.take is not None
        now, _ = drained(search.probe, search.take, _most(search, state, length))
        added = tuple(tokens)
        if not search.take.checked:
            added = added[: max(0, free)]
        if not after_put(now, state.held, added, use.design, search.room):
            whole = (*state.held, *added[: max(0, free)])
            what = f"after {use.name} of {length} the ring gives {_shown(now)} where {_shown(whole)} is due"
            _content(search, state, use, "order", what, whole, now, length=length)
            continue
        yield _after(search, state, use, effect, saved, now, length, length=length)


def _take_many(search: Search, state: State, use: Use) -> Iterator[State]:
    """The states after a take of several elements at once: two, all, one more."""
    level = len(state.held)
    guarded = not use.checked or use.operation.helper
    for length in dict.fromkeys((2, level, level + 1)):
        if length < 2 or level == 0 or (length > level and guarded):
            continue
        effect = _call(search, state, use, length=length)
        if _fault(search, state, use, effect, length=length) or effect.refused:
            continue
        out = effect.outputs.get(use.channel, ())
        due = state.held[:length]
        if use.channel == "buffer" and out != due and not (length > level and not out):
            what = f"{use.name} of {length} gives {_shown(out)} where {_shown(due)} is due"
            _output_report(search, state, use, effect, "order", what, due, length=length)
            continue
        saved = search.world.save()
        assert search.take is not None
        rest = state.held[length:]
        now, _ = drained(search.probe, search.take, _most(search, state, -length))
        if now != rest:
            what = f"after {use.name} of {length} the ring gives {_shown(now)} where {_shown(rest)} is due"
            _content(search, state, use, "order", what, rest, now, length=length)
            continue
        yield _after(search, state, use, effect, saved, rest, 0, length=length)


def _dropped(search: Search, state: State, use: Use) -> Iterator[State]:
    """The states after a drop of each number of elements, or after a clear."""
    guarded = not use.checked or use.operation.helper
    numbers = [0]
    if use.kind == "drop":
        numbers = [1, len(state.held), len(state.held) + 1] if use.numbered else [1]
    for number in dict.fromkeys(numbers):
        if use.kind == "drop" and (number == 0 or (number > len(state.held) and (guarded or not use.numbered))):
            continue
        if use.kind == "drop" and not state.held and guarded:
            continue
        effect = _call(search, state, use, number=number)
        if _fault(search, state, use, effect) or effect.refused or not effect.returned:
            continue
        saved = search.world.save()
        assert search.take is not None
        rest = () if use.kind == "clear" else state.held[number:]
        now, _ = drained(search.probe, search.take, _most(search, state, 0))
        if not search.take.checked:
            now = now[: len(rest)]
        if now != rest and not (number > len(state.held) and is_slice(now, state.held)):
            told = f"{use.name}({number})" if use.numbered else use.name
            what = f"after {told} the ring gives {_shown(now)} where {_shown(rest)} is due"
            doubt: Doubt = "data" if number > len(state.held) else "order"
            _content(search, state, use, doubt, what, rest, now, number=number)
            continue
        if use.counts and effect.outcome.value != min(number, len(state.held)):
            due = min(number, len(state.held))
            what = f"{use.name}({number}) drops {due} elements and returns {effect.outcome.value}"
            place = _return_place(search, state, use, number=number)
            ending = Ending("result", place, None, "", str(effect.outcome.value), str(due))
            at = _return_position(search, state, use, number=number)
            _report(search, state, effect, "occupancy", what, at, use.name, ending)
            continue
        yield _after(search, state, use, effect, saved, now, 0, number=number)


def _look(search: Search, state: State, use: Use) -> None:
    if not state.held:
        return
    effect = _call(search, state, use)
    if _fault(search, state, use, effect):
        return
    out = effect.outputs.get(use.channel, ())
    if out[:1] != state.held[:1]:
        what = f"{use.name} gives {out[0] if out else 'nothing'} where {state.held[0]} comes next"
        _output_report(search, state, use, effect, "order", what, state.held[:1])


def _tell(search: Search, state: State, use: Use) -> None:
    if not use.tells:
        return
    effect = _call(search, state, use)
    if _fault(search, state, use, effect) or not isinstance(effect.outcome.value, int):
        return
    found, level, room = effect.outcome.value, len(state.held), search.room
    due = {
        "held": level,
        "free": room - level,
        "left": search.world.slots - level,
        "empty": level == 0,
        "some": level > 0,
        "full": level == room,
        "not full": level < room,
    }[use.tells]
    if isinstance(due, bool):
        if bool(found) == due or (use.tells in ("full", "not full") and level > room):
            return
    elif found == due or _part(search, effect, found, due):
        return
    words = {
        "held": f"{level} elements are stored",
        "free": f"there is room for {due} more",
        "left": f"there is room for {due} more",
    }.get(use.tells, f"{level} elements are stored and there is room for {room - level}")
    what = f"{use.name} returns {found}; {words}"
    ending = Ending("result", _return_place(search, state, use), None, "", str(found), str(int(due)))
    position = _return_position(search, state, use)
    _report(search, state, effect, "occupancy", what, position, use.name, ending)


def _part(search: Search, effect: Effect, found: int, true: int) -> bool:
    """Whether a number tells only the part up to the storage's end, or up to an index."""
    values = [value for value in effect.after if isinstance(value, int)]
    return any(linear(found, true, value % search.world.slots, search.world.slots) for value in values)


# ------------------------------------------------------------------------------------------------- one by itself


def _alone(search: Search) -> None:
    """Call each operation that can be entered again and again, as a history's only writer is; look at the slots.

    Nothing is compared with a queue here: what counts are accesses outside the storage, and the steps of an index that
    its own code was found to take wrongly.
    """
    world = search.world
    odd = {
        (index.name.rsplit(".", 1)[-1], before, after): due
        for index in world.ring.indices
        for step in index.steps
        for before, after, due in getattr(step, "odd", ())
    }
    pair = [next((use for use in search.probe.uses if use.kind == kind), None) for kind in ("put", "take")]
    if pair[0] is not None and pair[1] is not None and _again(search, [use for use in pair if use], odd):
        return
    for operation in world.operations:
        if operation.helper or operation.has("length") or operation.has("null") or operation.has("other"):
            continue
        for way in (Way("token"), Way("once", operation.has("buffer"))):
            if _again(search, [Use(operation, "put", way)], odd) or search.spent:
                break
    if not search.found:
        _past_overflow(search, odd)


def _past_overflow(search: Search, odd: Odd) -> None:
    """Again from just before the overflow of an index that counts on and is reduced where it is used."""
    world, base = search.world, search.base
    for at, index in enumerate(world.ring.indices):
        type_ = world.readers[at][2]
        free = any(step.wrap == "free-running" for step in index.steps)
        if not free or not isinstance(type_, IntType) or not 8 < type_.width <= 32:
            continue
        start = type_.high - NEAR_END
        _, name, path, _ = world.places[at]
        search.probe.back()
        world.memory.write(name + path, start)
        kept = tuple(item for item in base.start if (item.object, item.path) != (name, path))
        said = f"{start} elements have been put in before"
        fixed = StartValue(name, path, start)
        search.base = replace(base, start=(*kept, fixed), calls=(), assumed=(*base.assumed, said))
        saved = world.save()
        for use in search.probe.uses:
            if use.kind == "put" and not use.operation.helper:
                _again(search, [use], odd, saved)
        search.base = base


def _again(search: Search, uses: Sequence[Use], odd: Odd, start: Any = None) -> bool:
    """Call some operations in turn until an index has been round, or round its type; True if something was reported."""
    world = search.world
    state = State(search.probe.start if start is None else start, (), (), 0)
    world.load(state.saved)
    turns = len(uses) * max(2 * world.slots + 2, 300 if _narrow(world) else 0)
    slot: int | None = None
    steps: set[int] = set()
    for number in range(turns):
        use = uses[number % len(uses)]
        effect = _call(search, state, use)
        if effect.outcome.kind == "undefined" and about_storage(world, effect):
            return _fault(search, state, use, effect)
        if not effect.returned or (number > 3 and effect.before == effect.after):
            return False
        if _odd_step(search, state, use, effect, odd):
            return True
        if len(effect.stored) == 1 and use.kind == "put":
            now = effect.stored[0][0]
            if slot is not None:
                steps.add((now - slot) % world.slots)
                overflown = [at for at in range(len(effect.before)) if _overflown(state, effect, at)]
                if len(steps) == 2 and number > 2 and overflown:
                    return _other_slot(search, state, use, effect, slot, now)
                if len(steps) > 1:
                    return False
            slot = now
        state = State(world.save(), (), (*state.run, *_made(search, effect)), number + 1)
    return False


def _overflown(state: State, effect: Effect, at: int) -> bool:
    """Whether an index fell from far above in the call before this one, or in this one."""
    values = [effect.before[at], effect.after[at]]
    if state.run and at < len(state.run[-1].values):
        earlier = state.run[-2].values[at] if len(state.run) > 1 else values[0]
        values.insert(0, earlier)
    return all(isinstance(value, int) for value in values) and values[0] - min(values) > 100


def _other_slot(search: Search, state: State, use: Use, effect: Effect, before: int, now: int) -> bool:
    """Report that the row of slots breaks where an index overflows."""
    position, function = _index_store(search, state, use, {})
    where = search.origin(position)
    ending = _index_ending(search, effect, where, "a value whose slot follows")
    what = f"{use.name} stores into slot {now} after slot {before}, once the counter has overflowed"
    _report(search, state, effect, "overflow", what, position, function, ending)
    return True


def _odd_step(search: Search, state: State, use: Use, effect: Effect, odd: Odd) -> bool:
    """Report a step of an index that its code was found to take wrongly, where a call takes it."""
    for at, (place, old, new) in enumerate(zip(search.world.places, effect.before, effect.after, strict=True)):
        due = odd.get((place[0], old, new))
        if due is not None and old != new:
            position, function = _index_store(search, state, use, {})
            _, name, path, _ = search.world.places[at]
            ending = Ending("value", search.origin(position), None, name + path, str(new), str(due))
            what = f"{use.name} moves {place[0]} from {old} to {new}, where {due} comes next"
            _report(search, state, effect, "slots", what, position, function, ending)
            return True
    return False


def _narrow(world: World) -> bool:
    """Whether some index is of one byte, so that all its values are soon gone through."""
    return any(isinstance(reader[2], IntType) and reader[2].width <= 8 for reader in world.readers)


# ------------------------------------------------------------------------------------------------------ near overflow


def _near_overflow(search: Search) -> None:
    """Search again from counters just before their overflow, if the ring's counters never come back otherwise."""
    world, put, take = search.world, search.put, search.take
    if search.found or search.spent or put is None or take is None:
        return
    turns = 2 * world.slots + 1
    search.probe.back()
    before = world.values()
    for number in range(turns):
        call(world, put.operation, put.way, search.probe.purse, token=number)
        perform(world, take, search.probe.purse)
    after = world.values()
    free: list[tuple[int, IntType]] = []
    for at, (old, new) in enumerate(zip(before, after, strict=True)):
        type_ = world.readers[at][2]
        if isinstance(old, int) and isinstance(new, int) and isinstance(type_, IntType):
            if new - old == turns and type_.width <= 32:
                free.append((at, type_))
    if len(free) != 2 or free[0][1].high != free[1][1].high:
        return
    start = free[0][1].high - NEAR_END
    if world.slots & (world.slots - 1) and world.ring.capacity is None:
        return
    search.probe.back()
    extra = []
    for at, _ in free:
        _, name, path, _ = world.places[at]
        world.memory.write(name + path, start)
        extra.append((name, path))
    # The values are reached by as many puts and takes; the ring's own set-up call would undo them.
    fixed = tuple(StartValue(name, path, start) for name, path in extra)
    kept = tuple(item for item in search.base.start if (item.object, item.path) not in extra)
    said = f"{start} elements have been put in and taken out before"
    search.base = replace(search.base, start=(*kept, *fixed), calls=(), assumed=(*search.base.assumed, said))
    search.overflow = True
    _search(search, State(world.save(), (), (), 0))


# ----------------------------------------------------------------------------------------------------------- reporting


def _made(search: Search, effect: Effect) -> tuple[Made, ...]:
    """The call (and the one before it) as part of a run."""
    name = search.world.group.functions[effect.call.function].name
    made = Made(effect.call, name, effect.after, _result_text(effect))
    return (made,) if effect.prior is None else (*_made(search, effect.prior), made)


def _shown(held: Sequence[int]) -> str:
    if not held:
        return "nothing"
    shown = ", ".join("no element" if value < 0 else str(value) for value in held[:8])
    return shown + (f" and {len(held) - 8} more" if len(held) > 8 else "")


def _moved(search: Search, effect: Effect) -> str:
    parts = [
        f"{place[0]} goes from {old} to {new}"
        for place, old, new in zip(search.world.places, effect.before, effect.after, strict=True)
        if old != new
    ]
    return " and ".join(parts) or "a slot is cleared"


def _events(search: Search, state: State, use: Use, given: dict[str, Any]) -> list[Event]:
    events: list[Event] = []
    search.world.load(state.saved)
    given = {"token": state.token, **given}
    perform(search.world, use, search.probe.purse, watch=events, **given)
    return events


def _index_store(search: Search, state: State, use: Use, given: dict[str, Any]) -> tuple[Position, str]:
    """The place of the last store into an index, and its function; else the function's own place."""
    names = {place[0] for place in search.world.places}
    for event in reversed(_events(search, state, use, given)):
        if event.kind == "store" and event.text.replace("->", ".").rsplit(".", 1)[-1] in names:
            return event.position, event.function
    return use.operation.function.position, use.name


def _return_position(search: Search, state: State, use: Use, **given: Any) -> Position:
    for event in reversed(_events(search, state, use, given)):
        if event.kind == "return" and event.function == use.name:
            return event.position
    return use.operation.function.position


def _return_place(search: Search, state: State, use: Use, **given: Any) -> Origin:
    return search.origin(_return_position(search, state, use, **given))


def _output_report(
    search: Search, state: State, use: Use, effect: Effect, doubt: Doubt, what: str, due: Content, **given: Any
) -> None:
    """A call that gives other elements than are due."""
    position, function = _index_store(search, state, use, given)
    if function == use.name and effect.before == effect.after:
        position = _return_position(search, state, use, **given)
    out = effect.outputs.get(use.channel, ())
    at = next((n for n, value in enumerate(due) if out[n : n + 1] != (value,)), len(due))
    ending = _output_ending(search, use, effect, at, due, search.origin(position))
    _report(search, state, effect, doubt, what, position, function, ending)


def _output_ending(search: Search, use: Use, effect: Effect, at: int, due: Content, where: Origin) -> Ending:
    """An ending by the element at a position of what came out."""
    wanted = str(due[at]) if at < len(due) else "nothing"
    if use.channel == "result" and isinstance(effect.outcome.value, int):
        return Ending("result", where, None, "", str(effect.outcome.value), wanted)
    if use.channel == "buffer" and search.world.element in (1, 2, 4) and search.world.parts == 1:
        out = effect.outputs.get("buffer", ())
        return Ending("value", where, None, f"{TAKEN}[{at}]", str(out[at] if at < len(out) else 0), wanted)
    return _index_ending(search, effect, where, f"where the call hands out {wanted}")


def _index_ending(search: Search, effect: Effect, where: Origin, due: str) -> Ending:
    """An ending by the index that moved, or by the first one."""
    moved = [at for at, (old, new) in enumerate(zip(effect.before, effect.after, strict=True)) if old != new]
    at = moved[0] if moved else 0
    _, name, path, _ = search.world.places[at]
    value = effect.after[at]
    type_ = search.world.readers[at][2]
    if not isinstance(type_, IntType):
        return Ending("value", where, None, name + path, f"&{STORAGE}" + (f" + {value} bytes" if value else ""), due)
    return Ending("value", where, None, name + path, str(value), due)


def _index_report(search: Search, state: State, use: Use, effect: Effect, doubt: Doubt, what: str) -> None:
    position, function = _index_store(search, state, use, {})
    at = next((n for n, (old, new) in enumerate(zip(effect.before, effect.after, strict=True)) if old != new), 0)
    ending = _index_ending(search, effect, search.origin(position), str(effect.before[at]))
    _report(search, state, effect, doubt, what, position, function, ending)


def _content(
    search: Search,
    state: State,
    use: Use,
    doubt: Doubt,
    what: str,
    due: Content,
    now: Content,
    **given: Any,
) -> None:
    """What the ring holds after a call is not what is due: shown by taking out up to the first wrong element."""
    if search.overflow:
        doubt = "overflow"
    take = search.take
    assert take is not None
    position, function = _index_store(search, state, use, given)
    search.world.load(state.saved)
    full = {"token": state.token, **given}
    effect = perform(search.world, use, search.probe.purse, **full)
    run = (*state.run, *_made(search, effect))
    place = search.origin(position)
    for number in range(len(due) + search.world.slots + 2):
        before = State(search.world.save(), due, run, state.token, state.suspect)
        last = perform(search.world, take, search.probe.purse)
        out = last.outputs.get(take.channel, ())[:1]
        wanted = due[number : number + 1]
        if last.refused and not wanted:
            break
        if last.refused or out != wanted:
            ending = (
                _output_ending(search, take, last, 0, wanted, place)
                if wanted
                else _index_ending(search, last, place, "unchanged, the ring being empty")
            )
            _report(search, before, last, doubt, what, position, function, ending)
            return
        if state.suspect is None:
            now_saved = search.world.save()
            state = replace(state, suspect=_suspect(search, before, take, last, {}))
            search.world.load(now_saved)
        run = (*run, *_made(search, last))


def _report(
    search: Search,
    state: State,
    effect: Effect,
    doubt: Doubt,
    what: str,
    position: Position,
    function: str,
    ending: Ending,
) -> None:
    """Keep a disagreement if its witness, run from nothing, ends as it says."""
    if state.suspect is not None:
        doubt, position, function = "out of range", state.suspect.position, state.suspect.function
        what = f"{state.suspect.what}; then {what}"
        ending = replace(ending, where=ending.where if ending.kind == "undefined" else search.origin(position))
    elif search.odd is not None and doubt in ("order", "room", "data", "occupancy"):
        doubt, position, function = "slots", search.odd.position, search.odd.function
        what = f"{search.odd.what}; then {what}"
        ending = replace(ending, where=search.origin(position))
    mark = (doubt, function)
    if mark in search.found or search.failed.get(mark, 0) >= TRIES:
        return
    run = (*state.run, *_made(search, effect))
    base = search.base
    calls = (*base.calls, *(item.call for item in run))
    witness = _trimmed(replace(base, calls=calls, ending=ending))
    done = replay(search.world.group.program, witness, origin=search.origin)
    if not done.held:
        search.failed[mark] = search.failed.get(mark, 0) + 1
        return
    steps = _steps(search, run, ending)
    where = search.origin(position)
    search.found[mark] = Disagreement(doubt, where, function, what, witness, steps)


def _result_text(effect: Effect) -> str:
    value = effect.outcome.value
    return str(value) if isinstance(value, int) else ""


def _trimmed(witness: Witness) -> Witness:
    """The witness without objects that no call or start value mentions, and without elements that are not given."""
    named = {item.to for call_ in witness.calls for item in call_.arguments if isinstance(item, Reference)}
    named |= {item.value.to for item in witness.start if isinstance(item.value, Reference)}
    named |= {item.object for item in witness.start if item.object not in (GIVEN, TAKEN)}
    most = 16 * 8  # a call may use some elements from there on
    used = [item for call_ in witness.calls for item in call_.arguments if isinstance(item, Reference)]
    end = max((item.at for item in used if item.to == GIVEN), default=-1) + 1 + most
    start = tuple(
        item
        for item in witness.start
        if item.object != GIVEN or (GIVEN in named and int(item.path[1:].partition("]")[0]) < end)
    )
    return replace(witness, made=tuple(item for item in witness.made if item.name in named), start=start)


def _steps(search: Search, run: Sequence[Made], ending: Ending) -> tuple[OrbitStep, ...]:
    """The calls with the indices' values after each; the middle of a long run left out."""
    shown: list[OrbitStep] = []
    skipped = len(run) - SHOWN
    for number, item in enumerate(run):
        if skipped > 1 and 3 <= number < 3 + skipped:
            continue
        text = _call_text(search, item)
        if skipped > 1 and number == 3 + skipped:
            text += f" (after {skipped} more calls)"
        function = search.world.group.functions[item.call.function]
        where = search.origin(function.position) if number < len(run) - 1 else ending.where
        names = (place[0] for place in search.world.places)
        values = tuple((name, str(value)) for name, value in zip(names, item.values, strict=True))
        shown.append(OrbitStep(where, text, values))
    return tuple(shown)


def _call_text(search: Search, item: Made) -> str:
    parts = [_value_text(search, value) for value in item.call.arguments]
    given = ", ".join(f"{value.name} gives {value.value}" for value in item.call.outside[:3])
    text = f"{item.name}({', '.join(parts)})"
    if item.result:
        text += f" returns {item.result}"
    return text + (f"; {given}" if given else "")


def _value_text(search: Search, value: Value) -> str:
    if value is None:
        return "NULL"
    if isinstance(value, Reference):
        name = value.to.rsplit(":", 1)[-1]
        if value.to == GIVEN:
            return f"element {search.world.tokens[value.at // search.world.parts]}"
        return f"&{name}{value.path}"
    return str(value)
