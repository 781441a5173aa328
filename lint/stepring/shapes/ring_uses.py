"""What each function of a ring does, found by calling it: puts, takes, looks, drops, clears, tells.

Names say little and behaviour says all: an operation that stores what it is given into one slot and moves an index is a
put; one that hands out the oldest element and moves an index is a take. Each kind is asked of the ring in a state that
is beyond doubt: as it starts, or with a few elements in it.
"""

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from typing import Any, Literal, TypeAlias

from stepring.meaning.types import (
    IntType,
)
from stepring.paths.types import Event
from stepring.places import Position
from stepring.shapes.ring_calls import Effect, Policy, Purse, Way, call
from stepring.shapes.ring_ideal import Content, Design, design_of, room_of
from stepring.shapes.ring_parameters import Operation, variants
from stepring.shapes.ring_world import World

Kind: TypeAlias = Literal["put", "take", "look", "drop", "clear", "tell"]
PLAIN = Way()
SMALL = 8
"""Rings with at most so many slots are looked at state by state."""
_CLEAR = re.compile(r"flush|clear|purge|drop_?all|discard_?all|reset$")
"""What clears is seen by what it does; what is to clear and does not, by its name only."""
_LOOK = re.compile(r"peek|front|oldest|first")
POLICIES: tuple[Policy, ...] = ("zero", "one", "once")


@dataclass(frozen=True, slots=True)
class Use:
    """An operation and what it does.

    ``bulk``: it moves as many elements as its length says; ``numbered``: it drops as many as its number says.
    ``channel`` is where a take's or look's elements come out. ``design`` and ``room`` belong to a put. ``checked``: it
    looks at what the ring holds before (or after) it works, so that no caller need do it. ``tells`` names what a result
    tells: ``held``, ``free``, ``empty``, ``some``, ``full``, ``not full``; ``counts``: the result is the number
    of elements moved. ``first`` is the look that goes before a drop, where the two together are a take.
    """

    operation: Operation
    kind: Kind
    way: Way = PLAIN
    bulk: bool = False
    numbered: bool = False
    channel: str = ""
    design: Design = "unchecked"
    room: int = 0
    checked: bool = False
    tells: str = ""
    counts: bool = False
    first: "Use | None" = None

    @property
    def name(self) -> str:
        return self.operation.function.name


@dataclass(slots=True, eq=False)
class Probe:
    """A world and its start, to which every probe goes back."""

    world: World
    purse: Purse
    start: Any
    uses: list[Use] = field(default_factory=list)
    tests: dict[str, frozenset[Position]] = field(default_factory=dict)

    def back(self) -> None:
        self.world.load(self.start)


def perform(
    world: World,
    use: Use,
    purse: Purse,
    *,
    token: int = 0,
    number: int | None = None,
    length: int = 1,
    watch: list[Event] | None = None,
) -> Effect:
    """Call what a use consists of; arguments as for ``call``."""
    if use.first is None:
        return call(world, use.operation, use.way, purse, token=token, number=number, length=length, watch=watch)
    seen = call(world, use.first.operation, use.first.way, purse, watch=watch)
    if not seen.returned:
        return seen
    done = call(world, use.operation, use.way, purse, number=1, watch=watch)
    return replace(done, outputs={use.channel: seen.outputs.get(use.channel, ())}, prior=seen)


# ------------------------------------------------------------------------------------------------------------- puts


def puts(probe: Probe) -> list[Use]:
    """The operations that store one given element and move an index, those that can be entered first."""
    found: list[Use] = []
    for operation in sorted(probe.world.operations, key=lambda item: item.helper):
        found.extend(_first(_as_put(probe, item) for item in variants(operation)))
    return sorted(found, key=lambda use: (use.operation.helper, use.bulk))


def _first(found: Iterable[Use | None]) -> list[Use]:
    """The first way to use an operation; a number that is no length of many is better left 0."""
    uses: list[Use] = []
    for use in found:
        if use is not None:
            uses.append(use)
            if use.bulk or not use.operation.has("length"):
                return [use]
    return uses[:1]


def _as_put(probe: Probe, operation: Operation) -> Use | None:
    item = operation.has("value") or operation.has("buffer")
    policies: tuple[Policy, ...] = POLICIES if item else ("token", "token once")
    for policy in policies:
        way = Way(policy)
        one = _stores(probe, operation, way, 0, 1)
        if one is None or len(one.stored) != 1 or (not item and not one.call.outside):
            continue
        other = _stores(probe, operation, way, 1, 1)
        if other is None or len(other.stored) != 1 or one.stored[0][1] == other.stored[0][1]:
            continue
        bulk = False
        if operation.has("length"):
            two = _stores(probe, operation, way, 0, 2)
            bulk = two is not None and len(two.stored) == 2
        return Use(operation, "put", way, bulk)
    return None


def _stores(probe: Probe, operation: Operation, way: Way, token: int, length: int) -> Effect | None:
    """The effect of a put on the ring as it starts; None if nothing was put."""
    probe.back()
    probe.world.blot()
    effect = call(probe.world, operation, way, probe.purse, token=token, length=length)
    return effect if effect.returned and effect.before != effect.after and effect.stored else None


# ------------------------------------------------------------------------------------------------------------- takes


def filled(probe: Probe, put: Use, count: int, first: int = 0) -> Content | None:
    """Put some elements into the ring as it starts; what they are in the storage, None if one was refused."""
    probe.back()
    held: list[int] = []
    for number in range(count):
        effect = call(probe.world, put.operation, put.way, probe.purse, token=first + number)
        if not effect.returned or len(effect.stored) != 1:
            return None
        held.append(effect.stored[0][1])
    return tuple(held)


def takes(probe: Probe, put: Use) -> list[Use]:
    """The operations that hand out the oldest element and move an index."""
    held = filled(probe, put, min(3, probe.world.slots - 1))
    if held is None:
        return []
    state = probe.world.save()
    found: list[Use] = []
    mine = {use.operation.function.identity for use in probe.uses if use.kind == "put"}
    for operation in probe.world.operations:
        if operation.function.identity in mine:
            continue
        ways = (item for item in variants(operation) if not item.has("value"))
        found.extend(_first(_as_take(probe, item, state, held, put) for item in ways))
    found.sort(key=lambda use: (use.operation.helper, use.bulk, use.operation.has("buffer")))
    return found or _in_two_steps(probe, state, held, mine)


def _in_two_steps(probe: Probe, state: Any, held: Content, mine: set[str]) -> list[Use]:
    """Takes that consist of a look at the oldest element and a drop of it, by two functions."""
    looks: list[Use] = []
    drops: list[Use] = []
    for operation in probe.world.operations:
        if operation.function.identity in mine:
            continue
        probe.world.load(state)
        way = Way("zero", operation.has("buffer"))
        one = call(probe.world, operation, way, probe.purse, number=1)
        if not one.returned or one.stored:
            continue
        if one.before != one.after:
            if not operation.has("buffer"):
                drops.append(Use(operation, "drop", way, numbered=operation.has("value")))
            continue
        named = [name for name, values in one.outputs.items() if values[:1] == held[:1]]
        if named:
            looks.append(Use(operation, "look", way, channel=named[0]))
    for look in looks:
        for drop in drops:
            pair = replace(drop, kind="take", channel=look.channel, numbered=False, first=look)
            probe.world.load(state)
            perform(probe.world, pair, probe.purse)
            if perform(probe.world, pair, probe.purse).outputs.get(look.channel, ())[:1] == held[1:2]:
                return [pair]
    return []


def _as_take(probe: Probe, operation: Operation, state: Any, held: Content, put: Use) -> Use | None:
    taking = operation.has("buffer")
    for policy in POLICIES:
        way = Way(policy, taking)
        probe.world.load(state)
        one = call(probe.world, operation, way, probe.purse)
        if not one.returned or one.before == one.after or any(new for _, new in one.stored):
            continue
        channels = [name for name, values in one.outputs.items() if values == held[:1]]
        if not channels:
            continue
        if len(held) > 1:
            two = call(probe.world, operation, way, probe.purse)
            channels = [name for name in channels if two.outputs.get(name) == held[1:2]]
        elif channels:
            again = filled(probe, put, 1, first=3)
            two = call(probe.world, operation, way, probe.purse)
            channels = [name for name in channels if again and two.outputs.get(name) == again]
        if channels:
            bulk = False
            if operation.has("length") and len(held) > 1:
                probe.world.load(state)
                both = call(probe.world, operation, way, probe.purse, length=2)
                bulk = both.outputs.get(channels[0]) == held[:2] or len(both.outputs.get(channels[0], ())) == 2
            return Use(operation, "take", way, bulk, channel=channels[0])
    return None


def drained(probe: Probe, take: Use, most: int) -> tuple[Content, list[Effect]]:
    """Everything that taking gives from here on, at most so many elements, with the calls; the memory is changed."""
    held: list[int] = []
    calls: list[Effect] = []
    while len(held) < most:
        effect = perform(probe.world, take, probe.purse)
        calls.append(effect)
        if effect.refused or not effect.returned:
            break
        held.extend(effect.outputs.get(take.channel, ())[:1] or (-1,))
    return tuple(held), calls


# -------------------------------------------------------------------------------------------------------- other kinds


def others(probe: Probe, put: Use, take: Use) -> Iterator[Use]:
    """What the other operations do, as far as a ring with some elements shows it."""
    count = min(3, probe.world.slots - 1)
    held = filled(probe, put, count)
    if held is None or len(held) < 2:
        return
    state = probe.world.save()
    # A take in two steps drops one element: its second function alone may drop more.
    known = {use.operation.function.identity for use in probe.uses}
    if take.first is not None and take.operation.has("value"):
        probe.world.load(state)
        call(probe.world, take.operation, take.way, probe.purse, number=len(held) - 1)
        last = call(probe.world, take.first.operation, take.first.way, probe.purse)
        if last.outputs.get(take.channel, ())[:1] == held[-1:]:
            yield replace(take, kind="drop", numbered=True, first=None)
    for operation in probe.world.operations:
        if operation.function.identity not in known:
            ways = (_as_other(probe, item, state, held, put, take) for item in variants(operation))
            use = next(filter(None, ways), None)
            if use is not None:
                yield use


def _as_other(probe: Probe, operation: Operation, state: Any, held: Content, put: Use, take: Use) -> Use | None:
    numbered = operation.has("value")
    if operation.has("buffer") and not operation.has("length") and numbered:
        return None
    for policy in POLICIES:
        way = Way(policy, operation.has("buffer"))

        def left(number: int, way: Way = way) -> tuple[Effect, int]:
            probe.world.load(state)
            effect = call(probe.world, operation, way, probe.purse, number=number)
            return effect, len(drained(probe, take, len(held) + probe.world.slots)[0])

        one, rest = left(1)
        if not one.returned and not one.asserted:
            continue
        if one.stored:
            return None
        if one.returned and one.before == one.after:
            if _sets_back(probe, operation, way, put, take):
                return Use(operation, "clear", way)
            same = [name for name, values in one.outputs.items() if values[:1] == held[:1] and name != "result"]
            if same or one.outputs.get("result", ())[:1] == held[:1]:
                if _follows(probe, operation, way, state, take, (same or ["result"])[0], held):
                    return Use(operation, "look", way, channel=(same or ["result"])[0])
            ahead = _looks_ahead(probe, operation, way, state, one, held, take)
            if ahead is not None:
                return ahead
            result = isinstance(operation.function.type.returns, IntType)
            plain = not numbered and not operation.has("buffer")
            return Use(operation, "tell", way) if result and plain else None
        if operation.has("buffer"):
            return None
        if not numbered:
            if not one.returned:
                continue
            if not probe.world.keeps_size():
                return None  # it sets the ring up anew
            if rest == 0:
                return Use(operation, "clear", way)
            if rest == len(held) - 1:
                return Use(operation, "drop", way)
            return Use(operation, "clear", way) if _CLEAR.search(operation.function.name.lower()) else None
        if one.returned and rest == len(held) - 1 and left(2)[1] == len(held) - 2:
            return Use(operation, "drop", way, numbered=True)
        every, nothing = left(len(held))
        if every.returned and every.before != every.after and nothing == 0:
            return Use(operation, "drop", way, numbered=True, checked=one.asserted)
        return _spoilt_drop(probe, operation, way, state, held, take)
    return None


def _spoilt_drop(probe: Probe, operation: Operation, way: Way, state: Any, held: Content, take: Use) -> Use | None:
    """What is to drop elements and does something else: it moves what a take moves, and never more than there is.

    It does nothing on the empty ring, and asked for one more than there is it does as for all there is. What takes
    elements back does something only where elements were taken.
    """
    world = probe.world
    probe.back()
    if not call(world, operation, way, probe.purse, number=1).refused:
        return None
    world.load(state)
    taken = perform(world, take, probe.purse)
    moved = [old != new for old, new in zip(taken.before, taken.after, strict=True)]
    ends: list[Effect] = []
    for number in (1, len(held), len(held) + 1):
        world.load(state)
        effect = call(world, operation, way, probe.purse, number=number)
        mine = [old != new for old, new in zip(effect.before, effect.after, strict=True)]
        if not effect.returned or effect.stored or (number <= len(held) and mine != moved):
            return None
        ends.append(effect)
    if ends[2].refused or ends[1].after == ends[2].after:
        return Use(operation, "drop", way, numbered=True, checked=True)
    return None


def _looks_ahead(
    probe: Probe, operation: Operation, way: Way, state: Any, one: Effect, held: Content, take: Use
) -> Use | None:
    """What is called a look at the oldest element, and gives the one after it even where there is only one."""
    if not _LOOK.search(operation.function.name.lower()) or operation.has("value") or operation.has("length"):
        return None
    channels = [name for name, values in one.outputs.items() if values[:1] == held[1:2] and name != "result"]
    if not channels and one.outputs.get("result", ())[:1] == held[1:2]:
        channels = ["result"]
    if not channels or not _follows(probe, operation, way, state, take, channels[0], held[1:]):
        return None
    probe.world.load(state)
    for _ in held[1:]:
        perform(probe.world, take, probe.purse)
    last = call(probe.world, operation, way, probe.purse)
    probe.back()
    none = call(probe.world, operation, way, probe.purse)
    same = (
        last.outcome.value != none.outcome.value if channels == ["result"] else last.outcome.value == one.outcome.value
    )
    agreed = last.returned and none.returned and same
    return Use(operation, "look", way, channel=channels[0]) if agreed else None


def _sets_back(probe: Probe, operation: Operation, way: Way, put: Use, take: Use) -> bool:
    """Whether what is called a clear moves an index, if only of a ring that has been in use."""
    if not _CLEAR.search(operation.function.name.lower()) or operation.has("value") or operation.has("buffer"):
        return False
    probe.back()
    for number in range(2):
        call(probe.world, put.operation, put.way, probe.purse, token=number)
        perform(probe.world, take, probe.purse)
    call(probe.world, put.operation, put.way, probe.purse, token=2)
    effect = call(probe.world, operation, way, probe.purse)
    return effect.returned and not effect.stored and effect.before != effect.after


def _follows(probe: Probe, operation: Operation, way: Way, state: Any, take: Use, channel: str, held: Content) -> bool:
    """Whether a look gives the next element once the oldest was taken."""
    probe.world.load(state)
    perform(probe.world, take, probe.purse)
    after = call(probe.world, operation, way, probe.purse)
    return after.outputs.get(channel, ())[:1] == held[1:2]


# ------------------------------------------------------------------------------------------------------------ designs


def designed(probe: Probe, put: Use, take: Use) -> tuple[Use, tuple[Content, ...], Content] | None:
    """What a put does on a full ring: the put with its design, what the ring held after each put, and what was put.

    None if not even one element comes out as it went in.
    """
    world = probe.world
    probe.back()
    held: list[Content] = [()]
    put_in: list[int] = []
    refused = False
    extra = world.slots + 2 if take.checked else 0  # one that does not look gives something for ever
    for number in range(2 * world.slots + 2):
        effect = call(world, put.operation, put.way, probe.purse, token=number)
        if effect.refused:
            refused = True
            break
        if not effect.returned or len(effect.stored) > 1:
            break
        given = effect.stored[0][1] if effect.stored else world.tokens[number % len(world.tokens)]
        put_in.append(given)
        state = world.save()
        if world.slots <= SMALL or number + 1 == 1 or number + 1 >= world.slots - 1:
            held.append(drained(probe, take, len(put_in) + extra)[0])
            world.load(state)
        else:
            held.append(tuple(put_in))  # looked at when it is nearly full
        if number >= world.slots + 1 and world.slots > SMALL:
            break
    everything = tuple(put_in)
    room = room_of(held, everything)
    if room == 0:
        return None
    design: Design = "refuses" if refused else design_of(held, everything, room)
    return replace(put, design=design, room=room), tuple(held), everything
