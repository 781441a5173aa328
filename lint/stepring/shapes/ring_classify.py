"""What a ring's operations are to be compared with: designs, ranges and what results tell, found in plain use."""

import re
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from stepring.meaning.types import IntType
from stepring.paths.types import Event
from stepring.paths.witness import Ending
from stepring.places import Position
from stepring.shapes.ring_calls import Effect, Way, call
from stepring.shapes.ring_compare import try_put
from stepring.shapes.ring_ideal import Content
from stepring.shapes.ring_occupancy import occupancy_tests, ways_taken
from stepring.shapes.ring_report import (
    Made,
    Search,
    State,
    Suspect,
    content_report,
    index_report,
    index_store,
    made_of,
    moved_text,
    report,
    return_position,
    shown,
    suspected,
)
from stepring.shapes.ring_types import Doubt
from stepring.shapes.ring_uses import (
    Use,
    designed,
    drained,
    others,
    perform,
    puts,
    takes,
)

_UNSAFE = re.compile(r"unsafe|uncheck|nocheck|fast|raw|force|from_isr|_locked|^_")
"""Names of functions whose callers are to look first."""


def classify(search: Search) -> None:
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
        if not found:
            _never_stores(search)
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
    _one_unchecked(search, kept)
    for use in spoilt:
        # Not even its first element comes out, though another put's do.
        try_put(search, State(probe.start, (), (), 0), use, deep=True)
    more = [use for use in probe.uses if use.kind == "take"]
    more.extend(others(probe, search.put, search.take))
    more = [_checked_take(search, use) if use.kind in ("take", "drop") else use for use in more]
    search.uses = [*kept, *(_told(search, use) for use in more)]
    _one_unguarded(search)


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
            what = (
                f"{use.name} does nothing while elements are stored, and on an empty ring {moved_text(search, effect)}"
            )
            index_report(search, State(probe.start, (), (), 0), use, effect, "data", what)


def _one_unchecked(search: Search, puts: Sequence[Use]) -> None:
    """Report a put that stores into the full ring where another put of it refuses: they were to be used alike.

    If none looks for room, callers may be meant to.
    """
    world, probe, take = search.world, search.probe, search.take
    checked = [use for use in puts if use.checked and use.design == "refuses" and not use.operation.helper]
    assert take is not None
    if not checked or not take.checked:
        return
    for use in puts:
        if use.checked or use.operation.helper or use.design != "unchecked" or _UNSAFE.search(use.name.lower()):
            continue
        probe.back()
        held: list[int] = []
        run: list[Made] = []
        for number in range(search.room):
            effect = call(world, use.operation, use.way, probe.purse, token=number)
            run.extend(made_of(search, effect))
            held.extend(value for _, value in effect.stored)
        state = State(world.save(), tuple(held), tuple(run), search.room)
        refused = call(world, checked[0].operation, checked[0].way, probe.purse, token=search.room).refused
        world.load(state.saved)
        effect = call(world, use.operation, use.way, probe.purse, token=search.room)
        if not refused or len(held) != search.room or not effect.returned or effect.refused:
            continue
        now, _ = drained(probe, take, search.room + world.slots + 2)
        if now == tuple(held):
            continue
        what = (
            f"{use.name} on a ring that holds {search.room} makes it give {shown(now)} where {shown(held)} is due; "
            f"{checked[0].name} refuses then"
        )
        content_report(search, state, use, "room", what, tuple(held), now, token=search.room)


def _one_unguarded(search: Search) -> None:
    """Report a take that takes from the empty ring where another take of it refuses."""
    world, probe = search.world, search.probe
    some = [use for use in search.uses if use.kind == "take" and use.first is None and not use.operation.helper]
    checked = [use for use in some if use.checked]
    for use in some:
        if not checked or use.checked or _UNSAFE.search(use.name.lower()):
            continue
        probe.back()
        if not perform(world, checked[0], probe.purse).refused:
            continue
        probe.back()
        effect = perform(world, use, probe.purse)
        if effect.returned and not effect.refused:
            what = f"{use.name} on an empty ring {moved_text(search, effect)}; {checked[0].name} refuses then"
            index_report(search, State(probe.start, (), (), 0), use, effect, "data", what)


def _never_stores(search: Search) -> None:
    """Report what stores into the full ring only: it says no to the first element already.

    That the room test is to blame shows on a ring that is made full by its indices alone: there the same call stores.
    """
    probe, world = search.probe, search.world
    indices = {place[3]: at for at, place in enumerate(world.places)}
    if world.storage is None or not all(isinstance(reader[2], IntType) for reader in world.readers):
        return
    full = {"count": world.slots} if "count" in indices else {"write": world.slots - 1}
    for operation in world.operations:
        item = operation.has("value") or operation.has("buffer")
        if operation.helper or not item or not occupancy_tests(probe, operation):
            continue
        use = Use(operation, "put")
        probe.back()
        first = call(world, operation, use.way, probe.purse)
        if not first.refused or not first.returned or not set(full) <= set(indices):
            continue
        stored = _stores_when(search, use, {indices[role]: value for role, value in full.items()})
        if not stored and "count" not in indices:
            stored = _stores_when(search, use, {indices["write"]: world.slots})
        if stored:
            at = indices.get("write", indices.get("count", 0))
            _, name, path, _ = world.places[at]
            position = return_position(search, State(probe.start, (), (), 0), use)
            due = "another value, the element being stored"
            ending = Ending("value", search.origin(position), None, name + path, str(first.after[at]), due)
            what = f"{use.name} stores nothing into the empty ring, and would store into the full one"
            report(search, State(probe.start, (), (), 0), first, "room", what, position, use.name, ending)


def _stores_when(search: Search, use: Use, values: Mapping[int, int]) -> bool:
    """Whether a put stores its element, and different ones differently, with indices at some values."""
    world, probe = search.world, search.probe
    seen: list[int] = []
    for token in range(2):
        probe.back()
        world.blot()
        for at, value in values.items():
            _, name, path, _ = world.places[at]
            world.memory.write(name + path, value)
        effect = call(world, use.operation, use.way, probe.purse, token=token)
        if not effect.returned or len(effect.stored) != 1 or effect.before == effect.after:
            return False
        seen.append(effect.stored[0][1])
    return seen[0] != seen[1]


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
        position, function = index_store(search, State(before, (), (), token), use, {})
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
            run.extend(made_of(search, effect))
        else:
            at = set(taken)
            state = replace(state, suspect=suspected(search, state, put, effect, {"token": number}))
    notices = bool(at - before) or put.design == "refuses"
    if put.operation.helper or not notices or put.room + 1 >= len(held) or put.room + 1 > search.world.slots + 1:
        return replace(put, checked=False, design="unchecked")
    after = held[put.room + 1]
    if len(after) == 0 or len(after) < put.room:
        lost = put.room + 1 - len(after)
        what = f"{put.name} on a ring that holds {put.room} elements loses {lost} of {put.room + 1}"
        content_report(search, state, put, "room", what, given[: put.room + 1], after, token=put.room)
    else:
        due = given[1 : put.room + 1]
        what = f"{put.name} on a ring that holds {put.room} makes it give {shown(after)} where {shown(due)} is due"
        doubt: Doubt = "room" if put.room >= search.world.slots - 1 and put.design == "refuses" else "order"
        content_report(search, state, put, doubt, what, due, after, token=put.room)
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
    if min(results) < 0:
        return use  # no truth value, and no number of elements
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
